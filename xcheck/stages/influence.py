"""Which nodes can move which: directed reach through the few elements of an amplifier or of a block."""

from collections.abc import Callable, Collection, Iterable, Sequence

from xcheck.circuit.elements import GROUND, Controlled, Coupling, Device, Element, Passive, Source

Edges = dict[str, list[str]]


def influence(
    elements: Sequence[Element], held: Collection[str], counts: Callable[[Passive], bool] = lambda _: True
) -> Edges:
    """For each node the nodes that it moves.

    held: nodes that nothing moves (ground is always one). A voltage-controlled or -controlling source fixes its
    output: what it senses moves the output, what hangs on the output does not. counts: which passives conduct.
    """
    still = {GROUND, *held}
    fixed = _fixed_outputs(elements, still)
    deaf = still | fixed.keys()
    sources = {e.name: e for e in elements}
    edges: Edges = {}

    def connect(causes: Iterable[str], effects: Iterable[str]) -> None:
        targets = list(effects)
        for cause in causes:
            edges.setdefault(cause, []).extend(t for t in targets if t != cause)

    for element in elements:
        match element:
            case Passive():
                if counts(element):
                    connect(element.nodes, [n for n in element.nodes if n not in deaf])
            case Source():
                if element.kind == "v":
                    connect(element.nodes, [n for n in element.nodes if n not in deaf])
            case Controlled():
                causes = [*element.sensing, *_carriers(element, sources)]
                if element.kind in "eh":
                    causes += element.nodes  # one end moves the other
                connect(causes, [n for n in element.nodes if n not in still])
            case Device():
                connect((*element.nodes, *element.sensing), [n for n in element.nodes if n not in still])
            case Coupling():
                coils = [n for name in element.inductors if name in sources for n in sources[name].nodes]
                connect(coils, [n for n in coils if n not in deaf])
    return edges


def _carriers(element: Controlled, sources: dict[str, Element]) -> list[str]:
    """The ends of the voltage sources whose current an element reads."""
    return [n for t in element.terms if t.source in sources for n in sources[t.source].nodes]


def _fixed_outputs(elements: Sequence[Element], still: set[str]) -> dict[str, str]:
    """Nodes whose voltage a controlled voltage source sets, one a source, with the source's name."""
    fixed: dict[str, str] = {}
    for element in elements:
        if isinstance(element, Controlled) and element.kind in "eh":
            free = [n for n in element.nodes if n not in still and n not in fixed]
            if free:
                fixed[free[0]] = element.name
    return fixed


def reach(starts: Iterable[str], edges: Edges) -> set[str]:
    """All nodes that some nodes move, themselves left out unless a way leads back to them."""
    seen: set[str] = set()
    waiting = list(starts)
    while waiting:
        for node in edges.get(waiting.pop(), ()):
            if node not in seen:
                seen.add(node)
                waiting.append(node)
    return seen


def reversed_edges(edges: Edges) -> Edges:
    """The same edges the other way round."""
    back: Edges = {}
    for cause, effects in edges.items():
        for effect in effects:
            back.setdefault(effect, []).append(cause)
    return back
