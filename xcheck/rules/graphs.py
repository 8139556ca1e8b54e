"""How nodes hang together: at DC, through feedback, and by the cards that mention them.

All searches are linear in the size of the circuit; the elements inside an amplifier never count as a way
through.
"""

from collections import defaultdict, deque
from collections.abc import Iterable, Mapping

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Coupling, Device, Element, Passive, Source
from xcheck.reviewed import Evidence
from xcheck.stages.types import Partition

Edges = Mapping[str, Iterable[str]]


def around_amplifiers(partition: Partition) -> tuple[Element, ...]:
    """The circuit's elements without the amplifiers' own."""
    own = {name for amplifier in partition.amplifiers for name in amplifier.elements}
    return tuple(e for e in partition.circuit.elements if e.name not in own)


def terminals(circuit: Circuit) -> dict[str, list[tuple[Element, int]]]:
    """For each node the ends of elements on it: (element, index in its nodes), -1 for sensing."""
    found: dict[str, list[tuple[Element, int]]] = defaultdict(list)
    for element in circuit.elements:
        for index, node in enumerate(element.nodes):
            found[node].append((element, index))
        for node in sensed(element):
            found[node].append((element, -1))
    return found


def sensed(element: Element) -> tuple[str, ...]:
    """The nodes that an element senses without drawing current."""
    return element.sensing if isinstance(element, (Controlled, Device)) else ()


def reach(starts: Iterable[str], edges: Edges) -> set[str]:
    """All nodes that can be come to from some nodes, these included."""
    seen = set(starts)
    waiting = deque(seen)
    while waiting:
        for node in edges.get(waiting.popleft(), ()):
            if node not in seen:
                seen.add(node)
                waiting.append(node)
    return seen


def is_open_block(evidence: Evidence) -> bool:
    """No source drives a signal, so open nets stand for what will be connected."""
    return not any(
        isinstance(e, Source) and (e.transient or (e.ac is not None and e.ac != 0)) for e in evidence.circuit.elements
    )


def declared_ports(evidence: Evidence) -> set[str]:
    """Nodes that somebody said are driven or seen from outside: pins of a reviewed subcircuit, ports named in
    the deck or in the call, and the ports of a deck that has no signal source."""
    nodes = {GROUND, *evidence.circuit.boundary, *(name.lower() for name in evidence.options.ports)}
    for directive in evidence.circuit.directives:
        if directive.words and directive.words[0].lower() == "port":
            nodes.update(word.lower() for word in directive.words[1:])
    if is_open_block(evidence):
        nodes.update(port.node for stage in evidence.partition.stages for port in stage.ports)
    return nodes


def held_at_dc(evidence: Evidence) -> set[str]:
    """Nodes whose voltage is defined at DC: a way through R, L, voltage sources, controlled voltages or
    devices leads to ground, to an amplifier's output or to where the outside may hold them. Devices are
    taken to conduct: whether a junction does is the operating point's affair. Capacitors and current
    sources are no way.
    """
    edges: dict[str, set[str]] = defaultdict(set)
    for element in around_amplifiers(evidence.partition):
        if _conducts_at_dc(element):
            first, *rest = element.nodes or (GROUND,)
            for node in rest:
                edges[first].add(node)
                edges[node].add(first)
    outputs = {amplifier.output for amplifier in evidence.partition.amplifiers}
    starts = {GROUND, *outputs, *evidence.circuit.boundary}
    if is_open_block(evidence):
        starts |= declared_ports(evidence)
    return reach(starts, edges)


def _conducts_at_dc(element: Element) -> bool:
    match element:
        case Passive():
            return element.kind != "c"
        case Source():
            return element.kind == "v"
        case Controlled():
            return element.kind in "eh"
        case _:
            return isinstance(element, Device)


def influence(partition: Partition, *, at_dc: bool = False) -> dict[str, set[str]]:
    """Directed edges along which a signal travels: through passives both ways but not into a stiff node,
    whose holder has the say there; through devices and floating voltage sources both ways; from what a
    controlled source senses to what it drives; from an amplifier's inputs to its output. Nodes that do not
    move at AC end every path. at_dc leaves capacitors and mutual inductance out."""
    still = {GROUND, *partition.ac_ground}
    stiff = {*still, *partition.stiff, *(a.output for a in partition.amplifiers)}
    edges: dict[str, set[str]] = defaultdict(set)

    def connect(sources: Iterable[str], targets: Iterable[str], barred: set[str]) -> None:
        ends = [t for t in targets if t not in barred]
        for source in sources:
            if source not in still:
                edges[source].update(ends)

    by_name = partition.circuit.by_name
    for element in around_amplifiers(partition):
        match element:
            case Controlled():
                carriers = [by_name[t.source].nodes for t in element.terms if t.source in by_name]
                connect((*element.sensing, *(n for c in carriers for n in c)), element.nodes, still)
            case Device():
                connect((*element.nodes, *element.sensing), element.nodes, still)
            case Passive():
                if not (at_dc and element.kind == "c"):
                    connect(element.nodes, element.nodes, stiff)
            case Source():
                if element.kind == "v":
                    connect(element.nodes, element.nodes, still)
            case Coupling():
                coils = [n for name in element.inductors if name in by_name for n in by_name[name].nodes]
                if not at_dc:
                    connect(coils, coils, stiff)
    for amplifier in partition.amplifiers:
        connect((amplifier.non_inverting, amplifier.inverting), (amplifier.output,), still)
    return edges


def loops(nodes: Iterable[str], edges: Edges) -> dict[str, int]:
    """Node to the number of its strongly connected set: two nodes share one when a way leads there and back.

    Tarjan, Depth-first search and linear graph algorithms, SIAM J. Computing 1 (1972), without recursion.
    """
    number: dict[str, int] = {}
    low: dict[str, int] = {}
    group: dict[str, int] = {}
    stack: list[str] = []
    groups = 0
    for root in nodes:
        if root in number:
            continue
        number[root] = low[root] = len(number)
        stack.append(root)
        work = [(root, iter(edges.get(root, ())))]
        while work:
            node, targets = work[-1]
            for target in targets:
                if target not in number:
                    number[target] = low[target] = len(number)
                    stack.append(target)
                    work.append((target, iter(edges.get(target, ()))))
                    break
                if target not in group:
                    low[node] = min(low[node], number[target])
            else:
                work.pop()
                if work:
                    low[work[-1][0]] = min(low[work[-1][0]], low[node])
                if low[node] == number[node]:
                    while stack:
                        member = stack.pop()
                        group[member] = groups
                        if member == node:
                            break
                    groups += 1
    return group
