"""Splitting a circuit into stages at its stiff nodes."""

from collections.abc import Sequence

from xcheck.circuit.elements import Circuit, Controlled, Element, Source
from xcheck.finding import Finding
from xcheck.stages.networks import Network, loops_of, networks_of
from xcheck.stages.nodes import StiffNodes, references, stiff_nodes
from xcheck.stages.ports import PortFinder
from xcheck.stages.types import Amplifier, Partition, Stage

DEFAULT_BAND = (10.0, 10e3)
"""Hz, in which a reference node is judged where nobody declared a band."""


def split(
    circuit: Circuit,
    amplifiers: Sequence[Amplifier],
    findings: Sequence[Finding] = (),
    extra_ports: Sequence[str] = (),
    band: tuple[float, float] = DEFAULT_BAND,
) -> Partition:
    """The stages of a circuit with their ports; linear in its size."""
    own = {name for a in amplifiers for name in a.elements}
    outside = [e for e in circuit.elements if e.name not in own]
    loose = [e for e in outside if isinstance(e, Controlled)]
    stiff = stiff_nodes(circuit, amplifiers, loose)
    _add_references(stiff, outside, amplifiers, band)
    virtual = _virtual_grounds(outside, amplifiers, stiff)
    barriers = {**stiff.reasons, **dict.fromkeys(virtual, "virtual ground")}
    networks = networks_of(outside, barriers)
    loops = loops_of(networks, amplifiers, loose, barriers, virtual)
    group_of = {index: g for g, group in enumerate(loops.groups) for index in group}
    fed: list[list[Network]] = [[] for _ in loops.groups]
    shared: dict[int, set[int]] = {}
    for k, (network, feeds) in enumerate(zip(networks, loops.feeds, strict=True)):
        groups = {group_of[index] for index in feeds}
        shared[id(network)] = groups
        for g in sorted(groups):
            fed[g].append(networks[k])
    finder = PortFinder(circuit, amplifiers, stiff, virtual, shared, [fed[g] for g in range(len(loops.groups))])
    stages: list[Stage] = []
    for g, group in enumerate(loops.groups):
        members = tuple(amplifiers[index] for index in group)
        name = "+".join(a.name for a in members)
        stages.append(finder.stage(name, g, members))
    stages, more = finder.with_extra_ports(stages, extra_ports)
    listed = tuple(n for n, why in stiff.reasons.items() if why in ("rail", "reference"))
    return Partition(
        circuit=circuit, amplifiers=tuple(amplifiers), stages=tuple(stages), stiff=stiff.reasons,
        ac_ground=stiff.still, driver=stiff.driver, references=listed, findings=(*findings, *more),
    )  # fmt: skip


def _add_references(
    stiff: StiffNodes, elements: Sequence[Element], amplifiers: Sequence[Amplifier], band: tuple[float, float]
) -> None:
    """Marks reference nodes on which two amplifiers or more hang as stiff."""
    at: dict[str, list[Element]] = {}
    for element in elements:
        for node in element.nodes:
            if node not in stiff.reasons:
                at.setdefault(node, []).append(element)
    for node in references(at, stiff, band):
        barriers = {**stiff.reasons, node: "reference"}
        if _amplifiers_beyond(node, at, barriers, amplifiers) >= 2:
            stiff.reasons[node] = "reference"


def _amplifiers_beyond(
    node: str, at: dict[str, list[Element]], barriers: dict[str, str], amplifiers: Sequence[Amplifier]
) -> int:
    """How many amplifiers have an input on a node or in the networks that hang on it."""
    reached = {node}
    waiting = [node]
    while waiting:
        for element in at.get(waiting.pop(), ()):
            for other in element.nodes:
                if other not in barriers and other not in reached:
                    reached.add(other)
                    waiting.append(other)
    return sum(a.non_inverting in reached or a.inverting in reached for a in amplifiers)


def _virtual_grounds(elements: Sequence[Element], amplifiers: Sequence[Amplifier], stiff: StiffNodes) -> dict[str, int]:
    """Inverting inputs that feedback holds still: the other input does not move, and a path of two-terminal
    elements leads from the amplifier's own output to them."""
    if not amplifiers:
        return {}
    still = {n for n, why in stiff.reasons.items() if n in stiff.still or why in ("rail", "reference")}
    # an input that carries a signal moves the other one with it, so it makes no virtual ground
    quiet = (still - stiff.signal) | _quiet_nodes(elements, stiff, still - stiff.signal)
    wanted = [k for k, a in enumerate(amplifiers) if a.non_inverting in quiet and a.inverting not in stiff.reasons]
    if not wanted:
        return {}
    candidates = {amplifiers[k].inverting: "virtual ground" for k in wanted}
    networks = networks_of(elements, {**stiff.reasons, **candidates})
    beside: dict[str, set[int]] = {}
    for n, network in enumerate(networks):
        for node in network.edge:
            beside.setdefault(node, set()).add(n)
    found: dict[str, int] = {}
    for k in wanted:
        amplifier = amplifiers[k]
        if beside.get(amplifier.inverting, set()) & beside.get(amplifier.output, set()):
            found.setdefault(amplifier.inverting, k)
    return found


def _quiet_nodes(elements: Sequence[Element], stiff: StiffNodes, still: set[str]) -> set[str]:
    """Nodes of networks that only still nodes without a signal surround, such as a bias compensation resistor's."""
    currents = {n for e in elements if isinstance(e, Source) and e.kind == "i" for n in e.nodes}
    currents |= {n for e in elements if isinstance(e, Controlled) for n in e.nodes}
    return {
        node
        for network in networks_of(elements, stiff.reasons)
        if network.edge <= still and not network.nodes & currents
        for node in network.nodes
    }
