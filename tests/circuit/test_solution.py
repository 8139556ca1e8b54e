"""Entries of the inverse against numpy's dense inverse, and what happens where there is none."""

import numpy as np
import pytest
from elements_by_hand import by_voltage, c, l, r, v
from hypothesis import given, settings
from hypothesis import strategies as st

from xcheck.circuit import solution
from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Element
from xcheck.circuit.equations import Equations, Short, assemble
from xcheck.circuit.ordering import matched, pivot_order
from xcheck.circuit.solution import by_column, inverse_by_part, inverse_entries, residual, selected_inverse
from xcheck.errors import SingularCircuit


def dense(equations: Equations, frequency: Real) -> Complex:
    """numpy's inverse at each frequency, frequency last."""
    matrix = np.zeros((len(frequency), equations.size, equations.size), dtype=np.complex128)
    matrix[:, equations.rows, equations.columns] = equations.values(frequency).T
    inverse: Complex = np.moveaxis(np.linalg.inv(matrix), 0, -1)
    return inverse


def everything(equations: Equations) -> tuple[np.ndarray, np.ndarray]:
    grid = np.indices((equations.size, equations.size)).reshape(2, -1)
    return grid[0], grid[1]


def ladder(rungs: int, rng: np.random.Generator) -> list[Element]:
    """A ladder of all passives with a unilateral amplifier over every third rung."""
    elements: list[Element] = []
    for n in range(rungs):
        left, right = f"n{n}", f"n{n + 1}"
        elements.append(r(f"r{n}", left, right, 10 ** rng.uniform(1, 5)))
        elements.append(c(f"c{n}", right, "0", 10 ** rng.uniform(-12, -8)))
        if n % 3 == 0:
            elements += [
                by_voltage(f"e{n}", f"x{n}", "0", (10 ** rng.uniform(0, 5), left, right)),
                r(f"ro{n}", f"x{n}", f"y{n}", 100.0),
                l(f"l{n}", f"y{n}", right, 1e-3),
            ]
    return [*elements, r("rin", "n0", "0", 1e4)]


@settings(max_examples=25, deadline=None)
@given(st.integers(1, 12), st.integers(0, 2**32 - 1))
def test_entries_are_those_of_the_dense_inverse(rungs: int, seed: int) -> None:
    equations = assemble(ladder(rungs, np.random.default_rng(seed)))
    frequency = np.logspace(0, 7, 8)
    unknowns, rows = everything(equations)
    expected = dense(equations, frequency)
    found = inverse_entries(equations, frequency, unknowns, rows).reshape(expected.shape)
    matrix = np.zeros((len(frequency), equations.size, equations.size), dtype=np.complex128)
    matrix[:, equations.rows, equations.columns] = equations.values(frequency).T
    condition = np.linalg.cond(matrix)
    scale = np.abs(expected).max(axis=(0, 1))
    bound = 1e-14 * condition * scale  # what rounding may do to numpy's own inverse
    assert (np.abs(found - expected) <= np.maximum(bound, 1e-12 * scale)).all()


def test_entries_on_the_pattern_need_no_solution() -> None:
    """The same pattern serves all frequencies, and the residual sees every column."""
    equations = assemble(ladder(9, np.random.default_rng(5)))
    frequency = np.logspace(0, 6, 31)
    values = equations.values(frequency)
    none = np.zeros(0, dtype=np.int64)
    pattern = pivot_order(equations, values[:, 0], none, none)
    _, inverse = selected_inverse(pattern, values)
    assert residual(equations, pattern, values, inverse).max() < 1e-14
    spoilt = inverse.copy()
    places = pattern.mirrored(pattern.given)
    spoilt[places[np.argmax(np.abs(values * inverse[places])[:, 7])], 7] *= 1.001
    assert residual(equations, pattern, values, spoilt)[7] > 1e-5


def test_pivots_are_the_matching_with_the_largest_product() -> None:
    """By trying all orders of a 4 x 4 example."""
    from itertools import permutations

    equations = assemble(
        [
            r("r1", "a", "b", 2e3),
            r("r2", "b", "0", 5e3),
            r("r3", "b", "d", 1e3),
            by_voltage("e1", "d", "0", (-1e5, "b", "0")),
            r("r4", "a", "0", 1e4),
        ]
    )
    values = equations.values(np.array([1.0]))[:, 0]
    matrix = np.zeros((equations.size, equations.size))
    matrix[equations.rows, equations.columns] = np.abs(values)
    rows = np.arange(equations.size)
    best = max(float(np.prod(matrix[rows, list(p)])) for p in permutations(range(equations.size)))
    assert float(np.prod(matrix[rows, matched(equations, values)])) == pytest.approx(best)


def test_blocks_of_frequencies_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    equations = assemble(ladder(6, np.random.default_rng(2)))
    unknowns, rows = everything(equations)
    frequency = np.logspace(0, 6, 13)
    whole = inverse_entries(equations, frequency, unknowns, rows)
    monkeypatch.setattr(solution, "BLOCK_BYTES", 1.0)
    parts = inverse_entries(equations, frequency, unknowns, rows)
    assert np.abs(parts - whole).max() < 1e-14 * np.abs(whole).max()


