"""The nodal equations against circuits solved by hand."""

import numpy as np
import pytest
from elements_by_hand import NOWHERE, by_current, by_voltage, c, i, k, l, r, v

from xcheck.circuit.arrays import Complex
from xcheck.circuit.elements import Device, Element
from xcheck.circuit.equations import Equations, Short, assemble
from xcheck.circuit.parts import with_least_conductance
from xcheck.errors import CallError


def dense(equations: Equations, hertz: float) -> Complex:
    matrix = np.zeros((equations.size, equations.size), dtype=np.complex128)
    matrix[equations.rows, equations.columns] = equations.values(np.array([hertz]))[:, 0]
    return matrix


def solved(elements: list[Element], injected: str, wanted: str, hertz: float = 1e3) -> complex:
    """The voltage of one node with 1 A into another."""
    equations = with_least_conductance(assemble(elements), hertz == 0)
    right = np.zeros(equations.size)
    right[equations.node[injected]] = 1.0
    return complex(np.linalg.solve(dense(equations, hertz), right)[equations.node[wanted]])


def test_divider() -> None:
    assert solved([r("r1", "a", "b", 3e3), r("r2", "b", "0", 2e3)], "a", "a") == pytest.approx(5e3)
    assert solved([r("r1", "a", "b", 30.0), r("r2", "b", "0", 20.0)], "a", "b") == pytest.approx(20.0)


def test_series_resonance_at_its_peak() -> None:
    elements: list[Element] = [r("r1", "a", "b", 50.0), l("l1", "b", "d", 1e-3), c("c1", "d", "0", 1e-9)]
    hertz = 1 / (2 * np.pi * np.sqrt(1e-3 * 1e-9))
    assert solved(elements, "a", "a", hertz) == pytest.approx(50.0, rel=1e-9)


def test_transformer_reflects_its_load() -> None:
    """Z = s L1 - (s M)^2 / (s L2 + R), any text on coupled inductors."""
    s = 2j * np.pi * 1e3
    elements: list[Element] = [
        l("l1", "a", "0", 2e-3),
        l("l2", "b", "0", 8e-3),
        k("k1", "l1", "l2", 0.9),
        r("r1", "b", "0", 7.0),
    ]
    m = 0.9 * np.sqrt(2e-3 * 8e-3)
    assert solved(elements, "a", "a") == pytest.approx(s * 2e-3 - (s * m) ** 2 / (s * 8e-3 + 7.0), rel=1e-12)


@pytest.mark.parametrize(
    ("source", "expected"),
    [
        (by_voltage("e1", "out", "0", (5.0, "a", "0")), 5.0 * 1e3),
        (by_voltage("e1", "out", "0", (5.0, "a", "0"), (2.0, "0", "a")), 3.0 * 1e3),
        (by_voltage("g1", "out", "0", (1e-3, "a", "0")), -1e-3 * 1e3 * 2e3),
        (by_current("h1", "out", "0", (7.0, "vs")), 7.0),
        (by_current("f1", "out", "0", (7.0, "vs")), -7.0 * 2e3),
    ],
)
def test_controlled_sources_have_the_signs_of_spice(source: Element, expected: float) -> None:
    """G and F drive their current from the first node through themselves to the second; the current read is
    that from the first node of the voltage source through it."""
    elements: list[Element] = [v("vs", "a", "b"), r("r1", "b", "0", 1e3), r("r2", "out", "0", 2e3), source]
    assert solved(elements, "a", "out") == pytest.approx(expected, rel=1e-12)


def test_dead_sources_are_a_short_and_an_open() -> None:
    elements: list[Element] = [r("r1", "a", "b", 1e3), v("v1", "b"), i("i1", "a"), r("r2", "b", "0", 1.0)]
    assert solved(elements, "a", "a") == pytest.approx(1e3, rel=1e-12)
    assert assemble(elements).node["b"] == -1


