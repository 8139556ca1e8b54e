"""Op-amps written straight into a deck or a block: controlled sources with R, C and buffers between.

Sources hang together where one drives a private network: passives to quiet nodes that nothing but the next source
senses, by one node. What so hangs together is one op-amp if it has one output and one or two inputs. Its output is the
last source's own node, or the node behind a series resistor where nothing else hangs on the source's node and the
feedback is taken there: then the resistor is its output resistance. A resistor or capacitor, or one of each in series,
straight across the two nodes that it senses is its input impedance.
"""

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace

from xcheck.circuit.elements import GROUND, Controlled, Device, Element, Passive, Source, Term
from xcheck.stages.joined import Joined

PLUS, MINUS, OUTPUT = "in+", "in-", "out"
"""The nodes of a chain as seen from inside."""

LARGEST_SERIES_OHM = 200.0
"""A resistor behind a source up to this is taken for its output resistance whatever hangs behind it."""

MUCH_SMALLER = 0.2
"""Above LARGEST_SERIES_OHM it must be this much smaller than the resistors behind it: else it is one of a network."""


@dataclass(frozen=True, slots=True)
class Chain:
    """An op-amp in bare elements.

    first: the source that it is named after; plus, minus, output: flat nodes, GROUND for an input that is ground;
    members: its elements; inner: the same with PLUS, MINUS and OUTPUT as nodes and what is quiet as ground, so that
    inputs and output are apart even where the deck ties them.
    """

    first: Controlled
    plus: str
    minus: str
    output: str
    members: tuple[Element, ...]
    inner: tuple[Element, ...]


@dataclass
class Surroundings:
    """All that hangs on nodes outside the amplifiers already found. quiet: nodes that neither move nor carry a
    signal; busy: nodes that something other than passives and bare sources touches."""

    sources: list[Controlled]
    quiet: Collection[str]
    still: Collection[str]
    busy: set[str]
    ends: dict[str, list[Element]] = field(default_factory=dict)
    senses: dict[str, list[Controlled]] = field(default_factory=dict)
    networks: Joined = field(default_factory=Joined)

    @classmethod
    def of(
        cls, elements: Iterable[Element], claimed: Collection[str], still: Collection[str], quiet: Collection[str],
        ports: Iterable[str],
    ) -> "Surroundings":  # fmt: skip
        """still: nodes that do not move at AC; quiet: those of them that carry no signal either."""
        made = cls([], quiet, still, set(ports))
        for element in elements:
            sensing = element.sensing if isinstance(element, (Controlled, Device)) else ()
            if element.name in claimed:
                made.busy.update(element.nodes, sensing)
                continue
            for node in element.nodes:
                made.ends.setdefault(node, []).append(element)
            moving = [n for n in element.nodes if n not in still]
            readable = isinstance(element, Controlled) and all(not t.source for t in element.terms)
            if isinstance(element, Controlled) and readable and element.kind in "eg" and not element.origin.device:
                made.sources.append(element)
                for node in element.sensing:
                    made.senses.setdefault(node, []).append(element)
            elif isinstance(element, Passive):
                made.networks.join(moving)
                if len(moving) == 1 and any(n in still and n not in quiet for n in element.nodes):
                    made.busy.update(moving)
            elif not (isinstance(element, Source) and element.kind == "v" and not moving):
                made.busy.update(element.nodes, sensing)
            if element.origin.device:  # what stands for a device belongs to no op-amp of controlled sources
                made.busy.update(element.nodes, sensing)
        return made


@dataclass
class _Network:
    nodes: list[str] = field(default_factory=list)
    elements: dict[str, Element] = field(default_factory=dict)
    drivers: dict[str, Controlled] = field(default_factory=dict)
    sensors: dict[str, Controlled] = field(default_factory=dict)
    busy: bool = False

    @property
    def private(self) -> bool:
        if self.busy or not self.drivers or self.drivers.keys() & self.sensors.keys():
            return False
        return bool(self.sensors) or (len(self.drivers) > 1 and not self.elements)


def _networks(around: Surroundings) -> dict[str, _Network]:
    """The networks of moving nodes by the name of their set."""
    found: dict[str, _Network] = {}
    touched = dict.fromkeys([*around.ends, *around.senses])
    for node in touched:
        if node in around.still:
            continue
        network = found.setdefault(around.networks.find(node), _Network())
        network.nodes.append(node)
        network.busy |= node in around.busy
        for element in around.ends.get(node, ()):
            (network.drivers if isinstance(element, Controlled) else network.elements)[element.name] = element  # type: ignore[assignment]
        for sensor in around.senses.get(node, ()):
            network.sensors[sensor.name] = sensor
            # what senses two nodes is an input pair, not a buffer
            network.busy |= sum(n not in around.quiet for n in sensor.sensing) > 1
    return found


