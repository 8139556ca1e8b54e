"""Whose a network is: each stage's own elements, and the nodes where it hangs on what it shares with others."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from xcheck.circuit.elements import Controlled, Coupling, Device, Element, Source
from xcheck.stages.networks import Loops, Network
from xcheck.stages.nodes import is_signal
from xcheck.stages.types import Amplifier, Kind
from xcheck.stages.wiring import Wiring


@dataclass
class Share:
    """elements: the stage's own, by name; attached: nodes of networks that are not the stage's where its own elements
    or inputs hang, with the kind of what drives the network; resting: nodes of own networks that nothing outside
    drives."""

    elements: dict[str, Element] = field(default_factory=dict)
    attached: dict[str, Kind] = field(default_factory=dict)
    resting: set[str] = field(default_factory=set)


def shares_of(
    networks: Sequence[Network], loops: Loops, amplifiers: Sequence[Amplifier], wiring: Wiring
) -> list[Share]:
    """The share of each group of amplifiers.

    A network that one group senses is that group's. Of a network that several sense it is that group's whose own
    output drives it, which has its feedback there; the others only hang on it. Where none does, all hang on it, as
    two stages do behind one source resistor.
    """
    shares = [Share() for _ in loops.groups]
    group_of = {k: g for g, members in enumerate(loops.groups) for k in members}
    starts = _Starts(loops, amplifiers, group_of, wiring)
    for network, feeds, drives in zip(networks, loops.feeds, loops.drives, strict=True):
        own = feeds if len(feeds) == 1 else feeds & drives
        owner = next(iter(own)) if len(own) == 1 else None
        absorbed: set[str] = set()
        if len(feeds) > 1:
            kind = _kind_of(network, wiring)
            for group in sorted(feeds - {owner}):
                walk = _Walk(group, group_of, wiring, network)
                walk.run(starts.of(network, group))
                shares[group].elements.update(walk.elements)
                shares[group].attached.update(dict.fromkeys(walk.attached, kind))
                absorbed |= walk.elements.keys()
        if owner is not None:
            shares[owner].elements.update({e.name: e for e in network.elements if e.name not in absorbed})
            if all(_is_quiet(node, wiring) for node in network.edge):
                shares[owner].resting |= network.nodes
    return shares


def _is_quiet(node: str, wiring: Wiring) -> bool:
    held = wiring.held
    return (node in held.still and node not in held.signal) or held.reasons.get(node) in ("rail", "reference")


def _kind_of(network: Network, wiring: Wiring) -> Kind:
    """Whether what drives a network is a signal; a network that nothing drives is open, and so a signal's."""
    edge = {n for n in network.edge if n not in wiring.virtual}
    if not edge or any(not _is_quiet(n, wiring) for n in edge):
        return "signal"
    for node in network.nodes:
        if node in wiring.circuit.boundary:
            return "signal"
        for element, index in wiring.on(node):
            if isinstance(element, Source) and element.kind == "i" and is_signal(element):
                return "signal"
            if isinstance(element, Controlled) and index >= 0 and element.name not in wiring.owner:
                return "signal"
    return "reference"


class _Starts:
    """The nodes at which each group senses a network."""

    def __init__(self, loops: Loops, amplifiers: Sequence[Amplifier], group_of: dict[int, int], wiring: Wiring) -> None:
        self.virtual = wiring.virtual
        self.groups: dict[str, set[int]] = {}
        for k, amplifier in enumerate(amplifiers):
            for node in (amplifier.non_inverting, amplifier.inverting):
                self.groups.setdefault(node, set()).add(group_of[k])
        for node, k in wiring.virtual.items():
            self.groups.setdefault(node, set()).add(group_of[k])
        for group, names in enumerate(loops.others):
            for name in names:
                element = wiring.circuit.by_name[name]
                for node in element.sensing if isinstance(element, (Controlled, Device)) else ():
                    self.groups.setdefault(node, set()).add(group)
        self.found: tuple[int, dict[int, list[str]]] = (-1, {})

    def of(self, network: Network, group: int) -> list[str]:
        """The nodes of one group in a network, ordinary ones and virtual grounds at its edge."""
        if self.found[0] != id(network):
            by_group: dict[int, list[str]] = {}
            at_edge = [n for n in network.edge if n in self.virtual]
            for node in sorted([*(n for n in network.nodes if n in self.groups), *at_edge]):
                for g in self.groups.get(node, ()):
                    by_group.setdefault(g, []).append(node)
            self.found = (id(network), by_group)
        return self.found[1].get(group, [])


class _Walk:
    """From a group's inputs into a network as far as all is the group's own: while only one way leads on."""

    def __init__(self, group: int, group_of: dict[int, int], wiring: Wiring, network: Network) -> None:
        self.group = group
        self.group_of = group_of
        self.wiring = wiring
        self.network = network
        self.region: set[str] = set()
        self.elements: dict[str, Element] = {}
        self.attached: list[str] = []

    def run(self, starts: Iterable[str]) -> None:
        """Walks from all inputs; afterwards `elements` and `attached` hold what was found."""
        waiting: list[str] = []
        for start in starts:
            if start in self.network.nodes:
                waiting.append(start)
                continue
            self.region.add(start)
            for element, index in self.wiring.on(start):
                others = [n for n in element.nodes if n in self.network.nodes]
                if index >= 0 and others and self._is_part(element):
                    self.elements[element.name] = element
                    waiting += others
        waiting.reverse()
        while waiting:
            node = waiting.pop()
            if node in self.region:
                continue
            onward = self._onward(node)
            if onward is None:
                if node not in self.attached:
                    self.attached.append(node)
                continue
            self.region.add(node)
            for element, index in self.wiring.on(node):
                if index >= 0 and self._is_part(element):
                    self.elements[element.name] = element
            waiting += onward
        self.attached = [n for n in self.attached if n not in self.region]

    def _is_part(self, element: Element) -> bool:
        return element.name not in self.wiring.owner and not isinstance(element, Coupling)

    def _onward(self, node: str) -> list[str] | None:
        """The one node to which the walk goes on from here, [] where it ends, None where others join in."""
        wiring = self.wiring
        if node in wiring.circuit.boundary or any(self.group_of[k] != self.group for k in wiring.inputs.get(node, ())):
            return None
        found: set[str] = set()
        for element, index in wiring.on(node):
            if element.name in wiring.owner:
                continue
            if index < 0 or isinstance(element, Controlled) or (isinstance(element, Source) and element.kind == "i"):
                return None
            for other in element.nodes:
                if other == node or other in self.region or _is_quiet(other, wiring):
                    continue
                if other not in self.network.nodes:
                    return None
                found.add(other)
            if len(found) > 1:
                return None
        return sorted(found)
