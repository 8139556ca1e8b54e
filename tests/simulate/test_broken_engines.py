"""Engines that break in every way: each becomes a reason in words, and what was answered before is kept."""

import sys
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pytest

from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.simulate import find_engine, measure
from xcheck.simulate.engine import probed
from xcheck.simulate.process import WORKER
from xcheck.simulate.types import EngineInfo, Simulation
from xcheck.stages import find_amplifiers, split

DECK = "t\nv1 in 0 ac 1\nr1 in n 10k\nr2 n out 100k\ne1 a 0 0 n 1e5\nro a out 50\nrid n 0 1meg\n{}\n.end\n"
ENGINE = EngineInfo(available=True, version="39", library="lib", code_models=True)


def fake(body: str) -> Sequence[str]:
    """A worker that reads its job and then does as told."""
    return (sys.executable, "-c", f"import json,os,signal,sys,time\njob=json.load(sys.stdin)\n{body}")


def answer(**event: object) -> str:
    return f"print({event!r}.__repr__().replace(chr(39), chr(34)), flush=True)\n"


def simulate(command: Sequence[str], extra: str = "", engine: EngineInfo = ENGINE) -> Simulation:
    deck = read_text(DECK.format(extra))
    circuit = elaborate(deck)
    amplifiers, findings = find_amplifiers(circuit)
    partition = split(circuit, amplifiers, findings)
    return measure(deck, circuit, partition, np.array([1.0, 10.0]), time_limit=3.0, engine=engine, command=command)


DONE = answer(event="done", messages=[])
PORT = answer(event="port", subject="e1.in", frequency=[[1, 0], [10, 0]], voltage=[[1, 0]] * 2, current=[[1e-4, 0]] * 2)
NAN = 'print(\'{"event": "port", "subject": "e1.in", "frequency": [[1, 0], [10, 0]], '
NAN += '"voltage": [[NaN, 0], [1, 0]], "current": [[1, 0], [1, 0]]}\', flush=True)\n'


@pytest.mark.parametrize(
    ("body", "step", "words"),
    [("os.kill(os.getpid(), signal.SIGSEGV)", "crash", "SIGSEGV"), ("time.sleep(60)", "time limit", "3 s"),
     ("sys.exit(7)", "crash", "7"), ("", "crash", ""),
     (answer(event="failed", step="operating point", words="singular: node n") + DONE, "operating point", "singular")],
)  # fmt: skip
def test_a_worker_that_breaks_is_told_in_words(body: str, step: str, words: str) -> None:
    simulation = simulate(fake(body))
    assert simulation.failed_step == step
    assert words in simulation.failure
    assert simulation.failure
    assert set(simulation.unmeasured) == {"e1.in", "e1.out"}


def test_what_was_measured_before_a_crash_is_kept() -> None:
    simulation = simulate(fake(PORT + "os.kill(os.getpid(), signal.SIGSEGV)"))
    assert np.allclose(simulation.values["e1.in"], 1e4)
    assert set(simulation.unmeasured) == {"e1.out"}
    assert simulation.failed_step == "crash"


def test_a_vector_that_is_missing_and_values_that_are_no_numbers() -> None:
    missing = simulate(
        fake(answer(event="unmeasured", subject="e1.in", reason="no such vector") + answer(event="done", messages=[]))
    )
    assert "no such vector" in missing.unmeasured["e1.in"]
    broken = simulate(fake(NAN + answer(event="done", messages=[])))
    assert "no numbers" in broken.unmeasured["e1.in"]


@pytest.mark.parametrize(
    ("body", "words"),
    [(answer(event="engine", version="26", code_models=1), "26"), ("sys.exit(3)", "3"), ("time.sleep(60)", "s"),
     (answer(event="failed", step="load", words="no such library"), "no such library")],
)  # fmt: skip
def test_an_engine_that_is_of_no_use(body: str, words: str) -> None:
    info = probed("lib", "", tuple(fake(body)), 2.0)
    assert not info.available
    assert words in info.reason


@pytest.mark.engine
def test_without_code_models_a_polynomial_source_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("SPICE_LIB_DIR", str(tmp_path))  # no start-up file there, so no code models
    bare = find_engine()
    assert bare.available
    assert not bare.code_models
    simulation = simulate(WORKER, "ep q 0 poly(1) in 0 0 1\nrq q 0 1k", bare)
    assert simulation.failed_step == "load"
    assert "code models are missing" in simulation.failure
