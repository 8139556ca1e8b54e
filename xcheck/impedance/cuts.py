"""Cutting a circuit at its ports: a zero-volt branch between a stage's side of a node and all else on it."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Element
from xcheck.circuit.equations import Equations, Index, Short
from xcheck.circuit.parts import islands
from xcheck.stages.types import Port


@dataclass(frozen=True, slots=True)
class Cut:
    """The cut of one port. inside: name of the node on the stage's side; outside: the port's own node, where
    the cuts of all its ports meet."""

    port: Port
    inside: str
    outside: str

    @property
    def branch(self) -> Short:
        """The zero-volt branch; its current flows into the stage."""
        return Short(f"cut {self.port.subject}", (self.outside, self.inside))


def in_batches(circuit: Circuit, ports: Iterable[Port]) -> tuple[list[list[Port]], dict[str, str]]:
    """Ports sorted into batches in which no terminal belongs to two ports, and, for ports that cannot be
    cut, the reason by subject."""
    batches: list[tuple[list[Port], set[tuple[str, str, int]]]] = []
    refused: dict[str, str] = {}
    for port in ports:
        if port.node == GROUND:
            refused[port.subject] = "the port is ground"
            continue
        stray = [t for t in port.inside if port.node not in _nodes_of(circuit, t.element, t.index)]
        if stray or not port.inside:
            named = ", ".join(t.element for t in stray) or "nothing"
            refused[port.subject] = f"the stage's side of {port.node} is made of {named}, which is not there"
            continue
        claimed = {(port.node, t.element, t.index) for t in port.inside}
        for members, taken in batches:
            if not taken & claimed:
                members.append(port)
                taken.update(claimed)
                break
        else:
            batches.append(([port], claimed))
    return [members for members, _ in batches], refused


def _nodes_of(circuit: Circuit, name: str, index: int) -> tuple[str, ...]:
    element = circuit.by_name.get(name)
    if element is None:
        return ()
    if index < 0:
        return getattr(element, "sensing", ())
    return element.nodes[index : index + 1]


def cut_apart(circuit: Circuit, ports: Sequence[Port]) -> tuple[list[Element], list[Cut]]:
    """The elements with the terminals inside each port moved to a node of their own, and the cuts."""
    moves: dict[str, list[tuple[int, str, str]]] = {}
    inside = {port.subject: f"{port.node} inside {port.subject}" for port in ports}
    for port in ports:
        for terminal in port.inside:
            moves.setdefault(terminal.element, []).append((terminal.index, port.node, inside[port.subject]))
    elements = [_moved(e, moves.pop(e.name)) if e.name in moves else e for e in circuit.elements]
    return elements, [Cut(port, inside[port.subject], port.node) for port in ports]


def _moved(element: Element, moves: Sequence[tuple[int, str, str]]) -> Element:
    nodes = list(element.nodes)
    for index, old, new in moves:
        if index >= 0:
            nodes[index] = new
        elif isinstance(element, Controlled):
            element = replace(
                element,
                terms=tuple(
                    replace(
                        t,
                        positive=new if t.positive == old else t.positive,
                        negative=new if t.negative == old else t.negative,
                    )
                    for t in element.terms
                ),
            )
    return replace(element, nodes=tuple(nodes))  # type: ignore[arg-type]  # as many nodes as before


def closed_sides(equations: Equations, cuts: Sequence[Cut], dc: bool) -> tuple[list[bool], list[bool]]:
    """For each cut, in the order in which the equations have their shorts, whether no current can flow because
    neither a conductor nor a controlled current source leads on to ground: on the stage's side, and outside.
    """
    island = islands(equations, dc, fed=True, cuts=len(cuts))
    return (
        _cut_off(equations, island, [(cut.inside, cut.outside) for cut in cuts]),
        _cut_off(equations, island, [(cut.outside, cut.inside) for cut in cuts]),
    )


def _cut_off(equations: Equations, island: Index, cuts: Sequence[tuple[str, str]]) -> list[bool]:
    """For each cut whether its first node has no way to ground but through the cut itself."""
    ground = int(island[-1])
    ends = [tuple(int(island[equations.node[node]]) for node in cut) for cut in cuts]
    across: dict[int, list[tuple[int, int]]] = {}
    for n, (near, far) in enumerate(ends):
        across.setdefault(near, []).append((n, far))
        across.setdefault(far, []).append((n, near))
    return [not _reaches(start, ground, n, across) for n, (start, _) in enumerate(ends)]


def _reaches(start: int, ground: int, barred: int, across: Mapping[int, Sequence[tuple[int, int]]]) -> bool:
    seen, ahead = {start}, [start]
    while ahead:
        here = ahead.pop()
        if here == ground:
            return True
        for cut, there in across.get(here, ()):
            if cut != barred and there not in seen:
                seen.add(there)
                ahead.append(there)
    return False
