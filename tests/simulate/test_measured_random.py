"""Random decks of blocks within blocks, cut at random terminals, against dense nodal equations."""

import numpy as np
import pytest
from decks_by_hand import At, case, driven
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from xcheck.circuit.elements import Controlled
from xcheck.simulate import measure

FREQUENCY = 10.0 ** np.arange(0, 8)
SAME = 1e-6
ZERO = 1e-12
"""Ohm: of a node that an ideal source holds."""
LITTLE = 1e-9
"""Of 1 V or 1 A: a smaller part has too few sure figures in either method to be compared; it may have no value."""
OHMS = st.sampled_from((120.0, 1e3, 2.7e3, 3.3e4, 4.7e5))


@st.composite
def body(draw: st.DrawFn, nodes: tuple[str, ...], blocks: dict[str, int]) -> list[str]:
    """Cards among some nodes, each node with a resistor to ground, so that every network has one solution."""
    node = st.sampled_from(nodes)
    lines = [f"rg{k} {n} 0 {draw(OHMS):g}" for k, n in enumerate(nodes)]
    for k in range(draw(st.integers(1, 4))):
        kind = draw(st.sampled_from("rcgebx" if blocks else "rcgeb"))
        a, b, p, m = (draw(node) for _ in range(4))
        if kind == "x":
            block = draw(st.sampled_from(sorted(blocks)))
            pins = " ".join(draw(node) for _ in range(blocks[block]))
            lines.append(f"x{k} {pins} {block}")
        elif kind == "r":
            lines.append(f"r{k} {a} {b} {draw(OHMS):g}")
        elif kind == "c":
            lines.append(f"c{k} {a} {b} {draw(st.sampled_from((1e-11, 1e-9, 1e-7)))!r}")
        elif kind == "g":
            lines.append(f"g{k} {a} {b} {p} {m} 20u")
        elif kind == "e":
            lines += [f"e{k} s{k} 0 {p} {m} 3", f"re{k} s{k} {a} 1k"]
        else:
            lines.append(f"b{k} {a} {b} i=1e-5*(V({p}) - v({p}, {m})/2)")
    return lines


@st.composite
def decks(draw: st.DrawFn) -> str:
    blocks: dict[str, int] = {}
    lines: list[str] = []
    for name, pins in (("low", ("p", "q")), ("mid", ("a", "b", "c")), ("high", ("p", "q"))):
        if draw(st.booleans()):
            lines += [f".subckt {name} {' '.join(pins)}", *draw(body((*pins, "n"), dict(blocks))), ".ends"]
            blocks[name] = len(pins)
    return "\n".join([*lines, *draw(body(("a", "b", "c"), blocks)), "vs s 0 1 ac 1", "rs s a 50", ".end", ""])


@pytest.mark.engine
@settings(max_examples=25, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow])
@given(deck=decks(), data=st.data())
def test_any_terminals_of_any_node_can_be_cut_off(deck: str, data: st.DataObject) -> None:
    circuit = case(deck).circuit
    ports: list[At] = []
    for node in data.draw(st.permutations([n for n in circuit.nodes if n != "0"]))[:6]:
        terminals = [f"{e.name}/{k}" for e in circuit.elements for k, n in enumerate(e.nodes) if n == node]
        terminals += [f"{e.name}/-1" for e in circuit.elements if isinstance(e, Controlled) and node in e.sensing]
        inside = data.draw(st.lists(st.sampled_from(terminals), min_size=1, max_size=len(terminals), unique=True))
        ports.append(At(node, " ".join(inside), data.draw(st.sampled_from(("input", "output")))))
    made = case(deck, *ports)
    simulation = measure(made.deck, made.circuit, made.partition, FREQUENCY)
    assert not simulation.failure, simulation.failure
    for subject in made.ports:
        voltage, current = driven(made, subject, FREQUENCY)
        if np.min(np.abs(current)) < LITTLE or (np.min(np.abs(voltage)) < LITTLE and np.any(voltage != 0)):
            reason = simulation.unmeasured.get(subject, "infinite")
            assert "infinite" in reason or "beyond measure" in reason
        else:
            expected = voltage / current
            assert subject in simulation.values, (subject, simulation.unmeasured)
            assert np.all(np.abs(simulation.values[subject] - expected) <= SAME * np.abs(expected) + ZERO)
