"""The order in which the equations are eliminated, chosen once, and the places that fill in on the way.

1. Each equation is matched with an unknown so that the product of the matched entries is largest, and scaled
   so that they are 1 and all others at most 1 (Duff and Koster, SIAM J. Matrix Anal. Appl. 22, 2001): the
   matched entries are the pivots, whatever the frequency. Around an amplifier with much loop gain this takes
   the gain itself as a pivot, the virtual ground.
2. The pivots are ordered by minimum degree on the symmetric pattern (George and Liu, SIAM Review 31, 1989).
   A trial factorisation then shows which of them shrink to nothing on the way, and gives others for these.
3. The elimination tree (Liu, SIAM J. Matrix Anal. Appl. 11, 1990) gives the filled pattern and the levels:
   the pivots of one level do not touch one another and are eliminated at once.
"""

from dataclasses import dataclass

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.equations import Equations, Index
from xcheck.errors import SingularCircuit

LEAST_PIVOT = 0.1
"""Of the largest entry in its column, all scaled: a pivot that shrinks below gives way to that entry."""

TRIALS = 3
"""How often the order is sought anew for pivots that a trial factorisation has changed."""


@dataclass(frozen=True, slots=True)
class Level:
    """The work of one level of the elimination tree, as places (see Pattern).

    Eliminating: `lower` entries are divided by the pivots at `divisor`; then the products of the entries at
    `left` and `right` are added up over runs that begin at `runs` and taken from those at `target`.
    Inverting: sums over b of Z[a, b] L[b] and of U[b] Z[b, a]; each (column, a) is a run of `below` products,
    beginning at `sums`; `across` holds the place of Z[a, b], `along` the place of L[b].
    """

    pivots: Index
    lower: Index
    divisor: Index
    left: Index
    right: Index
    target: Index
    runs: Index
    across: Index
    along: Index
    sums: Index
    ends: Index
    owners: Index
    ahead: Index
    left_of: Index
    sources: Index
    feeds: Index
    fed: Index


@dataclass(frozen=True)
class Pattern:
    """Where the entries of the factors, and of the inverse on their pattern, are kept: places 0 .. size - 1
    hold the pivots, the next `fill` ones the columns of L, the last `fill` ones the rows of U, mirrored.

    row_at, column_at: when each equation and each unknown is eliminated; given: places of the entries of the
    equations; wanted: places of the entries of the inverse that were asked for, (unknown, equation) each;
    row_scale, column_scale: factors that make the matched entries 1 and all others at most 1, at the frequency
    that the order was chosen for.
    """

    size: int
    fill: int
    row_at: Index
    column_at: Index
    row_scale: Real
    column_scale: Real
    given: Index
    wanted: Index
    levels: tuple[Level, ...]

    @property
    def places(self) -> int:
        return self.size + 2 * self.fill

    def mirrored(self, places: Index) -> Index:
        """The place across the diagonal."""
        in_lower = (places >= self.size) & (places < self.size + self.fill)
        in_upper = places >= self.size + self.fill
        return places + self.fill * (in_lower.astype(np.int64) - in_upper.astype(np.int64))


def pivot_order(equations: Equations, values: Complex, unknowns: Index, rows: Index) -> Pattern:
    """The pattern for equations whose entries have some typical values (E,), with room for the entries of the
    inverse at (unknowns, rows), each (W,). Raises SingularCircuit where no set of pivots exists."""
    size = equations.size
    owner = matched(equations, values)  # equation -> the unknown that it is solved for
    row_scale, column_scale = scales(equations, values, owner)
    scaled = values * row_scale[equations.rows] * column_scale[equations.columns]
    for _ in range(TRIALS):
        position = minimum_degree(
            np.concatenate([owner[equations.rows], owner[rows]]),
            np.concatenate([equations.columns, unknowns]),
            size,
        )
        tried = owner
        owner = _stable_owner(equations, scaled, owner, position)
        if np.array_equal(owner, tried):
            break
    row_at, column_at = position[owner[equations.rows]], position[equations.columns]
    wanted_row, wanted_column = position[unknowns], position[owner[rows]]
    structure, height = filled(np.concatenate([row_at, wanted_row]), np.concatenate([column_at, wanted_column]), size)
    count = np.array([len(s) for s in structure], dtype=np.int64)
    below = np.array([i for s in structure for i in s], dtype=np.int64)
    table = _Places(size, np.repeat(np.arange(size), count) * size + below)
    return Pattern(
        size=size,
        fill=len(below),
        row_scale=row_scale,
        column_scale=column_scale,
        row_at=position[owner],
        column_at=position,
        given=table.at(row_at, column_at),
        wanted=table.at(wanted_row, wanted_column),
        levels=_levels(count, below, height, table),
    )


