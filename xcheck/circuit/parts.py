"""How a circuit hangs together: parts that do not touch, and parts that nothing joins to ground."""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from xcheck.circuit.equations import CAPACITOR, CONDUCTOR, CURRENT_SOURCE, Equations, Index

LEAST_CONDUCTANCE = 1e-12
"""Siemens, from one node of every island to ground; the value that ngspice calls gmin."""


def parts(equations: Equations) -> Index:
    """The part that each unknown belongs to, (N,): parts share no entry of A."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    links = (np.ones(len(equations.rows)), (equations.rows, equations.columns))
    graph = coo_array(links, shape=(equations.size, equations.size))
    return np.asarray(connected_components(graph, directed=False)[1], dtype=np.int64)


def restricted(equations: Equations, kept: NDArray[np.bool_]) -> Equations:
    """The equations of some parts alone; kept: (N,) whether an unknown is one of theirs."""
    count = equations.node_count
    nodes = int(kept[:count].sum())
    number = np.where(kept, np.cumsum(kept) - 1, -1)
    there = kept[equations.rows]
    to_end = np.concatenate([number[:count], [nodes]])
    paths = to_end[equations.paths]
    inside = (paths >= 0).all(axis=1)
    return replace(
        equations,
        unknowns=tuple(name for name, keep in zip(equations.unknowns, kept.tolist(), strict=True) if keep),
        node_count=nodes,
        node={name: int(number[i]) for name, i in equations.node.items() if i >= 0 and kept[i]},
        branch={name: int(number[i]) for name, i in equations.branch.items() if kept[i]},
        output={n: (int(number[u]), int(number[r])) for n, (u, r) in equations.output.items() if kept[u]},
        rows=number[equations.rows[there]],
        columns=number[equations.columns[there]],
        conductance=equations.conductance[there],
        capacitance=equations.capacitance[there],
        paths=paths[inside],
        path_kind=equations.path_kind[inside],
    )


def islands(equations: Equations, dc: bool, fed: bool = False, cuts: int = 0) -> Index:
    """The island that each node belongs to, (node_count + 1,), the last entry being ground's: nodes of one
    island are joined by conductors, and above DC by capacitors. fed: by current sources as well; cuts: how
    many of the shorts, which come first, are left out."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    kinds = [CONDUCTOR, *([] if dc else [CAPACITOR]), *([CURRENT_SOURCE] if fed else [])]
    joined = np.isin(equations.path_kind, kinds)
    joined[:cuts] = False
    ends = equations.paths[joined]
    size = equations.node_count + 1
    graph = coo_array((np.ones(len(ends)), (ends[:, 0], ends[:, 1])), shape=(size, size))
    return np.asarray(connected_components(graph, directed=False)[1], dtype=np.int64)


def with_least_conductance(equations: Equations, dc: bool) -> Equations:
    """The equations with LEAST_CONDUCTANCE to ground at one node of every island without ground.

    Where no source drives current into an island, none flows through the conductance, so it settles the
    island's voltage and changes nothing else. dc: capacitors join nothing.
    """
    island = islands(equations, dc)
    _, first = np.unique(island, return_index=True)
    floating = first[island[first] != island[-1]]
    if not floating.size:
        return equations
    on_diagonal = {int(equations.rows[e]): int(e) for e in np.flatnonzero(equations.rows == equations.columns)}
    old = [node for node in floating.tolist() if node in on_diagonal]
    new = np.array([node for node in floating.tolist() if node not in on_diagonal], dtype=np.int64)
    conductance = equations.conductance.copy()
    conductance[[on_diagonal[node] for node in old]] += LEAST_CONDUCTANCE
    return replace(
        equations,
        rows=np.concatenate([equations.rows, new]),
        columns=np.concatenate([equations.columns, new]),
        conductance=np.concatenate([conductance, np.full(len(new), LEAST_CONDUCTANCE)]),
        capacitance=np.concatenate([equations.capacitance, np.zeros(len(new))]),
    )
