"""Ports: where a stage meets the rest, and which terminals on the node are the stage's own."""

from collections.abc import Iterator, Sequence

from xcheck.circuit.elements import GROUND, Element, Passive, Source
from xcheck.place import Place
from xcheck.stages.nodes import is_signal
from xcheck.stages.shares import Share
from xcheck.stages.types import Amplifier, Kind, Port, Side, Stage, Terminal
from xcheck.stages.wiring import Wiring, conducts, terminals_of


def ports_of(name: str, members: tuple[Amplifier, ...], share: Share, others: Sequence[str], wiring: Wiring) -> Stage:
    """A stage with its ports, inputs first. others: elements beside amplifiers that carry its loops."""
    carried = {n: wiring.circuit.by_name[n] for n in others}
    inside = {**share.elements, **carried}
    order = wiring.order
    names = tuple(sorted(inside, key=lambda n: order[n]))
    terminals = own_terminals([inside[n] for n in names], members, wiring)
    pointer = Pointer(members, wiring)
    sides = _Sides(members, share, set(inside), wiring)
    ports: dict[str, Port] = {}
    for node, kind, left_out in sides.inputs([inside[n] for n in names]):
        mine = tuple(t for t in terminals.get(node, ()) if t.element != left_out)
        if mine and node not in ports:
            ports[node] = make_port(name, node, "input", kind, mine, pointer)
    for node in dict.fromkeys(a.output for a in members):
        mine = tuple(terminals.get(node, ()))
        if mine and node != GROUND and node not in ports:
            ports[node] = make_port(name, node, "output", "signal", mine, pointer)
    return Stage(name, members, names, tuple(ports.values()))


def own_terminals(
    elements: Sequence[Element], members: Sequence[Amplifier], wiring: Wiring
) -> dict[str, list[Terminal]]:
    """The terminals of a stage by node: of its own elements, and of its amplifiers' at their signal pins."""
    found: dict[str, list[Terminal]] = {}
    for element in elements:
        for node, terminal in terminals_of(element):
            found.setdefault(node, []).append(terminal)
    for amplifier in members:
        for node, terminals in wiring.of_amplifier[amplifier.name].items():
            found.setdefault(node, []).extend(terminals)
    return found


class Pointer:
    """Finds the place that a port of some amplifiers' stage points at."""

    def __init__(self, members: Sequence[Amplifier], wiring: Wiring) -> None:
        self.wiring = wiring
        self.by_output: dict[str, Amplifier] = {}
        for amplifier in members:
            self.by_output.setdefault(amplifier.output, amplifier)
        self.by_name = {a.name: a for a in members}
        self.first = members[0]

    def place(self, node: str, side: Side, inside: Sequence[Terminal]) -> Place:
        """An output's: its amplifier's card; else the node's field in the card of the stage's element there, or in
        that of its amplifier."""
        if side == "output" and node in self.by_output:
            return self.by_output[node].place
        for terminal in inside:
            if terminal.element not in self.wiring.owner and terminal.index >= 0:
                card = self.wiring.circuit.by_name[terminal.element].origin.card
                if len(card.fields) > terminal.index + 1:
                    return card.place(card.fields[terminal.index + 1])
        owners = (self.wiring.owner.get(t.element, "") for t in inside)
        amplifier = next((self.by_name[name] for name in owners if name in self.by_name), self.first)
        instance = self.wiring.instances.get(amplifier.name)
        if instance is not None:
            on = [k for k, (_, flat) in enumerate(instance.pins) if flat == node]
            card = instance.origin.card
            if on and len(card.fields) > on[0] + 1:
                return card.place(card.fields[on[0] + 1])
        return amplifier.place


def make_port(stage: str, node: str, side: Side, kind: Kind, inside: tuple[Terminal, ...], pointer: Pointer) -> Port:
    """A port with the terminals that are the stage's own."""
    wiring = pointer.wiring
    inside = _whole_devices(node, inside, wiring)
    mine = sum(conducts(wiring.circuit.by_name[t.element], t.index) for t in inside)
    current = side == "input" and wiring.conducting[node] == mine
    return Port(stage, node, node, side, kind, inside, current, pointer.place(node, side, inside))


def _whole_devices(node: str, inside: tuple[Terminal, ...], wiring: Wiring) -> tuple[Terminal, ...]:
    """The terminals with all that stands for a device on the node where part of it is there: a device's terminal cannot
    be divided."""
    devices = {wiring.circuit.by_name[t.element].origin.device for t in inside} - {""}
    if not devices:
        return inside
    rest = (Terminal(e.name, k) for e, k in wiring.on(node) if e.origin.device in devices)
    return tuple(dict.fromkeys((*inside, *rest)))


