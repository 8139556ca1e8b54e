"""The flat circuit: elements with evaluated values, each knowing the card that it came from."""

from dataclasses import dataclass, field
from functools import cached_property
from typing import Literal

from xcheck.circuit.trees import Node
from xcheck.deck.cards import Card, Comment, Deck, Directive
from xcheck.finding import Finding

GROUND = "0"


@dataclass(frozen=True, slots=True)
class Origin:
    """Where an element comes from: its card and the path of instances around it, outermost first
    (('x1', 'x1.xu2') for `x1.xu2.r3`). device: the flat name of the device that the element is a part of, where it
    stands for one at its operating point."""

    card: Card
    path: tuple[str, ...] = ()
    device: str = ""


@dataclass(frozen=True, slots=True)
class Passive:
    """R (ohm), C (farad) or L (henry) between two nodes."""

    name: str
    kind: Literal["r", "c", "l"]
    nodes: tuple[str, str]
    value: float
    origin: Origin


@dataclass(frozen=True, slots=True)
class Coupling:
    """Mutual inductance: two inductors by flat name and the coupling factor."""

    name: str
    inductors: tuple[str, str]
    factor: float
    origin: Origin
    nodes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Source:
    """Independent source: dc in V or A, ac complex magnitude or None where no AC part is written,
    transient: the written waveform's word ('sin', 'pulse', ...) or ''. Current flows from nodes[0] through
    the source to nodes[1]."""

    name: str
    kind: Literal["v", "i"]
    nodes: tuple[str, str]
    dc: float
    ac: complex | None
    transient: str
    origin: Origin


@dataclass(frozen=True, slots=True)
class Term:
    """One linear term of a controlled source: gain times V(positive, negative), or times the current
    through the voltage source `source` where that is given (flat name)."""

    gain: float
    positive: str = GROUND
    negative: str = GROUND
    source: str = ""


@dataclass(frozen=True, slots=True)
class Controlled:
    """Linear controlled source: E and H give a voltage, G and F a current from nodes[0] through the source
    to nodes[1]; the sum of the terms and of `offset` (V or A). A linear B source is kept as kind 'e' or 'g'.
    """

    name: str
    kind: Literal["e", "f", "g", "h"]
    nodes: tuple[str, str]
    terms: tuple[Term, ...]
    offset: float
    origin: Origin

    @property
    def sensing(self) -> tuple[str, ...]:
        """The nodes that it senses without drawing current, ground left out, each once."""
        seen = [n for t in self.terms if not t.source for n in (t.positive, t.negative) if n != GROUND]
        return tuple(dict.fromkeys(seen))


@dataclass(frozen=True, slots=True)
class Behaviour:
    """What a behavioural element computes: a voltage 'v', a current 'i' from nodes[0] through it to nodes[1], or its
    own value in ohm or farad ('r', 'c'). tree: with parameters and functions put in; `v` and `i` in it speak of flat
    nodes and flat names of sources."""

    gives: Literal["v", "i", "r", "c"]
    tree: Node


@dataclass(frozen=True, slots=True)
class DeviceModel:
    """A `.model` card as seen from a device: name, type ('npn', 'd', ...), and the parameters that are numbers.
    text: all that is written behind the type, with a number in place of each expression."""

    name: str
    type: str
    values: tuple[tuple[str, float], ...]
    card: Card
    text: str = ""

    def get(self, name: str, otherwise: float = 0.0) -> float:
        """The value of a parameter."""
        return next((value for key, value in self.values if key == name), otherwise)


@dataclass(frozen=True, slots=True)
class Device:
    """Anything the linear equations do not hold: D Q M J S W T A, and sources with nonlinear or frequency
    dependent expressions. reason: a few words on why ('diode', 'expression', 'transmission line').

    behaviour: of a source, where its expression is known; definition: the model of a device that has one;
    parameters: the instance's own, as numbers ('area', 'w', ...); control: flat name of the source whose current
    a W switch reads; connections: of an XSPICE device, the words between name and model, each with what it is:
    'node' and 'source' (flat names) or 'mark'."""

    name: str
    kind: str
    nodes: tuple[str, ...]
    sensing: tuple[str, ...]
    model: str
    reason: str
    origin: Origin
    behaviour: Behaviour | None = None
    definition: DeviceModel | None = None
    parameters: tuple[tuple[str, float], ...] = ()
    control: str = ""
    connections: tuple[tuple[str, str], ...] = ()


Element = Passive | Coupling | Source | Controlled | Device


@dataclass(frozen=True, slots=True)
class Instance:
    """An expanded subcircuit instance: flat name, subcircuit name, (pin, flat node) pairs in pin order, the
    instance card with its own path (origin), the `.subckt` card, and the comment lines directly above and
    below that card.

    local: its elements with the pins as nodes and names relative to it; one and the same object for all
    instances of a subcircuit whose parameters have the same values, so that it is worth looking at once.
    """

    name: str
    subckt: str
    pins: tuple[tuple[str, str], ...]
    origin: Origin
    definition: Card
    comments: tuple[Comment, ...] = ()
    local: "tuple[Element, ...]" = field(default=(), repr=False, compare=False)


@dataclass(frozen=True, slots=True)
class Analysis:
    """An analysis card: kind without the dot ('ac', 'tran', ...), arguments as evaluated text or number."""

    kind: str
    arguments: tuple[str | float, ...]
    card: Card


@dataclass(frozen=True)
class Circuit:
    """The flat circuit of a deck. Names and nodes are lower case, hierarchical with dots; ground is '0'.

    boundary: nodes that are ports from outside: the pins of the reviewed subcircuit (`--subckt`), else ().
    """

    deck: Deck
    elements: tuple[Element, ...]
    instances: tuple[Instance, ...] = ()
    analyses: tuple[Analysis, ...] = ()
    directives: tuple[Directive, ...] = ()
    boundary: tuple[str, ...] = ()
    findings: tuple[Finding, ...] = ()
    temperature: float = 27.0

    @cached_property
    def nodes(self) -> tuple[str, ...]:
        """All nodes in the order of first mention, ground first where it is used."""
        seen: dict[str, None] = {}
        for element in self.elements:
            for node in element.nodes:
                seen.setdefault(node)
            if isinstance(element, (Controlled, Device)):
                for node in element.sensing:
                    seen.setdefault(node)
        ordered = [n for n in seen if n != GROUND]
        return ((GROUND,) if GROUND in seen else ()) + tuple(ordered)

    @cached_property
    def by_name(self) -> dict[str, Element]:
        """Elements by flat name; where a name stands twice, the first."""
        table: dict[str, Element] = {}
        for element in self.elements:
            table.setdefault(element.name, element)
        return table

    @cached_property
    def at(self) -> dict[str, tuple[Element, ...]]:
        """Elements by the nodes that their terminals stand on, sensing left out, each once a node."""
        table: dict[str, dict[int, Element]] = {}
        for element in self.elements:
            for node in element.nodes:
                table.setdefault(node, {})[id(element)] = element
        return {node: tuple(found.values()) for node, found in table.items()}

    @cached_property
    def coupled(self) -> frozenset[str]:
        """Flat names of the inductors that are magnetically coupled."""
        return frozenset(name for e in self.elements if isinstance(e, Coupling) for name in e.inductors)
