"""Rules that read ngspice's operating point, on decks that ngspice runs."""

from pathlib import Path

import pytest

from tests.stages.macromodels import definition
from xcheck.deck.reader import read_text
from xcheck.options import Options
from xcheck.parts.catalogue import find
from xcheck.reviewing import analyse
from xcheck.simulate import find_engine

CASES = Path(__file__).parent / "cases"
PART = """.subckt {name} p n vp vn o
rid p n 2meg
g1 0 a p n 1m
ra a 0 200meg
ca a 0 159p
e2 b 0 a 0 1
ro b o 75
rq vp vn 20k
.ends {name}
"""
DUAL = "vp vp 0 12\nvn vn 0 -12\n"
SINGLE = "vp vp 0 5\n"


def said(rule: str, name: str, cards: str) -> list[tuple[str, int]]:
    text = f"Gauge head\n{PART.format(name=name)}{cards}\n.end\n"
    _, findings = analyse(read_text(text), Options(), find_engine())
    lines = text.splitlines()
    return [(lines[f.place.line - 1].split()[0], f.place.column) for f in findings if f.rule == rule]


FOLLOWER = "vin in 0 {volt} ac 1\nxu1 in out vp vn out {name}\nrl out 0 10k\n"
RAIL = "output-at-rail"
PINS = dict(zip(("p", "n", "vp", "vn", "o"), "12345", strict=True))
CLIPPED = definition("bipolar", "* in+ in- v+ v- out\n.subckt railed 1 2 3 4 5", PINS, "railed")


@pytest.mark.engine
@pytest.mark.parametrize(("volt", "lines"), [(1.0, ["xu1"]), (-1.0, ["xu1"]), (0.0, [])])
def test_a_model_that_clips_before_its_supply_is_at_its_rail(volt: float, lines: list[str]) -> None:
    stage = f"vin in 0 {volt} ac 1\nr1 in m 1k\nr2 m out 100k\nxu1 0 m vp vn out railed\nrl out 0 10k\n"
    assert [card for card, _ in said(RAIL, "gauge7", CLIPPED + DUAL + stage)] == lines


@pytest.mark.engine
def test_a_comparator_belongs_at_its_rail() -> None:
    stage = "vin in 0 1 ac 1\nxu1 in 0 vp vn out lm393\nrl out 0 10k\n"
    assert said(RAIL, "lm393", DUAL + stage) == []
    assert said("feedback-missing", "lm393", DUAL + stage) == [("xu1", 1)], "as a note"


RANGE = "input-outside-common-mode"


@pytest.mark.engine
@pytest.mark.parametrize(
    ("name", "cards"),
    [
        ("lm358", DUAL + FOLLOWER.format(volt=11.2, name="lm358")),  # 1.5 V below the positive supply is the end
        ("gauge7", DUAL + FOLLOWER.format(volt=12, name="gauge7")),  # at the supply, of a part that nobody knows
        ("gauge7", SINGLE + "vin in 0 -0.3 ac 1\nxu1 in out vp 0 out gauge7\nrl out 0 10k\n"),
        (
            "lm358",
            DUAL + ".subckt stage i o vp vn\nxa i o vp vn o lm358\n.ends\n"
            "vin in 0 11 ac 1\nxst in out vp vn stage\nrl out 0 10k\n",
        ),
    ],
)
def test_an_input_outside_the_range_is_said_at_its_node(name: str, cards: str) -> None:
    ((card, column),) = said(RANGE, name, cards)
    assert card in ("xu1", "xa")
    assert column == len(card) + 2


@pytest.mark.engine
@pytest.mark.parametrize(
    ("name", "cards"),
    [
        ("lm358", DUAL + FOLLOWER.format(volt=10.4, name="lm358")),
        ("lm358", SINGLE + "vin in 0 0 ac 1\nxu1 in out vp 0 out lm358\nrl out 0 10k\n"),  # its range has the ground
        ("gauge7", DUAL + FOLLOWER.format(volt=11.9, name="gauge7")),
        ("gauge7", SINGLE + "vin in 0 0 ac 1\nxu1 in out vp 0 out gauge7\nrl out 0 10k\n"),
    ],
)
def test_an_input_within_the_range_is_let_be(name: str, cards: str) -> None:
    assert said(RANGE, name, cards) == []


CURRENT = "output-current-exceeded"


def current(part: str, share: float, how: str = "r") -> str:
    """A follower at 2 V whose load draws a share of what the part gives."""
    found = find(part)
    assert found is not None
    ampere = share * found.values["output_current_a"]
    loads = {"r": f"rl out 0 {2 / ampere!r}", "i": f"il out 0 {ampere!r}", "v": f"rl out k {2 / ampere!r}\nvk k 0 0"}
    return DUAL + f"vin in 0 2 ac 1\nxu1 in out vp vn out {part}\n{loads[how]}\n"


@pytest.mark.engine
@pytest.mark.parametrize("how", ["r", "i", "v"])
def test_an_output_current_beyond_the_data_sheet_is_said(how: str) -> None:
    assert said(CURRENT, "ua741", current("ua741", 1.5, how)) == [("xu1", 8)]


@pytest.mark.engine
@pytest.mark.parametrize("how", ["r", "i", "v"])
def test_an_output_current_within_the_data_sheet_is_let_be(how: str) -> None:
    assert said(CURRENT, "ua741", current("ua741", 0.8, how)) == []


@pytest.mark.engine
def test_of_a_part_without_a_known_current_nothing_is_said() -> None:
    load = "vin in 0 2 ac 1\nxu1 in out vp vn out gauge7\nrl out 0 1\n"
    assert said(CURRENT, "gauge7", DUAL + load) == []
