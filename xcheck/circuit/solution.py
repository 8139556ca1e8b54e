"""Entries of the inverse of the nodal equations, over all frequencies at once.

The entries of the inverse on the pattern of the factors follow from the factors alone, without solving for a
single right-hand side: Takahashi, Fagan and Chin, Formation of a sparse bus impedance matrix, Proc. 8th PICA
Conf. 1973; Erisman and Tinney, On computing certain elements of the inverse of a sparse matrix, Comm. ACM 18,
1975. With A = L D U (unit triangles) and Z the inverse,

    Z = D^-1 L^-1 + (1 - U) Z = U^-1 D^-1 + Z (1 - L),

read from the last pivot to the first. Frequency is the last axis; what loops is the height of the elimination
tree, never the frequency.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.equations import Equations, Index
from xcheck.circuit.ordering import Pattern, matched, pivot_order, scales
from xcheck.circuit.parts import parts, restricted, with_least_conductance
from xcheck.errors import SingularCircuit

if TYPE_CHECKING:
    from scipy.sparse import csc_array

LARGEST_RESIDUAL = 1e-10
"""Of an equation, against the sum of the magnitudes in it, where rounding alone leaves about 1e-15."""

LARGEST_ERROR = 1e-8
"""Of an entry of the inverse, relative, against the solution for its right-hand side."""

ROUNDING = 8 * float(np.finfo(np.float64).eps)
"""Of the largest unknown, all scaled: below it a value is as good as zero."""

LARGEST_SUM = 1e13
"""Of the magnitudes in A Z: beyond it what is left of the digits is chance, and the circuit is singular."""

ORDERS = 4
"""Pivot orders that are tried, each chosen at a frequency where the ones before were not accurate."""

PROBES = 2
"""Columns of the inverse that are solved for as well, in each part of the circuit and at every frequency."""

BLOCK_BYTES = 32e6
"""Frequencies are taken in blocks whose factors stay near this: memory stays small, and caches are used."""


def inverse_entries(equations: Equations, frequency: Real, unknowns: Index, rows: Index) -> Complex:
    """The entries of A^-1 at (unknowns, rows), (W,) each, at some frequencies (Hz, shape (F,)): the answer
    of unknown i to a unit on the right-hand side of equation j. Shape (W, F).

    At frequency 0 capacitors are open and inductors short. Parts without a path to ground get
    LEAST_CONDUCTANCE. Raises SingularCircuit, naming the unknowns, where there is no unique solution.
    """
    result = np.empty((len(unknowns), len(frequency)), dtype=np.complex128)
    if not len(unknowns):
        return result
    for dc in (False, True):
        chosen = np.flatnonzero((frequency == 0) == dc)
        if chosen.size:
            system = with_least_conductance(equations, dc)
            result[:, chosen] = _entries(system, frequency[chosen], unknowns, rows)
    return result


def inverse_by_part(
    equations: Equations, frequency: Real, unknowns: Index, rows: Index
) -> tuple[Complex, dict[int, str]]:
    """The entries of the inverse (see inverse_entries), shape (W, F), and, by index, the reason for those
    that lie in a part without a unique solution; these are 0."""
    try:
        return inverse_entries(equations, frequency, unknowns, rows), {}
    except SingularCircuit as error:
        reason = str(error)
    part = parts(equations)
    result = np.zeros((len(unknowns), len(frequency)), dtype=np.complex128)
    middle = (int(part.max()) + 1) // 2
    if not middle:
        return result, dict.fromkeys(range(len(unknowns)), reason)
    failures: dict[int, str] = {}
    for half in (part < middle, part >= middle):
        there = np.flatnonzero(half[unknowns] & half[rows])  # across parts nothing answers
        if there.size:
            number = np.cumsum(half) - 1
            result[there], failed = inverse_by_part(
                restricted(equations, half), frequency, number[unknowns[there]], number[rows[there]]
            )
            failures.update({int(there[index]): why for index, why in failed.items()})
    return result, failures


@dataclass(frozen=True, slots=True)
class _Asked:
    """The entries that are asked for, and the part of the circuit that each unknown belongs to."""

    equations: Equations
    unknowns: Index
    rows: Index
    part: Index


def _entries(equations: Equations, frequency: Real, unknowns: Index, rows: Index) -> Complex:
    result = np.empty((len(unknowns), len(frequency)), dtype=np.complex128)
    asked = _Asked(equations, unknowns, rows, parts(equations))
    probes = _probes(asked.part, rows)
    left = np.argsort(frequency, kind="stable")
    for _ in range(ORDERS):
        typical = frequency[left[len(left) // 4]]
        pattern = pivot_order(equations, equations.values(np.array([typical]))[:, 0], unknowns, rows)
        step = max(1, int(BLOCK_BYTES / (32 * pattern.places)))
        accurate = np.zeros(len(left), dtype=np.bool_)
        for start in range(0, len(left), step):
            block = slice(start, start + step)
            values = equations.values(frequency[left[block]])
            factors, inverse = selected_inverse(pattern, values)
            entries = inverse[pattern.wanted]
            result[:, left[block]] = entries
            accurate[block] = residual(equations, pattern, values, inverse) <= LARGEST_RESIDUAL
            for probe in probes:
                accurate[block] &= _confirmed(asked, pattern, values, factors, entries, probe)
        left = left[~accurate]
        if not left.size:
            return result
    for index in left.tolist():
        result[:, index] = by_column(equations, float(frequency[index]), unknowns, rows)
    return result


def _probes(part: Index, rows: Index) -> list[NDArray[np.bool_]]:
    """Which of the entries asked for each probe looks at: those of one column in every part, drawn by lot.
    Parts do not touch, so one right-hand side serves them all."""
    columns = np.unique(rows)
    draw = np.random.default_rng(0)
    probes = []
    for _ in range(PROBES):
        lot = np.lexsort((draw.random(len(columns)), part[columns]))
        _, first = np.unique(part[columns[lot]], return_index=True)
        drawn = np.zeros(len(part), dtype=np.bool_)
        drawn[columns[lot[first]]] = True
        probes.append(drawn[rows])
    return probes


def _confirmed(
    asked: _Asked, pattern: Pattern, values: Complex, factors: Complex, entries: Complex, probe: NDArray[np.bool_]
) -> NDArray[np.bool_]:
    """Whether the entries that a probe looks at are what a solution for its right-hand side says, and that
    solution fulfils the equations, at each frequency, (F,)."""
    equations, unknowns, rows = asked.equations, asked.unknowns[probe], asked.rows[probe]
    right = np.zeros((equations.size, 1), dtype=np.complex128)
    right[rows] = 1.0
    answer = solve(pattern, factors, right)
    noise = _noise(answer, asked.part, pattern.column_scale)
    expected = answer[unknowns]
    floor = (noise * pattern.column_scale[:, None])[unknowns]
    near = LARGEST_ERROR * np.abs(expected) + floor
    with np.errstate(all="ignore"):
        same: NDArray[np.bool_] = np.all(np.abs(entries[probe] - expected) <= near, axis=0)
    return same & _fulfilled(equations, values, answer, right, noise / pattern.row_scale[:, None])


def _noise(answer: Complex, part: Index, column_scale: Real) -> Real:
    """What rounding may leave of a solution's zeros, scaled, (N, F): eps of the largest unknown of the part."""
    with np.errstate(all="ignore"):
        size = np.abs(answer) / column_scale[:, None]
    order = np.argsort(part, kind="stable")
    starts = np.flatnonzero(np.diff(part[order], prepend=-1))
    largest: Real = ROUNDING * np.maximum.reduceat(size[order], starts, axis=0)
    return largest[part]


