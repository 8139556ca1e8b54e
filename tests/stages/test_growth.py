"""Work grows in step with the circuit, and alike amplifiers are reduced once: counted, not timed."""

import sys
from collections.abc import Callable
from types import FrameType

import numpy as np
import pytest
from gauge import OPAMP, SUPPLIES, circuit_of

from xcheck.circuit.elements import Circuit
from xcheck.stages import find_amplifiers, split


def chain(count: int) -> str:
    return "".join(
        f"r1_{k} o{k} n{k} {10 + k % 7}k\nr2_{k} n{k} o{k + 1} 20k\nxu{k} 0 n{k} vp vn o{k + 1} gaugeamp\n"
        for k in range(count)
    )


def star(count: int) -> str:
    """All stages on one source behind one resistor, and on one reference."""
    legs = "".join(
        f"r1_{k} hub n{k} 10k\nr2_{k} n{k} o{k} 20k\nxu{k} mid n{k} vp vn o{k} gaugeamp\n" for k in range(count)
    )
    return "rs o0in hub 100\nrd1 vp mid 1k\nrd2 vn mid 1k\ncd mid 0 1000u\n" + legs


def followers_on_one_node(count: int) -> str:
    return "rs o0in hub 100\nrb hub 0 1meg\n" + "".join(f"xu{k} hub o{k} vp vn o{k} gaugeamp\n" for k in range(count))


def ring(count: int) -> str:
    """Integrators in one loop: one stage of all."""
    return "".join(
        f"r1_{k} o{k} n{k} 10k\nc2_{k} n{k} o{(k + 1) % count} 1n\nxu{k} 0 n{k} vp vn o{(k + 1) % count} gaugeamp\n"
        for k in range(count)
    )


def bare(count: int) -> str:
    return "".join(
        f"r1_{k} o{k} n{k} 10k\nr2_{k} n{k} o{k + 1} 20k\ne{k} x{k} 0 0 n{k} 1e5\nro{k} x{k} o{k + 1} 50\n"
        for k in range(count)
    )


def lines_run(work: Callable[[], object]) -> int:
    """How many lines of this package's code run."""
    count = 0

    def local(frame: FrameType, event: str, _: object) -> object:
        nonlocal count
        count += event == "line"
        return local

    def calls(frame: FrameType, event: str, _: object) -> object:
        return local if "xcheck" in frame.f_code.co_filename else None

    before = sys.gettrace()
    sys.settrace(calls)
    try:
        work()
    finally:
        sys.settrace(before)
    return count


def found_and_split(circuit: Circuit) -> Callable[[], object]:
    return lambda: split(circuit, find_amplifiers(circuit)[0])


@pytest.mark.parametrize("make", [chain, star, followers_on_one_node, ring, bare])
def test_work_grows_in_step_with_the_number_of_stages(make: Callable[[int], str]) -> None:
    run = {}
    for count in (50, 200):
        circuit = circuit_of(OPAMP + SUPPLIES + "vin o0in 0 ac 1\nrin o0in o0 1\n" + make(count))
        run[count] = lines_run(found_and_split(circuit))
    assert run[200] < 4.4 * run[50]


def test_alike_instances_are_solved_once(monkeypatch: pytest.MonkeyPatch) -> None:
    solved = []
    solve = np.linalg.solve
    monkeypatch.setattr(np.linalg, "solve", lambda *a: solved.append(1) or solve(*a))
    for body in (chain, bare):
        counts = []
        for count in (10, 300):
            circuit = circuit_of(OPAMP + SUPPLIES + "vin o0 0 ac 1\n" + body(count))
            solved.clear()
            assert len(find_amplifiers(circuit)[0]) == count
            counts.append(len(solved))
        assert counts[0] == counts[1]
