"""Amplifiers inside models of every style that is met, with ngspice and without it."""

from pathlib import Path

import numpy as np
import pytest

from tests.linearisation.test_against_ngspice import simulated
from tests.stages.field_models import DECKS
from xcheck.deck.reader import read_text
from xcheck.options import Options
from xcheck.reviewed import Evidence
from xcheck.reviewing import analyse
from xcheck.simulate import find_engine
from xcheck.simulate.types import EngineInfo

NOT_MEASURABLE = "limits that ngspice draws at random"


def found(name: str, engine: EngineInfo) -> Evidence:
    cards, pins, kind = DECKS[name]
    evidence, findings = analyse(read_text(f"{name}\n{cards}.ac dec 10 1 1meg\n.end\n"), Options(), engine)
    amplifiers = evidence.partition.amplifiers
    assert {
        a.name: (a.non_inverting, a.inverting, a.output, a.positive_supply, a.negative_supply) for a in amplifiers
    } == pins, [a.evidence for a in amplifiers]
    assert {a.kind for a in amplifiers} == {kind}
    assert not [f.message for f in findings if f.level != "note" and f.rule != "amplifier-ideal"]
    return evidence


@pytest.mark.parametrize("name", DECKS)
def test_pins_and_kind_without_a_simulator(name: str) -> None:
    found(name, EngineInfo(available=False))


@pytest.mark.engine
@pytest.mark.parametrize("name", DECKS)
def test_pins_kind_and_impedances_at_the_operating_point(name: str) -> None:
    evidence = found(name, find_engine())
    for answer in evidence.answers:
        if name == NOT_MEASURABLE or answer.simulated is None:
            assert answer.verdict == "unchecked"
            continue
        assert answer.difference is not None, answer.unchecked_because
        assert answer.difference.max() < 1e-3, answer.port.subject


@pytest.mark.engine
def test_the_gain_that_is_measured_is_the_gain_that_ngspice_shows(tmp_path: Path) -> None:
    """V(out)/V(in-) in the closed loop, by ngspice alone, against the linearised model with its load."""
    cards, _, _ = DECKS["bipolar transistors"]
    evidence = found("bipolar transistors", find_engine())
    frequency, volts = simulated(f"gain\n{cards}.ac dec 5 1 1meg\n.end\n", tmp_path)
    (amplifier,) = evidence.partition.amplifiers
    model = amplifier.open_loop.model
    assert model is not None
    response = model.response(frequency)
    # the feedback resistor's current counts as load: its far end is nearly still beside the output
    load = 1 / (1 / 10e3 + 1 / 47e3)
    expected = response.gain_minus * load / (load + response.z_output)
    seen = volts["out"] / volts["sum"]
    assert np.max(np.abs(seen - expected) / np.abs(expected)) < 0.01