def _fulfilled(
    equations: Equations, values: Complex, answer: Complex, right: Complex, noise: Real
) -> NDArray[np.bool_]:
    """Whether a solution fulfils the equations at each frequency, (F,); componentwise, as in Arioli, Demmel and
    Duff, Solving sparse linear systems with sparse backward error, SIAM J. Matrix Anal. Appl. 10, 1989."""
    order, starts = _by_row(equations)
    with np.errstate(all="ignore"):
        products = values[order] * answer[equations.columns[order]]
        off = np.abs(np.add.reduceat(products, starts, axis=0) - right)
        size = np.add.reduceat(np.abs(products), starts, axis=0) + np.abs(right)
        result: NDArray[np.bool_] = np.all(off <= LARGEST_RESIDUAL * size + noise, axis=0)
    return result


def selected_inverse(pattern: Pattern, values: Complex) -> tuple[Complex, Complex]:
    """The factors (pivots, L below them and U beside them, both with unit diagonals) and the inverse on the
    pattern, (places, F) each, from the entries of the equations, (E, F)."""
    with np.errstate(all="ignore"):  # a pivot that vanishes shows in the residual
        factors = np.zeros((pattern.places, values.shape[1]), dtype=np.complex128)
        factors[pattern.given] = values
        _eliminate(pattern, factors)
        return factors, _invert(pattern, factors)