def matched(equations: Equations, values: Complex) -> Index:
    """For each equation the unknown of its pivot: the matching with the largest product of magnitudes."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import maximum_bipartite_matching, min_weight_full_bipartite_matching

    size = equations.size
    there = np.abs(values) > 0
    rows, columns = equations.rows[there], equations.columns[there]
    weight = -np.log(np.abs(values[there]))
    weight = weight - weight.min(initial=0.0) + 1.0
    graph = csr_array((weight, (rows, columns)), shape=(size, size))
    partner = maximum_bipartite_matching(graph, perm_type="column")
    if (partner < 0).any():
        lonely = np.setdiff1d(np.arange(size), partner[partner >= 0])
        names = [equations.unknowns[i] for i in [*np.flatnonzero(partner < 0), *lonely]]
        raise SingularCircuit("the circuit leaves undetermined: " + ", ".join(dict.fromkeys(names)))
    row, column = min_weight_full_bipartite_matching(graph)
    owner = np.empty(size, dtype=np.int64)
    owner[row] = column
    return owner


def scales(equations: Equations, values: Complex, owner: Index) -> tuple[Real, Real]:
    """Factors for the equations and for the unknowns, (N,) each, that make pivots 1 and all other entries at
    most 1: longest paths in the graph of the entries' logarithms, which has no rising loop because the
    matching is the best."""
    size = equations.size
    there = np.flatnonzero(np.abs(values) > 0)
    log = np.log(np.abs(values[there]))
    row, column = owner[equations.rows[there]], equations.columns[there]
    pivot = np.empty(size)
    pivot[row[row == column]] = log[row == column]
    weight = log - pivot[row]
    path = np.zeros(size)
    for _ in range(size):
        before = path.copy()
        np.maximum.at(path, column, path[row] + weight)
        if (path <= before + 1e-9).all():
            break
    return np.exp(path - pivot)[owner], np.exp(-path)


def _stable_owner(equations: Equations, scaled: Complex, owner: Index, position: Index) -> Index:
    """The owners that a factorisation in the given order settles on, keeping those that it can."""
    from scipy.sparse import coo_array
    from scipy.sparse.linalg import splu

    size = equations.size
    at = (position[owner[equations.rows]], position[equations.columns])
    try:
        trial = splu(
            coo_array((scaled, at), shape=(size, size)).tocsc(),
            permc_spec="NATURAL",
            diag_pivot_thresh=LEAST_PIVOT,
            options={"SymmetricMode": True},
        )
    except RuntimeError:  # singular at this frequency, which the residual will show
        return owner
    column_of = np.empty(size, dtype=np.int64)  # of a row, both in the given order
    column_of[np.argsort(trial.perm_r)] = np.argsort(trial.perm_c)
    unknown_at = np.argsort(position)
    return np.asarray(unknown_at[column_of[position[owner]]], dtype=np.int64)


def minimum_degree(rows: Index, columns: Index, size: int) -> Index:
    """Position of each index in a minimum degree order of the symmetric pattern."""
    from scipy.sparse import coo_array
    from scipy.sparse.linalg import splu

    ends = np.concatenate([rows, columns, np.arange(size)])
    others = np.concatenate([columns, rows, np.arange(size)])
    pattern = coo_array((np.ones(len(ends)), (ends, others)), shape=(size, size)).tocsc()
    pattern.data[:] = 1.0
    pattern.setdiag(2.0 + np.diff(pattern.indptr))  # dominant, so that the order is by the pattern alone
    factors = splu(pattern, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True})
    return np.asarray(factors.perm_c, dtype=np.int64)


def filled(rows: Index, columns: Index, size: int) -> tuple[list[list[int]], Index]:
    """For each pivot, in order, the later ones that it touches, ascending, fill included; and its height in
    the elimination tree, leaves at 0."""
    low, high = np.minimum(rows, columns), np.maximum(rows, columns)
    edges = np.unique((low * size + high)[low != high])
    start = np.searchsorted(edges // size, np.arange(size + 1)).tolist()
    ends = (edges % size).tolist()
    structure: list[list[int]] = []
    height = [0] * size
    inherited: list[set[int] | None] = [None] * size
    for pivot in range(size):
        touched = inherited[pivot] or set()
        inherited[pivot] = None
        touched.update(ends[start[pivot] : start[pivot + 1]])
        touched.discard(pivot)
        ordered = sorted(touched)
        structure.append(ordered)
        if ordered:
            parent = ordered[0]
            height[parent] = max(height[parent], height[pivot] + 1)
            above = inherited[parent]
            if above is None:
                inherited[parent] = touched
            else:
                above |= touched
    return structure, np.array(height, dtype=np.int64)


class _Places:
    """Looks up the place of an entry by its position."""

    def __init__(self, size: int, keys: Index) -> None:
        self.size = size
        self.keys = keys  # column * size + row of the entries of L, ascending

    def at(self, row: Index, column: Index) -> Index:
        low, high = np.minimum(row, column), np.maximum(row, column)
        slot = self.size + np.searchsorted(self.keys, low * self.size + high)
        slot = np.where(row < column, slot + len(self.keys), slot)
        return np.where(row == column, row, slot).astype(np.int64)


def _levels(count: Index, below: Index, height: Index, table: _Places) -> tuple[Level, ...]:
    """The work of each level, leaves first."""
    size = len(count)
    first = np.concatenate([[0], np.cumsum(count)])
    order = np.argsort(height, kind="stable")
    bounds = np.searchsorted(height[order], np.arange(int(height.max(initial=0)) + 2))
    by_row = np.lexsort((np.arange(len(below)), below, height[below]))  # entries of L, by level and row
    row_bounds = np.searchsorted(height[below[by_row]], np.arange(len(bounds)))
    column = np.repeat(np.arange(size), count)
    levels: list[Level] = []
    for n in range(len(bounds) - 1):
        pivots = order[bounds[n] : bounds[n + 1]]
        entries = by_row[row_bounds[n] : row_bounds[n + 1]]
        fed, feeds = np.unique(below[entries], return_index=True)
        rows = (size + entries, column[entries], feeds.astype(np.int64), fed)
        levels.append(_level(pivots, count, first, below, table, rows))
    return tuple(levels)


def _level(
    pivots: Index,
    count: Index,
    first: Index,
    below: Index,
    table: _Places,
    rows: tuple[Index, Index, Index, Index],
) -> Level:
    size, fill = len(count), len(below)
    m = count[pivots]
    entry = _ranges(first[pivots], m)  # the entries of L below these pivots
    each = np.repeat(m, m)  # per entry, how many share its column
    a = np.repeat(entry, each)
    b = _ranges(np.repeat(first[pivots], m), each)
    across = table.at(below[a], below[b])
    by_target = np.argsort(across, kind="stable")
    target, runs = np.unique(across[by_target], return_index=True)
    return Level(
        pivots=pivots,
        lower=size + entry,
        divisor=np.repeat(pivots, m),
        left=size + a[by_target],
        right=size + fill + b[by_target],
        target=target,
        runs=runs.astype(np.int64),
        across=across,
        along=size + b,
        sums=(np.cumsum(each) - each).astype(np.int64),
        ends=(np.cumsum(m) - m)[m > 0].astype(np.int64),
        owners=pivots[m > 0],
        ahead=below[entry],
        left_of=rows[0],
        sources=rows[1],
        feeds=rows[2],
        fed=rows[3],
    )


def _ranges(start: Index, length: Index) -> Index:
    """start[0], start[0] + 1, ... (length[0] of them), start[1], ... in one array."""
    total = int(length.sum())
    offset = np.repeat(start - np.concatenate([[0], np.cumsum(length)])[:-1], length)
    return (offset + np.arange(total)).astype(np.int64)
