"""Parts of a circuit that do not touch: where one has no solution, the others still have theirs."""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.equations import Equations, Index, parts
from xcheck.circuit.solution import inverse_entries
from xcheck.errors import SingularCircuit


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
        capacitive=equations.capacitive[inside],
    )