def solve(pattern: Pattern, factors: Complex, right: Complex) -> Complex:
    """The solution (N, F) for a right-hand side, (N, F) or (N, 1)."""
    answer = np.zeros((pattern.size, factors.shape[1]), dtype=np.complex128)
    answer[pattern.row_at] = right
    with np.errstate(all="ignore"):
        for level in pattern.levels:
            if level.fed.size:
                products = factors[level.left_of] * answer[level.sources]
                answer[level.fed] -= np.add.reduceat(products, level.feeds, axis=0)
        answer /= factors[: pattern.size]
        for level in reversed(pattern.levels):
            if level.ahead.size:
                products = factors[level.lower + pattern.fill] * answer[level.ahead]
                answer[level.owners] -= np.add.reduceat(products, level.ends, axis=0)
    return answer[pattern.column_at]


def _eliminate(pattern: Pattern, factors: Complex) -> None:
    """In place, U still with the pivots in its rows."""
    for level in pattern.levels:
        factors[level.lower] /= factors[level.divisor]
        if level.left.size:
            products = factors[level.left]
            products *= factors[level.right]
            if len(level.runs) < len(level.left):
                products = np.add.reduceat(products, level.runs, axis=0)
            factors[level.target] -= products


def _invert(pattern: Pattern, factors: Complex) -> Complex:
    fill = pattern.fill
    inverse = np.empty_like(factors)
    for level in reversed(pattern.levels):
        pivots = 1 / factors[level.pivots]
        inverse[level.pivots] = pivots
        if not level.lower.size:
            continue
        upper = level.lower + fill
        factors[upper] /= factors[level.divisor]  # unit diagonal from here on
        products = factors[level.along]
        products *= inverse[level.across]
        inverse[level.lower] = -np.add.reduceat(products, level.sums, axis=0)
        products = factors[level.along + fill]
        products *= inverse[pattern.mirrored(level.across)]
        inverse[upper] = -np.add.reduceat(products, level.sums, axis=0)
        products = factors[upper] * inverse[level.lower]
        inverse[level.owners] -= np.add.reduceat(products, level.ends, axis=0)
    return inverse


def residual(equations: Equations, pattern: Pattern, values: Complex, inverse: Complex) -> Real:
    """The largest diagonal entry of A Z - 1 at each frequency, against the sum of the magnitudes that make it
    up, shape (F,); infinite where there is no solution. All products that it needs are on the pattern."""
    order, starts = _by_row(equations)
    with np.errstate(all="ignore"):  # not a number where a pivot vanished
        products = values[order] * inverse[pattern.mirrored(pattern.given[order])]
        size = np.add.reduceat(np.abs(products), starts, axis=0)
        off = np.abs(np.add.reduceat(products, starts, axis=0) - 1) / np.maximum(size, 1)
    off[~(size < LARGEST_SUM)] = np.inf
    worst: Real = off.max(axis=0, initial=0.0)
    return worst