def test_tiny_resistors_do_not_drown_what_is_behind_them() -> None:
    """1 mohm as a conductance of 1000 S would leave of 1e-15 S one digit."""
    elements: list[Element] = [r("r1", "a", "b", 1e-3), r("r2", "b", "0", 1e15)]
    assert solved(elements, "a", "a") == pytest.approx(1e15, rel=1e-9)


def test_a_resistor_of_zero_is_a_milliohm() -> None:
    """As in ngspice 39, which says `resistance 0.001` of it."""
    assert solved([r("r1", "a", "0", 0.0)], "a", "a") == pytest.approx(1e-3)


def test_direct_current_sees_open_capacitors_and_shorted_inductors() -> None:
    elements: list[Element] = [
        r("r1", "a", "b", 1e3),
        l("l1", "b", "0", 1.0),
        c("c1", "a", "d", 1e-6),
        r("r2", "d", "0", 1e3),
    ]
    assert solved(elements, "a", "a", 0.0) == pytest.approx(1e3)


def test_only_a_part_without_a_path_to_ground_gets_the_least_conductance() -> None:
    elements: list[Element] = [c("c1", "a", "b", 1e-9), r("r1", "b", "d", 1e3), r("r2", "a", "0", 1e3)]
    equations = assemble(elements)
    assert with_least_conductance(equations, dc=False) is equations
    assert solved(elements, "a", "a", 0.0) == pytest.approx(1e3, rel=1e-12)
    assert solved(elements, "d", "b", 0.0) == pytest.approx(1e12)


def test_a_short_carries_its_current_as_an_unknown() -> None:
    equations = assemble([r("r1", "a", "0", 1e3), r("r2", "b", "0", 3e3)], [Short("cut", ("a", "b"))])
    right = np.zeros(equations.size)
    right[equations.node["a"]] = 1.0
    answer = np.linalg.solve(dense(equations, 0.0), right)
    assert answer[equations.branch["cut"]] == pytest.approx(0.25)


@pytest.mark.parametrize("name", ["e1", "g1"])
@pytest.mark.parametrize("far", ["0", "b"])
def test_an_explicit_output_is_what_the_source_gives(name: str, far: str) -> None:
    """A unit on its equation adds a unit to the output, and the unknown holds the output."""
    elements: list[Element] = [
        r("r1", "a", "0", 1e3),
        r("r2", "b", "0", 5e3),
        r("r3", "a", "b", 2e3),
        r("r4", "out", "0", 1e3),
        by_voltage(name, "out", far, (1e-3, "a", "0")),
    ]
    equations = assemble(elements, explicit={name})
    unknown, row = equations.output[name]
    right = np.zeros(equations.size)
    right[row] = 1.0
    answer = np.linalg.solve(dense(equations, 0.0), right)
    assert answer[unknown] - 1e-3 * answer[equations.node["a"]] == pytest.approx(1.0)
    voltage = answer[equations.node["out"]] - (answer[equations.node["b"]] if far == "b" else 0.0)
    current = -answer[equations.node["out"]] / 1e3
    assert answer[unknown] == pytest.approx(voltage if name == "e1" else current)


def test_devices_are_left_out() -> None:
    diode = Device("d1", "d", ("a", "0"), (), "d", "diode", NOWHERE)
    assert assemble([r("r1", "a", "0", 1e3), diode]).size == 1


def test_what_cannot_be_read_is_said() -> None:
    with pytest.raises(CallError, match="f1 reads the current of r1"):
        assemble([r("r1", "a", "0", 1e4), by_current("f1", "a", "0", (1.0, "r1"))])
    with pytest.raises(CallError, match="k1 couples l2"):
        assemble([l("l1", "a", "0", 1.0), k("k1", "l1", "l2", 0.5)])
    with pytest.raises(CallError, match="no finite number"):
        assemble([c("c1", "a", "0", float("nan"))])
