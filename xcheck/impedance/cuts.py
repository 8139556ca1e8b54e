"""Cutting a circuit at its ports: a zero-volt branch between a stage's side of a node and all else on it."""

from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Element, Source
from xcheck.circuit.equations import Short
from xcheck.stages.types import Port


@dataclass(frozen=True, slots=True)
class Cut:
    """The cut of one port. inside: name of the node on the stage's side; outside: the port's own node, where
    the cuts of all its ports meet; open: nothing outside lets current through at AC."""

    port: Port
    inside: str
    outside: str
    open: bool

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
    conducting = Counter(port.node for port in ports)
    for element in elements:
        if not (isinstance(element, Source) and element.kind == "i"):
            conducting.update(element.nodes)
    cuts = [Cut(port, inside[port.subject], port.node, conducting[port.node] < 2) for port in ports]
    return elements, cuts


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