def _by_row(equations: Equations) -> tuple[Index, Index]:
    """The entries in the order of their equations, and where each equation's begin."""
    order = np.argsort(equations.rows, kind="stable")
    return order, np.flatnonzero(np.diff(equations.rows[order], prepend=-1))


def by_column(equations: Equations, frequency: float, unknowns: Index, rows: Index) -> Complex:
    """The same entries at one frequency by one solution a column, with pivots chosen for it: slower, for what
    the fixed pivots cannot do. Shape (W,)."""
    from scipy.sparse import coo_array
    from scipy.sparse.linalg import splu

    size = equations.size
    values = equations.values(np.array([frequency]))[:, 0]
    at = (equations.rows, equations.columns)
    matrix = coo_array((values, at), shape=(size, size)).tocsc()
    magnitudes = abs(matrix)
    by_row, by_unknown = scales(equations, values, matched(equations, values))
    scaled = values * by_row[equations.rows] * by_unknown[equations.columns]
    try:
        factors = splu(coo_array((scaled, at), shape=(size, size)).tocsc())
    except RuntimeError:
        raise SingularCircuit(_undetermined(equations, matrix, frequency)) from None
    result = np.zeros(len(rows), dtype=np.complex128)
    part = parts(equations)
    wanted, column = np.unique(rows, return_inverse=True)
    turn = _turn_in_part(part[wanted])
    for start in range(0, int(turn.max(initial=-1)) + 1, 16):
        now = (turn >= start) & (turn < start + 16)
        right = np.zeros((size, 16), dtype=np.complex128)
        right[wanted[now], turn[now] - start] = 1.0
        columns, off = np.zeros_like(right), right
        for _ in range(3):
            columns += by_unknown[:, None] * np.asarray(factors.solve(by_row[:, None] * off))
            off = right - np.asarray(matrix @ columns)
        size_of = np.asarray(magnitudes @ np.abs(columns)) + np.abs(right)
        noise = _noise(columns, part, by_unknown) / by_row[:, None]
        enough = np.abs(off) <= LARGEST_RESIDUAL * size_of + noise
        if not (enough.all() and (size_of[right != 0] < LARGEST_SUM).all()):
            raise SingularCircuit(_undetermined(equations, matrix, frequency))
        here = now[column] & (part[unknowns] == part[rows])  # across parts nothing answers
        result[here] = columns[unknowns[here], turn[column[here]] - start]
    return result


def _turn_in_part(part: Index) -> Index:
    """Numbers the members of each part from 0: columns of different parts can share a right-hand side."""
    order = np.argsort(part, kind="stable")
    _, first, count = np.unique(part[order], return_index=True, return_counts=True)
    turn = np.empty(len(part), dtype=np.int64)
    turn[order] = np.arange(len(part)) - np.repeat(first, count)
    return turn


def _undetermined(equations: Equations, matrix: "csc_array", frequency: float) -> str:
    """Names the unknowns that the equations leave open: those that a right-hand side moves the most once the
    entries are shaken by a hair (inverse iteration)."""
    from scipy.sparse.linalg import splu

    rng = np.random.default_rng(0)
    shaken = matrix.copy()
    shaken.data = shaken.data * (1 + 1e-10 * rng.standard_normal(len(shaken.data)))
    at = f"at {frequency:g} Hz the circuit leaves undetermined: "
    try:
        moved = np.abs(splu(shaken).solve(rng.standard_normal(equations.size) + 0j))
    except RuntimeError:
        return at + "more than one of its unknowns"
    order = np.argsort(-moved)[:6]
    return at + ", ".join(equations.unknowns[i] for i in order if moved[i] > 1e-3 * moved[order[0]])
