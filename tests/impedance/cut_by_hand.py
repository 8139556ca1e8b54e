"""The definitions of an input and of an output impedance, written out plainly beside a circuit's flat elements: the cut
at a port, a dense nodal solution, and the cards for ngspice. Nothing here is the package's but the elements."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Controlled, Element, Passive, Source
from xcheck.stages.types import Port

INSIDE = "inside"


def cut(elements: Sequence[Element], port: Port) -> list[Element]:
    """The elements with the port's own terminals moved to a node of their own."""
    moved = {(t.element, t.index) for t in port.inside}
    return [_moved(element, port.node, moved) for element in elements]


def _moved(element: Element, node: str, moved: set[tuple[str, int]]) -> Element:
    places = [i for i in range(len(element.nodes)) if (element.name, i) in moved]
    nodes = tuple(INSIDE if i in places else n for i, n in enumerate(element.nodes))
    if isinstance(element, Controlled):
        terms = element.terms
        if (element.name, -1) in moved:
            terms = tuple(
                replace(
                    t,
                    positive=INSIDE if t.positive == node else t.positive,
                    negative=INSIDE if t.negative == node else t.negative,
                )
                for t in terms
            )
        return replace(element, nodes=nodes, terms=terms)
    return replace(element, nodes=nodes)  # type: ignore[call-overload, no-any-return]


def by_current(port: Port) -> bool:
    return port.side == "output" or port.current_driven


def impedance(port: Port, voltage: Complex, current_out: Complex) -> Complex:
    """By definition, from the voltage inside and the current through the cut from inside to outside."""
    result: Complex = voltage / (1 - current_out) if by_current(port) else voltage / -current_out
    return result


def dense(elements: Sequence[Element], port: Port, frequency: Real) -> Complex:
    """The port's impedance by modified nodal equations, solved whole at each frequency."""
    parts = cut(elements, port)
    nodes = {n for e in parts for n in e.nodes} | {n for e in parts if isinstance(e, Controlled) for n in e.sensing}
    index = {n: k for k, n in enumerate(sorted((nodes | {INSIDE, port.node}) - {"0"}))}
    row_of = {e.name: len(index) + k for k, e in enumerate(e for e in parts if _has_branch(e))}
    test = len(index) + len(row_of)
    matrix = np.zeros((len(frequency), test + 1, test + 1), dtype=np.complex128)
    right = np.zeros((len(frequency), test + 1, 1), dtype=np.complex128)
    for e in parts:
        for row, column, value in _stamp(e, index, row_of.get(e.name), 2j * np.pi * frequency):
            matrix[:, row, column] += value
    for node, sign in ((index[INSIDE], 1), (index[port.node], -1)):
        matrix[:, node, test] += sign
        matrix[:, test, node] += sign
    right[:, index[INSIDE] if by_current(port) else test] = 1
    solution = np.linalg.solve(matrix, right)[:, :, 0]
    return impedance(port, solution[:, index[INSIDE]], solution[:, test])


def _stamp(
    e: Element, index: Mapping[str, int], row: int | None, s: Complex
) -> Iterator[tuple[int, int, Complex | complex]]:
    """What an element adds to the matrix, as row, column and value."""
    ends = [(index[n], sign) for n, sign in zip(e.nodes, (1, -1), strict=True) if n != "0"]
    if row is not None:
        for node, sign in ends:
            yield node, row, sign
            yield row, node, sign
    if isinstance(e, Passive) and row is not None:
        yield row, row, -s * e.value
    elif isinstance(e, Passive):
        y = 1 / e.value if e.kind == "r" else s * e.value
        yield from ((one, other, a * b * y) for one, a in ends for other, b in ends)
    elif isinstance(e, Controlled):
        for term in e.terms:
            sensed = [(index[n], sign) for n, sign in ((term.positive, 1), (term.negative, -1)) if n != "0"]
            for r, factor in [(row, -1)] if row is not None else ends:
                yield from ((r, column, factor * sign * term.gain) for column, sign in sensed)


def _has_branch(e: Element) -> bool:
    return (isinstance(e, Passive) and e.kind == "l") or (isinstance(e, Source | Controlled) and e.kind in "ve")


def cards(elements: Sequence[Element], port: Port, prefix: str) -> list[str]:
    """The circuit with the port cut and tested, as cards whose names and nodes begin with a prefix."""
    lines = []
    for e in cut(elements, port):
        head = f"{e.name.split('.')[-1][0]}{prefix}{e.name.replace('.', '_')} " + _nodes(prefix, e.nodes)
        if isinstance(e, Passive):
            lines.append(f"{head} {e.value!r}")
        elif isinstance(e, Source):
            lines.append(f"{head} dc 0")
        elif isinstance(e, Controlled):
            kind = f"{e.kind}{prefix}{e.name.replace('.', '_')}"
            ends = " ".join(f"{_nodes(prefix, (t.positive, t.negative))}" for t in e.terms)
            gains = " ".join(repr(t.gain) for t in e.terms)
            poly = "" if len(e.terms) == 1 else f"poly({len(e.terms)}) "
            zero = "" if len(e.terms) == 1 else "0 "
            lines.append(f"{kind} {_nodes(prefix, e.nodes)} {poly}{ends} {zero}{gains}")
    inside, outside = _nodes(prefix, (INSIDE, port.node)).split()
    lines.append(f"v{prefix}cut {inside} {outside} dc 0" + ("" if by_current(port) else " ac 1"))
    if by_current(port):
        lines.append(f"i{prefix}test 0 {inside} dc 0 ac 1")
    return lines


def _nodes(prefix: str, nodes: Sequence[str]) -> str:
    return " ".join("0" if n == "0" else f"{prefix}{n}".replace(".", "_") for n in nodes)