def chains(around: Surroundings) -> list[Chain]:
    """All chains of controlled sources that have the inputs and the output of an op-amp, whatever their gain."""
    networks = _networks(around)
    private = {name for name, network in networks.items() if network.private}
    hanging = Joined()
    for name in private:
        network = networks[name]
        hanging.join([*network.drivers, *network.sensors])
    groups: dict[str, list[Controlled]] = {}
    for source in around.sources:
        groups.setdefault(hanging.find(source.name), []).append(source)
    inside: dict[str, list[str]] = {}
    for name in private:
        inside.setdefault(hanging.find(next(iter(networks[name].drivers))), []).append(name)
    found = []
    for key, sources in groups.items():
        within = [networks[name] for name in inside.get(key, ())]
        chain = _chain(sources, within, around)
        if chain is not None:
            found.append(chain)
    return found


def chain_of(around: Surroundings, source: str, plus: str, minus: str, output: str) -> Chain | None:
    """The chain that a source stands in, with the pins that somebody told; None where the source is in none."""
    networks = _networks(around)
    hanging = Joined()
    private = [network for network in networks.values() if network.private]
    for network in private:
        hanging.join([*network.drivers, *network.sensors])
    members = [s for s in around.sources if hanging.find(s.name) == hanging.find(source)]
    if not members:
        return None
    first = next(s for s in members if s.name == source)
    passives = {n: e for k in private if k.drivers.keys() & {s.name for s in members} for n, e in k.elements.items()}
    own = {n for s in members for n in s.nodes if n not in around.still}
    for node in own - {output}:
        passives.update({e.name: e for e in _between(around, node, output) if isinstance(e, Passive)})
    return _made(first, plus, minus, output, [*members, *passives.values()], members, around)


def _between(around: Surroundings, a: str, b: str) -> list[Element]:
    return [e for e in around.ends.get(a, ()) if set(e.nodes) == {a, b}]


def _chain(sources: Sequence[Controlled], within: Sequence[_Network], around: Surroundings) -> Chain | None:
    inner_nodes = {n for network in within for n in network.nodes}
    entries = [s for s in sources if any(n not in inner_nodes and n not in around.quiet for n in s.sensing)]
    outputs = {n for s in sources for n in s.nodes if n not in inner_nodes and n not in around.still}
    if not entries or len(outputs) != 1:
        return None
    (node,) = outputs
    inputs = _inputs(entries)
    if inputs is None:
        return None
    plus, minus = inputs
    passives = {name: element for network in within for name, element in network.elements.items()}
    last = next(s for s in sources if node in s.nodes)
    output = node
    if last.kind == "g":
        shunts = _own_shunts(node, around)
        if not shunts or not _is_fed_back(node, inputs, around):
            # a transconductance with a load resistor has much gain too; feedback is what makes an op-amp of it
            return None
        passives.update({e.name: e for e in shunts})
    else:
        series = _series(node, last, (plus, minus), around)
        if series is not None:
            passives[series.name] = series
            output = _far(series, node)
    return _made(entries[0], plus, minus, output, [*sources, *passives.values()], entries, around)


def _inputs(entries: Sequence[Controlled]) -> tuple[str, str] | None:
    """The one or two nodes that the first sources sense with weight, as (one, other): which is the non-inverting one
    is decided by the gain. GROUND stands for a second input that is ground."""
    weights: dict[str, float] = {}
    for source in entries:
        for term in source.terms:
            for node, sign in ((term.positive, 1.0), (term.negative, -1.0)):
                weights[node] = weights.get(node, 0.0) + sign * term.gain
    weights.pop(GROUND, None)
    most = max((abs(w) for w in weights.values()), default=0.0)
    heavy = [node for node, weight in weights.items() if abs(weight) > 0.1 * most]
    if len(heavy) == 1:
        return heavy[0], GROUND
    if len(heavy) == 2 and weights[heavy[0]] * weights[heavy[1]] < 0:
        return heavy[0], heavy[1]
    return None


def _is_fed_back(node: str, inputs: tuple[str, str], around: Surroundings) -> bool:
    """Whether passives lead from a node to an input, not through a node that a source holds."""
    return any(around.networks.find(n) == around.networks.find(node) for n in inputs if n not in around.still)


