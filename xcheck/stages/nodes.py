"""Nodes that split a circuit: ground, nodes held by voltage sources, amplifiers' outputs, rails, references."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Element, Passive, Source
from xcheck.stages.types import Amplifier


def sources_by_node(circuit: Circuit) -> dict[str, list[Source]]:
    """Voltage sources by node."""
    by_node: dict[str, list[Source]] = {}
    for element in circuit.elements:
        if isinstance(element, Source) and element.kind == "v":
            for node in element.nodes:
                by_node.setdefault(node, []).append(element)
    return by_node


def reach_by_sources(by_node: Mapping[str, Sequence[Source]], start: Iterable[str]) -> dict[str, tuple[Source, ...]]:
    """Nodes that voltage sources tie to the start nodes, each with the sources on the way."""
    reached: dict[str, tuple[Source, ...]] = dict.fromkeys(start, ())
    waiting = list(reached)
    while waiting:
        node = waiting.pop()
        for source in by_node.get(node, ()):
            other = source.nodes[0] if source.nodes[1] == node else source.nodes[1]
            if other not in reached:
                reached[other] = (*reached[node], source)
                waiting.append(other)
    return reached


def held_still(circuit: Circuit) -> dict[str, str]:
    """Nodes that do not move at AC, each with the reason: ground and what voltage sources tie to it. A source's
    own AC part does not count: all but the test source are dead."""
    reached = reach_by_sources(sources_by_node(circuit), [GROUND])
    return {n: f"voltage source {path[-1].name}" if path else "ground" for n, path in reached.items()}


@dataclass(frozen=True)
class StiffNodes:
    """reasons: why each node is stiff; driver: the flat name of the amplifier or source that holds it;
    signal: nodes held by a source with an AC or transient part; still: nodes that do not move at AC."""

    reasons: dict[str, str]
    driver: dict[str, str]
    signal: frozenset[str]
    still: dict[str, str]


def stiff_nodes(circuit: Circuit, amplifiers: Sequence[Amplifier], loose: Sequence[Controlled]) -> StiffNodes:
    """All stiff nodes but references. loose: controlled sources that belong to no amplifier."""
    still = held_still(circuit)
    reasons = dict(still)
    driver: dict[str, str] = {}
    signal: set[str] = set()
    by_node = sources_by_node(circuit)
    for node, path in reach_by_sources(by_node, [GROUND]).items():
        if path:
            driver[node] = path[-1].name
        if any(s.ac is not None or s.transient for s in path):
            signal.add(node)
    outputs = {a.output: a.name for a in amplifiers}
    for element in loose:
        if element.kind in "eh":
            outputs.update({n: element.name for n in element.nodes if n not in still})
    for node, name in outputs.items():
        for other in reach_by_sources(by_node, [node]):
            if other not in reasons:
                reasons[other] = f"output of {name}"
                driver[other] = name
    for amplifier in amplifiers:
        for rail in (amplifier.positive_supply, amplifier.negative_supply):
            if rail is not None and rail not in reasons:
                reasons[rail] = "rail"
    return StiffNodes(reasons, driver, frozenset(signal), still)


def admittance(element: Element, hertz: float) -> float:
    """Magnitude of a passive's admittance in siemens."""
    if not isinstance(element, Passive):
        return 0.0
    omega = 6.283185307179586 * hertz
    if element.kind == "r":
        return 1.0 / abs(element.value)
    return omega * abs(element.value) if element.kind == "c" else 1.0 / (omega * abs(element.value) or 1e-300)


def references(candidates: Mapping[str, Sequence[Element]], stiff: StiffNodes, band: tuple[float, float]) -> list[str]:
    """Nodes with a reservoir capacitor whose impedance to ground is below 1 % of the least impedance that hangs on
    them, at both ends of the band."""
    found = []
    for node, elements in candidates.items():
        down = [e for e in elements if isinstance(e, Passive) and any(n in stiff.still for n in e.nodes)]
        # what leads straight to an output or a source is a load, not a stage that hangs on the node
        hanging = [e for e in elements if not all(n == node or n in stiff.reasons for n in e.nodes)]
        if not any(isinstance(e, Passive) and e.kind == "c" for e in down):
            continue
        if all(
            max((admittance(e, f) for e in hanging), default=0.0) <= 0.01 * sum(admittance(e, f) for e in down)
            for f in band
        ):
            found.append(node)
    return found
