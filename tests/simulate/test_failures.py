"""What goes wrong with ngspice is told in its own words, and the analytic answers still come."""

from pathlib import Path

import numpy as np
import pytest

from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.options import Options
from xcheck.reviewing import review
from xcheck.simulate import find_engine, measure
from xcheck.simulate.types import Simulation
from xcheck.stages import find_amplifiers, split

DECK = """inverting stage
v1 in 0 dc 0 ac 1
r1 in n 10k
r2 n out 100k
e1 a 0 0 n 100k
ro a out 50
rid n 0 1meg
{extra}
.end
"""


def simulate(extra: str, **limits: float) -> Simulation:
    deck = read_text(DECK.format(extra=extra))
    circuit = elaborate(deck)
    amplifiers, findings = find_amplifiers(circuit)
    partition = split(circuit, amplifiers, findings)
    return measure(deck, circuit, partition, np.logspace(0, 3, 31), **limits)  # type: ignore[arg-type]


@pytest.mark.engine
def test_a_sound_deck_is_measured() -> None:
    simulation = simulate("")
    assert simulation.failure == ""
    assert set(simulation.values) == {"e1.in", "e1.out"}
    # 10 kOhm and (100 kOhm + 50 Ohm)/(1 + A) beside Rid: the published inverting stage with finite gain
    expected = 10e3 + 1 / (1 / 1e6 + (1 + 1e5) / (100e3 + 50))
    assert np.allclose(simulation.values["e1.in"], expected, rtol=1e-9)


@pytest.mark.engine
def test_a_deck_that_ngspice_refuses() -> None:
    simulation = simulate("rx out 0 {nowhere}")
    assert simulation.failed_step in ("load", "crash")
    assert simulation.failure
    assert set(simulation.unmeasured) == {"e1.in", "e1.out"}


@pytest.mark.engine
def test_contradicting_sources_give_no_operating_point() -> None:
    simulation = simulate("vx in 0 1")
    assert simulation.failed_step == "operating point"
    assert "singular" in simulation.failure.lower() or "aborted" in simulation.failure.lower()


@pytest.mark.engine
def test_the_time_limit_ends_the_worker() -> None:
    simulation = simulate("", time_limit=0.01)
    assert simulation.failed_step == "time limit"
    assert "stopped" in simulation.failure


@pytest.mark.engine
def test_the_memory_limit_is_told() -> None:
    simulation = simulate("", memory_limit=60_000_000)
    assert simulation.failed_step in ("memory limit", "crash")
    assert simulation.failure


def test_a_library_that_is_not_there(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("NGSPICE_LIBRARY_PATH", "/nowhere/libngspice.so.0")
    info = find_engine()
    assert not info.available
    assert "libngspice" in info.reason


def test_without_any_library_the_analytic_answers_come(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("NGSPICE_LIBRARY_PATH", "/nowhere/libngspice.so.0")
    path = tmp_path / "deck.cir"
    path.write_text(DECK.format(extra="rl out 0 10k"))
    outcome = review(path, options=Options(engine="auto"))
    assert not outcome.engine.available
    evidence = outcome.decks[0].evidence
    assert evidence is not None
    assert all(a.return_ratio is not None and a.verdict == "unchecked" for a in evidence.answers)


@pytest.mark.engine
def test_cuts_change_nothing_in_nested_and_shared_blocks() -> None:
    text = """blocks in blocks
.subckt amp p n o
rid p n 1meg
e1 a 0 p n 100k
r1 a b 1k
c1 b 0 1.6u
e2 c 0 b 0 1
ro c o 50
.ends
.subckt pair i o
xa i f f amp
r1 f n 10k
r2 n o 20k
xb 0 n o amp
.ends
v1 in 0 dc 0.5 ac 1
xp in m pair
xq m out pair
rl out 0 10k
.end
"""
    deck = read_text(text)
    circuit = elaborate(deck)
    amplifiers, findings = find_amplifiers(circuit)
    partition = split(circuit, amplifiers, findings)
    simulation = measure(deck, circuit, partition, np.logspace(0, 6, 61))
    assert len(partition.stages) == 4
    assert not simulation.unmeasured, simulation.unmeasured
    assert simulation.operating_point["out"] == pytest.approx(0.5 * 4, rel=1e-3)