class _Sides:
    """Which nodes are inputs of a stage."""

    def __init__(self, members: Sequence[Amplifier], share: Share, own: set[str], wiring: Wiring) -> None:
        self.members = members
        self.share = share
        self.own = own
        self.wiring = wiring
        self.names = {a.name for a in members} | own
        self.outputs = {a.output for a in members}
        self.amplifier_inputs = dict.fromkeys(n for a in members for n in (a.non_inverting, a.inverting))
        self.inverting = {a.inverting for a in members}

    def inputs(self, elements: Sequence[Element]) -> Iterator[tuple[str, Kind, str]]:
        """Input nodes with their kind and the name of an element that counts as outside there, '' for none."""
        nodes = [*(n for e in elements for n in e.nodes), *self.amplifier_inputs]
        kinds: dict[str, Kind] = {}
        for node in dict.fromkeys(nodes):
            kind = None if self._is_own_output(node) else self._kind(node)
            if kind is not None:
                kinds[node] = kind
        if "signal" not in kinds.values() and not self.wiring.signals:
            kinds.update(dict.fromkeys(self._open_inputs(), "signal"))
        for node, kind in kinds.items():
            if kind == "reference" and self._is_clamped_to(node, elements):
                continue
            yield node, kind, ""
            behind = self._behind_series(node) if kind == "signal" else None
            if behind is not None and behind[1] not in kinds:
                yield behind[1], kind, behind[0].name

    def _is_clamped_to(self, node: str, elements: Sequence[Element]) -> bool:
        """Whether a node is a supply that only diodes and transistors of the stage are on: no input, if ever so little
        flows there."""
        if node not in self.wiring.supplies:
            return False
        own = [e for e in elements if node in e.nodes]
        return bool(own) and all(e.origin.device for e in own)

    def _is_own_output(self, node: str) -> bool:
        held = self.wiring.held
        return node == GROUND or node in self.outputs or held.driver.get(node) in self.names

    def _kind(self, node: str) -> Kind | None:
        """The kind of input that a node is, None where it is none."""
        if node in self.share.attached:
            return self.share.attached[node]
        held = self.wiring.held
        why = held.reasons.get(node)
        if why is not None:
            if why in ("rail", "reference"):
                return "reference"
            return "reference" if node in held.still and node not in held.signal else "signal"
        if node in self.wiring.circuit.boundary:
            return "signal"
        return self._kind_by_currents(node)

    def _kind_by_currents(self, node: str) -> Kind | None:
        """What current sources, or nothing at all, drive."""
        wiring = self.wiring
        touching = wiring.on(node)
        currents = [e for e, k in touching if k >= 0 and e.name not in wiring.owner and not conducts(e, k)]
        foreign = [e for e in currents if e.name not in self.own]
        if any(not isinstance(e, Source) or is_signal(e) for e in foreign):
            return "signal"
        if foreign:
            return "reference" if wiring.signals else "signal"
        alone = len(touching) == 1 and node not in wiring.virtual
        return "signal" if alone or all(e.name in wiring.owner for e, _ in touching) else None

    def _open_inputs(self) -> list[str]:
        """In a deck without signals, of a stage that nothing drives: the non-inverting inputs with a resistor or so to
        ground, which are where the signal will come in."""
        found = [a.non_inverting for a in self.members if a.non_inverting in self.share.resting]
        return [n for n in dict.fromkeys(found) if n not in self.wiring.held.reasons]

    def _behind_series(self, node: str) -> tuple[Element, str] | None:
        """The one element that hangs on a signal source's node, with the node behind it, which is then a
        port too: not where the node behind is a virtual ground (the element is the stage's own R1 there), and not
        where two sources reach it through an element each, since then neither is the source's own."""
        wiring = self.wiring
        if node not in wiring.held.signal or node not in wiring.held.still:
            return None
        element = _only_element(node, wiring)
        if element is None or element.name not in self.own:
            return None
        other = element.nodes[0] if element.nodes[1] == node else element.nodes[1]
        if other in wiring.held.reasons or other in wiring.virtual or other in self.inverting:
            return None
        for beside, index in wiring.on(other):
            if index < 0 or beside is element or beside.name in wiring.owner:
                continue
            far = [n for n in beside.nodes if n != other]
            if any(n in wiring.held.signal and _only_element(n, wiring) is beside for n in far):
                return None
        return element, other


def _only_element(node: str, wiring: Wiring) -> Passive | None:
    """The one passive on a source's node when nothing but sources of voltage is there beside it."""
    found: Element | None = None
    for element, _ in wiring.on(node):
        if isinstance(element, Source) and element.kind == "v":
            continue
        if found is not None:
            return None
        found = element
    if isinstance(found, Passive) and found.name not in wiring.owner and found.nodes[0] != found.nodes[1]:
        return found
    return None
