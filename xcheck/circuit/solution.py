"""Entries of the inverse of the nodal equations, over all frequencies at once.

The entries of the inverse on the pattern of the factors follow from the factors alone, without solving for a
single right-hand side: Takahashi, Fagan and Chin, Formation of a sparse bus impedance matrix, Proc. 8th PICA
Conf. 1973; Erisman and Tinney, On computing certain elements of the inverse of a sparse matrix, Comm. ACM 18,
1975. With A = L D U (unit triangles) and Z the inverse,

    Z = D^-1 L^-1 + (1 - U) Z = U^-1 D^-1 + Z (1 - L),

read from the last pivot to the first. Frequency is the last axis; what loops is the height of the elimination
tree, never the frequency.
"""

from typing import TYPE_CHECKING

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.equations import Equations, Index, with_least_conductance
from xcheck.circuit.ordering import Pattern, pivot_order
from xcheck.errors import SingularCircuit

if TYPE_CHECKING:
    from scipy.sparse import csc_array

LARGEST_RESIDUAL = 1e-11
"""Of A Z - 1 against the sum of the magnitudes that make it up, where rounding alone leaves about 1e-15."""

LARGEST_SUM = 1e13
"""Of these magnitudes: beyond it, what is left of sixteen digits is chance, and the circuit is singular."""

ORDERS = 4
"""Pivot orders that are tried, each chosen at a frequency where the ones before were not accurate."""

BLOCK_BYTES = 256e6
"""Frequencies are taken in blocks so that the factors of a block stay below this."""


def inverse_entries(equations: Equations, frequency: Real, unknowns: Index, rows: Index) -> Complex:
    """The entries of A^-1 at (unknowns, rows), (W,) each, at some frequencies (Hz, shape (F,)): the answer
    of unknown i to a unit on the right-hand side of equation j. Shape (W, F).

    At frequency 0 capacitors are open and inductors short. Parts without a path to ground get
    LEAST_CONDUCTANCE. Raises SingularCircuit, naming the unknowns, where there is no unique solution.
    """
    result = np.empty((len(unknowns), len(frequency)), dtype=np.complex128)
    for dc in (False, True):
        chosen = np.flatnonzero((frequency == 0) == dc)
        if chosen.size:
            system = with_least_conductance(equations, dc)
            result[:, chosen] = _entries(system, frequency[chosen], unknowns, rows)
    return result


def _entries(equations: Equations, frequency: Real, unknowns: Index, rows: Index) -> Complex:
    result = np.empty((len(unknowns), len(frequency)), dtype=np.complex128)
    left = np.argsort(frequency, kind="stable")
    for _ in range(ORDERS):
        typical = frequency[left[len(left) // 4]]
        pattern = pivot_order(equations, equations.values(np.array([typical]))[:, 0], unknowns, rows)
        step = max(1, int(BLOCK_BYTES / (32 * pattern.places)))
        accurate = np.zeros(len(left), dtype=np.bool_)
        for start in range(0, len(left), step):
            block = slice(start, start + step)
            values = equations.values(frequency[left[block]])
            inverse = selected_inverse(pattern, values)
            accurate[block] = residual(equations, pattern, values, inverse) <= LARGEST_RESIDUAL
            result[:, left[block]] = inverse[pattern.wanted]
        left = left[~accurate]
        if not left.size:
            return result
    for index in left.tolist():
        result[:, index] = by_column(equations, float(frequency[index]), unknowns, rows)
    return result


def selected_inverse(pattern: Pattern, values: Complex) -> Complex:
    """The inverse on the pattern, (places, F), from the entries of the equations (E, F)."""
    with np.errstate(all="ignore"):  # a pivot that vanishes shows in the residual
        factors = np.zeros((pattern.places, values.shape[1]), dtype=np.complex128)
        factors[pattern.given] = values
        _eliminate(pattern, factors)
        return _invert(pattern, factors)


def _eliminate(pattern: Pattern, factors: Complex) -> None:
    """In place: pivots, L below them with a unit diagonal, U beside them."""
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
    """The largest diagonal entry of A Z - 1 and of Z A - 1 at each frequency, against the sum of the
    magnitudes that make it up, shape (F,); infinite where there is no solution. All products that these need
    are on the pattern, so every column of the inverse is tested."""
    worst = np.zeros(values.shape[1])
    with np.errstate(all="ignore"):  # not a number where a pivot vanished
        products = values * inverse[pattern.mirrored(pattern.given)]
        sizes = np.abs(products)
        for axis in (equations.rows, equations.columns):
            order = np.argsort(axis, kind="stable")
            starts = np.flatnonzero(np.diff(axis[order], prepend=-1))
            size = np.add.reduceat(sizes[order], starts, axis=0)
            off = np.abs(np.add.reduceat(products[order], starts, axis=0) - 1) / np.maximum(size, 1)
            off[~(size < LARGEST_SUM)] = np.inf
            worst = np.maximum(worst, off.max(axis=0, initial=0.0))
    return worst


def by_column(equations: Equations, frequency: float, unknowns: Index, rows: Index) -> Complex:
    """The same entries at one frequency by one solution a column, with pivots chosen for it: slower, for what
    the fixed pivots cannot do. Shape (W,)."""
    from scipy.sparse import coo_array
    from scipy.sparse.linalg import splu

    size = equations.size
    values = equations.values(np.array([frequency]))[:, 0]
    matrix = coo_array((values, (equations.rows, equations.columns)), shape=(size, size)).tocsc()
    magnitudes = abs(matrix)
    try:
        factors = splu(matrix)
    except RuntimeError:
        raise SingularCircuit(_undetermined(equations, matrix, frequency)) from None
    result = np.empty(len(rows), dtype=np.complex128)
    wanted, column = np.unique(rows, return_inverse=True)
    for start in range(0, len(wanted), 64):
        chosen = wanted[start : start + 64]
        right = np.zeros((size, len(chosen)), dtype=np.complex128)
        right[chosen, np.arange(len(chosen))] = 1.0
        columns = np.asarray(factors.solve(right))
        columns += factors.solve(np.asarray(right - matrix @ columns))
        size_of = np.asarray(magnitudes @ np.abs(columns))
        off = np.abs(np.asarray(right - matrix @ columns))
        enough = off <= LARGEST_RESIDUAL * (size_of + np.abs(right))
        if not (enough.all() and (size_of[chosen, np.arange(len(chosen))] < LARGEST_SUM).all()):
            raise SingularCircuit(_undetermined(equations, matrix, frequency))
        here = (column >= start) & (column < start + 64)
        result[here] = columns[unknowns[here], column[here] - start]
    return result


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