def test_one_solution_a_column_says_the_same(monkeypatch: pytest.MonkeyPatch) -> None:
    """The road for what the fixed pivots cannot do."""
    equations = assemble(ladder(6, np.random.default_rng(3)))
    unknowns, rows = everything(equations)
    frequency = np.array([1e3, 1e6])
    whole = inverse_entries(equations, frequency, unknowns, rows)
    scale = np.abs(whole).max(axis=0)
    for n, hertz in enumerate(frequency):
        column = by_column(equations, float(hertz), unknowns, rows)
        assert np.abs(column - whole[:, n]).max() < 1e-9 * scale[n]
    monkeypatch.setattr(solution, "LARGEST_RESIDUAL", 0.0)
    monkeypatch.setattr(solution, "by_column", lambda *_: np.full(len(rows), 42.0))
    assert (inverse_entries(equations, frequency, unknowns, rows) == 42.0).all()


def test_frequencies_that_need_pivots_of_their_own_get_them() -> None:
    """A node that hangs on capacitors alone above DC, and on nothing at DC, in one call."""
    elements: list[Element] = [c("c1", "a", "b", 1e-9), c("c2", "b", "0", 1e-9), r("r1", "a", "0", 1e3)]
    equations = assemble(elements)
    a, b = equations.node["a"], equations.node["b"]
    frequency = np.array([0.0, 1e-3, 1e9])
    found = inverse_entries(equations, frequency, np.array([a, b]), np.array([a, b]))
    series = 1 / (2j * np.pi * frequency[1:] * 0.5e-9)
    assert found[0, 0] == pytest.approx(1e3)
    assert found[1, 0] == pytest.approx(1e12)
    assert found[0, 1:] == pytest.approx(1 / (1e-3 + 1 / series), rel=1e-12)


def test_a_circuit_without_solution_names_what_is_open() -> None:
    """Two voltage-controlled sources hold one node; a loop of inductors at DC has no set current."""
    fighting: list[Element] = [
        r("r1", "a", "0", 1e3),
        r("r2", "b", "0", 1e3),
        by_voltage("e1", "b", "0", (1.0, "a", "0")),
        by_voltage("e2", "b", "0", (1.0, "a", "0")),
    ]
    with pytest.raises(SingularCircuit, match=r"i\(e[12]\)"):
        inverse_entries(assemble(fighting), np.array([1e3]), np.array([0]), np.array([0]))
    loop: list[Element] = [l("l1", "a", "0", 1e-3), l("l2", "a", "0", 1e-3), r("r1", "a", "0", 1e3)]
    with pytest.raises(SingularCircuit, match=r"i\(l[12]\)"):
        inverse_entries(assemble(loop), np.array([0.0]), np.array([0]), np.array([0]))
    exact = inverse_entries(assemble(loop), np.array([1e3]), np.array([0]), np.array([0]))
    assert exact[0, 0] == pytest.approx(1 / (1e-3 + 2 / (2j * np.pi * 1e3 * 1e-3)))


def test_a_gain_of_exactly_one_around_a_loop_is_found_by_number() -> None:
    """Structurally nothing is missing; the loop's two equations say the same."""
    elements: list[Element] = [
        by_voltage("e1", "a", "0", (2.0, "b", "0")),
        by_voltage("e2", "b", "0", (0.5, "a", "0")),
        r("r1", "a", "b", 1e4),
    ]
    with pytest.raises(SingularCircuit, match=r"at 1000 Hz the circuit leaves undetermined: .*v\(a\)"):
        inverse_entries(assemble(elements), np.array([1e3]), np.array([0]), np.array([0]))


def test_a_part_without_solution_spoils_no_other() -> None:
    elements: list[Element] = [
        r("r1", "a", "0", 1e3),
        l("l1", "b", "0", 1e-3),
        l("l2", "b", "0", 1e-3),
        r("r2", "d", "0", 7e3),
    ]
    equations = assemble(elements)
    nodes = np.array([equations.node[n] for n in "abd"])
    found, failures = inverse_by_part(equations, np.array([0.0, 1e3]), nodes, nodes)
    assert found[0] == pytest.approx([1e3, 1e3])
    assert found[2] == pytest.approx([7e3, 7e3])
    assert list(failures) == [1]
    assert "i(l" in failures[1]
    across, _ = inverse_by_part(equations, np.array([1e3]), nodes[:1], nodes[2:])
    assert across[0, 0] == 0


def test_a_source_that_nothing_reads_makes_its_node_still() -> None:
    equations = assemble([v("v1", "a"), r("r1", "a", "b", 1e3)], [Short("cut", ("a", "in"))])
    assert equations.node["a"] == -1
    found = inverse_entries(
        equations, np.array([1.0]), np.array([equations.node["b"]]), np.array([equations.node["b"]])
    )
    assert found[0, 0] == pytest.approx(1e3)


def test_asking_for_nothing_gives_nothing() -> None:
    none = np.zeros(0, dtype=np.int64)
    assert inverse_entries(assemble([]), np.array([0.0, 1.0]), none, none).shape == (0, 2)