def _own_shunts(node: str, around: Surroundings) -> list[Passive]:
    """What turns a current source's output into a voltage: the largest resistor from there to ground, with the one
    capacitor beside it where there is just one."""
    down = [e for e in around.ends[node] if isinstance(e, Passive) and any(n in around.quiet for n in e.nodes)]
    resistors = [e for e in down if e.kind == "r"]
    if not resistors:
        return []
    capacitors = [e for e in down if e.kind == "c"]
    own = capacitors if len(capacitors) == 1 and len(resistors) == 1 else []
    return [max(resistors, key=lambda e: abs(e.value)), *own]


def _far(element: Element, node: str) -> str:
    return element.nodes[0] if element.nodes[1] == node else element.nodes[1]


def _series(node: str, last: Controlled, inputs: tuple[str, str], around: Surroundings) -> Passive | None:
    """The output resistance: the one resistor on the last source's node, with the feedback taken behind it."""
    others = [e for e in around.ends[node] if e is not last]
    if len(others) != 1 or node in around.senses or node in around.busy:
        return None
    series = others[0]
    if not isinstance(series, Passive) or series.kind != "r":
        return None
    behind = _far(series, node)
    if behind in around.still or not _is_fed_back(node, inputs, around):
        return None
    rest = [e for e in around.ends[behind] if e is not series]
    if not rest and behind not in around.busy and behind not in inputs:
        return None
    ohm = abs(series.value)
    beside = [abs(e.value) for e in rest if isinstance(e, Passive) and e.kind == "r"]
    much_smaller = ohm <= MUCH_SMALLER * min(beside, default=float("inf"))
    if behind in inputs:  # a feedback resistor straight to the input looks the same
        return series if much_smaller and (_is_named_output(series) or ohm <= LARGEST_SERIES_OHM) else None
    return series if much_smaller or ohm <= LARGEST_SERIES_OHM or _is_named_output(series) else None


def _is_named_output(element: Passive) -> bool:
    return element.name.rpartition(".")[2].startswith("ro")


def _made(
    first: Controlled, plus: str, minus: str, output: str, members: Sequence[Element],
    entries: Sequence[Controlled], around: Surroundings,
) -> Chain:  # fmt: skip
    names = {plus: PLUS, minus: MINUS}
    at_inputs = {e.name for e in entries}
    across = _across(plus, minus, {m.name for m in members}, around)
    inner = [*(_renamed(e, output, names if e.name in at_inputs else {}, around.quiet) for e in members)]
    inner += [_renamed(e, output, names, (), ends_too=True) for e in across]
    return Chain(first, plus, minus, output, (*members, *across), tuple(inner))


def _across(plus: str, minus: str, taken: Collection[str], around: Surroundings) -> list[Passive]:
    """R and C straight across the inputs, or one of each in series with nothing else between. Where one input is
    ground and a current source drives the other, they are the sensor's, unless their names say otherwise."""
    pair = {plus, minus}
    start = plus if minus in around.still else minus
    found: list[Passive] = []
    for element in around.ends.get(start, ()):
        if not isinstance(element, Passive) or element.kind == "l" or element.name in taken:
            continue
        far = _far(element, start)
        if {start, far} == pair:
            found.append(element)
        elif far not in around.still and far not in around.busy and far not in around.senses:
            rest = [e for e in around.ends[far] if e is not element]
            if len(rest) == 1 and isinstance(rest[0], Passive) and {start, _far(rest[0], far)} == pair:
                pieces = {element.kind, rest[0].kind}
                if pieces == {"r", "c"} and rest[0].name not in taken:
                    found += [element, rest[0]]
    if pair & set(around.still) and any(_is_current(e) for e in around.ends.get(start, ()) if e.name not in taken):
        found = [e for e in found if e.name.rpartition(".")[2].startswith(("rid", "rin", "cid", "cin"))]
    return found


def _is_current(element: Element) -> bool:
    return isinstance(element, (Source, Controlled)) and element.kind in "ifg"


def _renamed(
    element: Element, output: str, inputs: Mapping[str, str], quiet: Collection[str], *, ends_too: bool = False
) -> Element:
    """An element as seen from inside the chain. inputs: names that what it senses (or, ends_too, its ends) get."""
    table = {**dict.fromkeys(quiet, GROUND), output: OUTPUT}
    ends = inputs if ends_too else table
    nodes = tuple(ends.get(n, n) for n in element.nodes)
    if not isinstance(element, Controlled):
        return replace(element, nodes=nodes)  # type: ignore[arg-type]  # as many nodes as before
    table.update(inputs)
    terms = tuple(
        Term(t.gain, table.get(t.positive, t.positive), table.get(t.negative, t.negative)) for t in element.terms
    )
    return replace(element, nodes=nodes, terms=terms)  # type: ignore[arg-type]  # as many nodes as before
