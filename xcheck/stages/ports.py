"""Ports: where a stage meets the rest, and which terminals on the node are the stage's own."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Passive, Source
from xcheck.errors import CallError
from xcheck.finding import Finding
from xcheck.place import Place
from xcheck.stages.networks import Network
from xcheck.stages.nodes import StiffNodes
from xcheck.stages.types import Amplifier, Kind, Port, Side, Stage, Terminal

MOST_CANDIDATES = 50
"""Nodes tried as the junction at which a shared network falls apart into its stages' own parts."""


class PortFinder:
    """Makes stages with their ports, from networks already sorted by the stages that they feed."""

    def __init__(
        self, circuit: Circuit, amplifiers: Sequence[Amplifier], stiff: StiffNodes, virtual: Mapping[str, int],
        shared: Mapping[int, set[int]], fed: Sequence[Sequence[Network]],
    ) -> None:  # fmt: skip
        self.circuit = circuit
        self.amplifiers = amplifiers
        self.stiff = stiff
        self.virtual = virtual
        self.shared = shared
        self.fed = fed
        self.boundary = frozenset(circuit.boundary)
        self.supplies = {n for a in amplifiers for n in (a.positive_supply, a.negative_supply) if n is not None}
        home = {node: network for networks in fed for network in networks for node in network.nodes}
        self.fed_back = frozenset(
            a.inverting for a in amplifiers if a.inverting in home and a.output in home[a.inverting].edge
        )
        self.owner = {name: a.name for a in amplifiers for name in a.elements}
        self.at: dict[str, list[tuple[Element, int]]] = {}
        for element in circuit.elements:
            for index, node in enumerate(element.nodes):
                self.at.setdefault(node, []).append((element, index))
            if isinstance(element, (Controlled, Device)):
                for node in dict.fromkeys(element.sensing):
                    self.at.setdefault(node, []).append((element, -1))

    def stage(self, name: str, group: int, members: tuple[Amplifier, ...]) -> Stage:
        """One stage with its ports, inputs first."""
        inside: dict[str, Element] = {}
        junctions: list[str] = []
        for network in self.fed[group]:
            elements, junction = self._own_part(network, group, members)
            inside.update({e.name: e for e in elements})
            if junction is not None:
                junctions.append(junction)
        own = {n for a in members for n in a.elements} | set(inside)
        outputs = {a.output for a in members}
        ports: dict[str, Port] = {}
        for node, kind, left_out in self._inputs(inside.values(), junctions, members, outputs):
            if node not in ports:
                port = self._port(name, node, "input", kind, own - left_out, members)
                if port is not None:
                    ports[node] = port
        for amplifier in members:
            port = self._port(name, amplifier.output, "output", "signal", own, members)
            if port is not None and amplifier.output not in ports:
                ports[amplifier.output] = replace(port, place=amplifier.place)
        return Stage(name, members, tuple(inside), tuple(ports.values()))

    def _inputs(
        self, inside: Iterable[Element], junctions: Sequence[str], members: Sequence[Amplifier], outputs: set[str]
    ) -> Iterable[tuple[str, Kind, set[str]]]:
        """Input nodes with their kind and the names of elements that count as outside there."""
        nodes = [n for e in inside for n in e.nodes]
        nodes += [n for a in members for n in (a.non_inverting, a.inverting)]
        for node in dict.fromkeys(nodes):
            if node in (GROUND, *outputs) or node in junctions:
                continue
            kind = self._kind(node)
            if kind is None:
                continue
            yield node, kind, set()
            behind = self._behind_series(node)
            if behind is not None:
                element, other = behind
                yield other, kind, {element.name}
        for node in junctions:
            yield node, "signal", set()

    def _kind(self, node: str) -> Kind | None:
        """The kind of input that a node is, None where it is none."""
        why = self.stiff.reasons.get(node)
        if why is not None:
            if why == "reference":
                return "reference"
            if why.startswith("output"):
                return "signal"
            if node in self.stiff.signal:
                return "signal"
            return None if why in ("rail", "ground") or node in self.supplies else "reference"
        if node in self.boundary:
            return "signal"
        terminals = self.at.get(node, [])
        if any(isinstance(e, Source) and e.kind == "i" for e, _ in terminals):
            return "signal"
        alone = {self.owner.get(e.name, e.name) for e, _ in terminals}
        return "signal" if len(alone) == 1 and node not in self.virtual else None

    def _behind_series(self, node: str) -> tuple[Element, str] | None:
        """The one element that hangs on a source's node and the node behind it, unless that is a virtual ground."""
        if node not in self.stiff.signal and self.stiff.reasons.get(node, "") in ("", "reference"):
            return None
        if self.stiff.reasons[node].startswith("output"):
            return None
        others = [(e, k) for e, k in self.at[node] if not (isinstance(e, Source) and e.kind == "v")]
        if len(others) != 1:
            return None
        element, index = others[0]
        if not isinstance(element, Passive) or element.name in self.owner:
            return None
        other = element.nodes[1 - index]
        if other in self.stiff.reasons or other in self.virtual or other in self.fed_back:
            return None
        # a node that two sources reach through an element each is where they are summed
        rivals = [e for e, _ in self.at[other] if e is not element and self._is_series(e, other)]
        return None if rivals else (element, other)

    def _is_series(self, element: Element, node: str) -> bool:
        """Whether an element leads from a node to a source's node on which nothing else hangs."""
        if not isinstance(element, Passive) or element.name in self.owner:
            return False
        far = element.nodes[0] if element.nodes[1] == node else element.nodes[1]
        if far not in self.stiff.signal:
            return False
        return sum(not (isinstance(e, Source) and e.kind == "v") for e, _ in self.at[far]) == 1

    def _own_part(self, network: Network, group: int, members: Sequence[Amplifier]) -> tuple[list[Element], str | None]:
        """A network's elements that are the stage's own, and the node where they join what other stages share."""
        if len(self.shared[id(network)]) < 2:
            return network.elements, None
        mine = {n for a in members for n in (a.non_inverting, a.inverting)}
        mine &= network.nodes | network.edge
        names = {a.name for a in members}
        theirs = {n for a in self.amplifiers for n in (a.non_inverting, a.inverting) if a.name not in names}
        theirs &= network.nodes | (network.edge & set(self.virtual))
        theirs -= mine - network.nodes
        by_node: dict[str, list[Element]] = {}
        for element in network.elements:
            for node in element.nodes:
                by_node.setdefault(node, []).append(element)
        free = network.nodes
        for candidate in self._by_distance(mine, by_node, free)[:MOST_CANDIDATES]:
            reached, passed = self._walk(mine - {candidate}, by_node, free - {candidate})
            if not reached & theirs - {candidate}:
                return list(passed.values()), candidate
        return network.elements, None

    @staticmethod
    def _by_distance(start: set[str], by_node: Mapping[str, list[Element]], free: set[str]) -> list[str]:
        order = dict.fromkeys(sorted(start & free))
        waiting = sorted(start)
        while waiting and len(order) <= MOST_CANDIDATES:
            node = waiting.pop(0)
            for element in by_node.get(node, ()):
                for other in element.nodes:
                    if other in free and other not in order:
                        order[other] = None
                        waiting.append(other)
        return list(order)

    @staticmethod
    def _walk(
        start: set[str], by_node: Mapping[str, list[Element]], free: set[str]
    ) -> tuple[set[str], dict[str, Element]]:
        """Nodes reached from some nodes through free nodes, and the elements passed."""
        reached = set(start)
        passed: dict[str, Element] = {}
        waiting = list(start)
        while waiting:
            for element in by_node.get(waiting.pop(), ()):
                passed[element.name] = element
                for other in element.nodes:
                    if other not in reached:
                        reached.add(other)
                        if other in free:
                            waiting.append(other)
        return reached, passed

    def _port(
        self, stage: str, node: str, side: Side, kind: Kind, own: set[str], members: Sequence[Amplifier]
    ) -> Port | None:
        """The port at a node, None where nothing of the stage touches it."""
        inside = tuple(Terminal(e.name, k) for e, k in self.at.get(node, ()) if e.name in own)
        if not inside:
            return None
        names = {t.element for t in inside}
        outside = [(e, k) for e, k in self.at[node] if e.name not in names]
        current = side == "input" and all(
            k < 0 or (isinstance(e, Source) and e.kind == "i") or (isinstance(e, Controlled) and e.kind in "fg")
            for e, k in outside
        )
        return Port(stage, node, node, side, kind, inside, current, self._place(inside, node, members))

    def _place(self, inside: Sequence[Terminal], node: str, members: Sequence[Amplifier]) -> Place:
        """The node's field in the card of the stage's element there, or the amplifier's card."""
        for terminal in inside:
            if terminal.element not in self.owner and terminal.index >= 0:
                card = self.circuit.by_name[terminal.element].origin.card
                if len(card.fields) > terminal.index + 1:
                    return card.place(card.fields[terminal.index + 1])
        amplifier = next((a for a in members if inside[0].element in a.elements), members[0])
        return amplifier.place

    def with_extra_ports(self, stages: list[Stage], wanted: Sequence[str]) -> tuple[list[Stage], tuple[Finding, ...]]:
        """Stages with ports at further nodes, asked for by the caller or by directives. Raises CallError for a node
        that the caller names and that is not there."""
        findings: list[Finding] = []
        asked: list[tuple[str, Place | None]] = [(node.lower(), None) for node in wanted]
        for directive in self.circuit.directives:
            if directive.words and directive.words[0].lower() == "port":
                asked += [(word.lower(), directive.place) for word in directive.words[1:]]
        for node, place in asked:
            fault = f"there is no node `{node}`" if node not in self.at else self._extend(stages, node)
            if fault and place is None:
                raise CallError(fault)
            if fault and place is not None:
                findings.append(Finding("syntax", "error", place, fault, node, advice="name a node of the circuit"))
        return stages, tuple(findings)

    def _extend(self, stages: list[Stage], node: str) -> str:
        """Adds a port at a node to the stage that it belongs to; says why not, '' where it did."""
        touching = {e.name for e, _ in self.at[node]}
        for index, stage in enumerate(stages):
            own = {n for a in stage.amplifiers for n in a.elements} | set(stage.elements)
            if any(port.node == node for port in stage.ports):
                return ""
            if own & touching:
                port = self._port(stage.name, node, "output", "signal", own, stage.amplifiers)
                if port is not None:
                    stages[index] = replace(stage, ports=(*stage.ports, port))
                    return ""
        driving = self._driver_of(node)
        for index, stage in enumerate(stages):
            if driving in {a.output for a in stage.amplifiers}:
                port = self._port(stage.name, node, "output", "signal", touching, stage.amplifiers)
                if port is not None:
                    stages[index] = replace(stage, ports=(*stage.ports, port))
                    return ""
        return f"node `{node}` belongs to no stage and hangs on no amplifier's output"

    def _driver_of(self, node: str) -> str | None:
        """The amplifier's output that a node hangs on through passives, None for none."""
        outputs = {a.output for a in self.amplifiers}
        reached = {node}
        waiting = [node]
        while waiting:
            for element, _ in self.at.get(waiting.pop(), ()):
                if not isinstance(element, Passive):
                    continue
                for other in element.nodes:
                    if other in outputs:
                        return other
                    if other not in reached and other not in self.stiff.reasons:
                        reached.add(other)
                        waiting.append(other)
        return None
