"""Op-amps whose model the export left out: found by their part, with the data sheet's values in the model's place."""

import math

import numpy as np
import pytest

from xcheck.deck.reader import read_text
from xcheck.finding import Finding
from xcheck.options import Options
from xcheck.parts.catalogue import find
from xcheck.reviewed import Evidence
from xcheck.reviewing import analyse
from xcheck.simulate import find_engine
from xcheck.simulate.types import EngineInfo
from xcheck.stages.standins import second_pole, stated
from xcheck.stages.types import Quantity

SUPPLIES = "vcc vcc 0 12\nvee vee 0 -12\nvin in 0 0 ac 1\n"
STAGE = "r1 in n 10k\nr2 n out 47k\nrl out 0 10k\n"


def reviewed(cards: str, engine: EngineInfo | None = None) -> tuple[Evidence, list[Finding]]:
    deck = read_text(f"level stage\n{SUPPLIES}{cards}.ac dec 10 1 1meg\n.end\n")
    evidence, findings = analyse(deck, Options(), engine or EngineInfo(available=False))
    return evidence, [f for f in findings if f.level != "note"]


@pytest.mark.parametrize(
    "card",
    [
        "xu1 0 n vcc vee out lm741",
        "xu1 0 n out vcc vee LM741CN",  # supplies at the end
        "xu1 0 n vee vcc out ua741",  # negative supply first
        "xu1 out n 0 vcc vee lm741/ns",  # output first
        "xu1 vcc vee 0 n out lm741_3",  # supplies first
        "xu1 nc1 n 0 vee nc5 out vcc nc8 lm741",  # the package's eight pins
        "xu1 0 n out lm741",
    ],
)
def test_pins_of_a_single_part(card: str) -> None:
    evidence, findings = reviewed(f"{STAGE}{card}\n")
    (amplifier,) = evidence.partition.amplifiers
    assert (amplifier.non_inverting, amplifier.inverting, amplifier.output) == ("0", "n", "out")
    if len(card.split()) > 5:
        assert (amplifier.positive_supply, amplifier.negative_supply) == ("vcc", "vee")
    assert "catalogue" in amplifier.evidence[0]
    assert [f.rule for f in findings] == ["undefined-model"]
    assert evidence.recognised["xu1"].topology == "inverting"


def test_a_dual_is_two_amplifiers_by_its_package() -> None:
    cards = "r1 in n 10k\nr2 n a 10k\nxu1 a n 0 vee a b b vcc tl072\nrl b 0 10k\n"
    evidence, _ = reviewed(cards)
    found = [(a.name, a.non_inverting, a.inverting, a.output) for a in evidence.partition.amplifiers]
    assert found == [("xu1.1", "0", "n", "a"), ("xu1.2", "a", "b", "b")]
    assert {name: r.topology for name, r in evidence.recognised.items()} == {
        "xu1.1": "inverting",
        "xu1.2": "voltage-follower",
    }


def test_nodes_that_fit_no_order_are_said() -> None:
    _, findings = reviewed(f"{STAGE}xu1 0 n a b out lm741\nra a 0 1k\nrb b 0 1k\n")
    assert "amplifier-pins-uncertain" in {f.rule for f in findings}


@pytest.mark.parametrize("name", ["gauge7", "lm7805", "opamp", "lm311"])
def test_what_is_no_op_amp_by_its_name_is_none(name: str) -> None:
    evidence, _ = reviewed(f"{STAGE}xu1 0 n vcc vee out {name}\n")
    assert evidence.partition.amplifiers == ()


def test_values_say_where_they_come_from_and_both_methods_use_them() -> None:
    evidence, _ = reviewed(f"{STAGE}xu1 0 n vcc vee out lm358\n")
    values = evidence.partition.amplifiers[0].open_loop.values
    assert (values["gain"].value, values["gain"].origin) == (pytest.approx(1e5), "data sheet")
    assert values["input_resistance_ohm"].origin == "assumed", "the catalogue does not know it"
    for answer in evidence.answers:
        assert answer.return_ratio is not None
        assert answer.closed_form is not None
        assert answer.verdict == "unchecked"
        np.testing.assert_allclose(answer.closed_form.value, answer.return_ratio.impedance, rtol=1e-9)
        assert answer.data_sheet is not None
        np.testing.assert_allclose(answer.data_sheet, answer.return_ratio.impedance, rtol=1e-9)


@pytest.mark.engine
def test_ngspice_is_not_asked_to_run_what_is_not_all_there() -> None:
    evidence, findings = reviewed(f"{STAGE}xu1 0 n vcc vee out lm741\n", find_engine())
    assert [f.rule for f in findings] == ["undefined-model"]
    assert all("the deck does not define `lm741`" in a.unchecked_because for a in evidence.answers)


def test_the_second_pole_by_the_phase_margin() -> None:
    # by hand: 45 degrees at unity gain is a second pole at the crossover, 1 MHz cos 45
    assert second_pole(1e6, 45.0) == pytest.approx(1e6 * math.cos(math.pi / 4))
    assert math.isinf(second_pole(1e6, 90.0))
    crossing = 1e6 * math.cos(math.radians(30))
    lag = math.degrees(math.atan(crossing / second_pole(1e6, 60.0)))
    assert lag == pytest.approx(30.0)


def test_the_order_in_which_values_are_taken() -> None:
    own = {"gain": Quantity(5.0, "deck"), "input_capacitance_f": Quantity(1e-12, "deck")}
    found = stated(find("ua741"), own, {"output_resistance_ohm": 60.0})
    assert found["gain"] == Quantity(2e5, "data sheet")
    assert found["output_resistance_ohm"] == Quantity(60.0, "project")
    assert stated(None, own)["input_capacitance_f"] == Quantity(1e-12, "deck")
    assert stated(None, {})["gain"].origin == "assumed"
