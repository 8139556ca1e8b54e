"""Cuts in the user's own text: where a port's terminals part, a zero-volt source and a test current.

A terminal of the flat circuit is followed outwards, from its element's card through the instance cards around it,
to the scope that owns the node. There the fields on the node are told apart: those that carry only terminals of the
stage, those that carry only others, and those of instances that carry both. The stage's fields get a new node, which
the sources join to the old one. Where one instance carries all of the stage's terminals and others besides, the cut
is written into its subcircuit's text instead; where they are spread over several scopes, the new node is global.

The old node stays the hub at which the cuts of all its ports meet. A cut in a subcircuit's text stands in all its
instances; zero volts change nothing there, and the test signal is given to one instance's source alone.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Instance
from xcheck.deck.cards import Card
from xcheck.simulate.terminals import Spot, node_spots, sensed_spots
from xcheck.stages.types import Port

InstancePath = tuple[str, ...]
Edit = tuple[int, int, int]
"""The identity of a card, and a range of offsets in its text."""


StepKey = tuple[int, int, InstancePath]
"""The identity of a card, the offset of the first place in its text, and the instances around it."""


class NoCut(Exception):
    """Why no cut can be written for a port."""


class Taken(Exception):
    """A port's cut would move what another port's cut has moved in the same text."""


@dataclass(frozen=True, slots=True)
class Step:
    """A node's name in one scope through which a terminal is reached. path: instance names around, outermost
    first; spots: where it stands in the card, all with one word."""

    path: InstancePath
    card: Card
    spots: tuple[Spot, ...]

    @property
    def word(self) -> str:
        return self.spots[0].word

    @property
    def key(self) -> StepKey:
        return id(self.card), self.spots[0].start, self.path


@dataclass(frozen=True, slots=True)
class Cut:
    """A port's cut: flat names of the node on the stage's side and of the zero-volt source. The test current source
    is named alike."""

    node: str
    source: str


@dataclass
class Need:
    """What the text of one instance (or of the top) must hold. edits: new text by place; lines: added cards by cut;
    alone: no other instance may have this text."""

    edits: dict[Edit, str] = field(default_factory=dict)
    lines: dict[str, tuple[str, ...]] = field(default_factory=dict)
    alone: bool = False

    def clashes(self, edits: dict[Edit, str]) -> bool:
        """Whether some edits put another text where these have put one."""
        return any(self.edits.get(place, new) != new for place, new in edits.items())

    def added(self) -> list[str]:
        """The added cards."""
        return [line for lines in self.lines.values() for line in lines]


class Terminals:
    """The terminals of a circuit in the user's text."""

    def __init__(self, circuit: Circuit) -> None:
        self.instances: dict[str, Instance] = {i.name: i for i in circuit.instances}
        self.at: dict[str, list[tuple[Element, int]]] = {}
        for element in circuit.elements:
            for index, node in enumerate(element.nodes):
                self.at.setdefault(node, []).append((element, index))
            if isinstance(element, (Controlled, Device)):
                for node in dict.fromkeys(element.sensing):
                    self.at.setdefault(node, []).append((element, -1))
        cards = circuit.deck.cards
        self.everywhere = {f.key for card in cards if card.kind == ".global" for f in card.fields[1:]}

    def sides(self, port: Port) -> tuple[list[tuple[Step, ...]], list[tuple[Step, ...]]]:
        """The ways from the owning scope to each terminal, outermost step first: of the stage, and of the rest."""
        wanted = {(t.element, t.index) for t in port.inside}
        inside: list[tuple[Step, ...]] = []
        outside: list[tuple[Step, ...]] = []
        for element, index in self.at.get(port.node, ()):
            side = inside if (element.name, index) in wanted else outside
            side += [self._way(step) for step in self._first_steps(element, index, port.node)]
        return inside, outside

    def _first_steps(self, element: Element, index: int, node: str) -> list[Step]:
        """The step at an element's own card: its node, or each name by which it senses the node."""
        card, path = element.origin.card, element.origin.path
        spots = sensed_spots(card) if index < 0 else node_spots(card)[index : index + 1]
        by_word: dict[str, list[Spot]] = {}
        for spot in spots:
            if self.flat(spot.word, path) == node:
                by_word.setdefault(spot.word, []).append(spot)
        if not by_word:
            raise NoCut(f"node `{node}` was not found in the card of `{card.fields[0].text}`")
        return [Step(path, card, tuple(found)) for found in by_word.values()]

    def _way(self, step: Step) -> tuple[Step, ...]:
        steps = [step]
        while step.path:
            instance = self.instances[step.path[-1]]
            position = next((k for k, (pin, _) in enumerate(instance.pins) if pin == step.word), None)
            if position is None:
                break
            card, path = instance.origin.card, instance.origin.path
            spots = node_spots(card)[position : position + 1]
            if not spots or self.flat(spots[0].word, path) != instance.pins[position][1]:
                raise NoCut(f"a node was not found in the card of `{card.fields[0].text}`")
            step = Step(path, card, spots)
            steps.append(step)
        return tuple(reversed(steps))

    def flat(self, word: str, path: InstancePath) -> str:
        """The flat name of a node that the text inside an instance calls `word`."""
        if word in ("0", "gnd"):
            return GROUND
        if not path:
            return word
        outer = dict(self.instances[path[-1]].pins).get(word)
        if outer is not None:
            return outer
        return word if word in self.everywhere else f"{path[-1]}.{word}"


class CutWriter:
    """Collects the cuts that one load of the deck holds. root: what ngspice puts before the names of all that the
    circuit has at its top; mark: begins all names that are added, and nothing in the deck contains it."""

    def __init__(self, terminals: Terminals, mark: str, root: str = "") -> None:
        self.terminals = terminals
        self.mark = mark
        self.root = root
        self.needs: dict[InstancePath, Need] = {}
        self.globals: list[str] = []
        self._known: dict[tuple[object, ...], str] = {}
        self._count = 0

    def cut(self, port: Port) -> Cut:
        """Writes a port's cut. Raises NoCut, Taken."""
        if port.node == GROUND:
            raise NoCut("the port is ground")
        inside, outside = self.terminals.sides(port)
        if not inside:
            raise NoCut(f"nothing of the stage was found at node `{port.node}`")
        moved, shared = told_apart(inside, outside)
        places = {(step.path, step.word) for step in moved}
        if not shared and len(places) == 1:
            return self._local(moved, *next(iter(places)))
        hubs = {(way[0].path, way[0].word) for way in (*inside, *outside)}
        return self._spread(moved, *(next(iter(hubs)) if len(hubs) == 1 else ((), port.node)))

    def _local(self, moved: Sequence[Step], path: InstancePath, word: str) -> Cut:
        """A cut within one scope, under one name in all instances of that text."""
        scope = id(self.terminals.instances[path[-1]].definition) if path else 0
        key = (scope, word, frozenset((id(step.card), spot.start) for step in moved for spot in step.spots))
        name = self._known.get(key) or self._next()
        need = self.needs.get(path, Need())
        edits = _edits(moved, name)
        if need.clashes(edits):
            raise Taken
        self._known[key] = name
        need.edits |= edits
        need.lines[name] = _sources(name, word)
        self.needs[path] = need
        return Cut(self._flat(path, name), self._flat(path, f"v{name}"))

    def _spread(self, moved: Sequence[Step], path: InstancePath, word: str) -> Cut:
        """A cut whose new node is global, because the stage's terminals are in several scopes."""
        name = self._next()
        by_path: dict[InstancePath, dict[Edit, str]] = {path: {}}
        for step in moved:
            by_path.setdefault(step.path, {}).update(_edits([step], name))
        if any(self.needs.get(place, Need()).clashes(edits) for place, edits in by_path.items()):
            raise Taken
        for place, edits in by_path.items():
            need = self.needs.setdefault(place, Need())
            need.edits |= edits
            need.alone = True
        self.needs[path].lines[name] = _sources(name, word)
        self.globals.append(name)
        return Cut(name, self._flat(path, f"v{name}"))

    def _flat(self, path: InstancePath, name: str) -> str:
        return ".".join(part for part in (self.root, *path[-1:], name) if part)

    def _next(self) -> str:
        self._count += 1
        return f"{self.mark}{self._count}"


def told_apart(inside: Sequence[tuple[Step, ...]], outside: Sequence[tuple[Step, ...]]) -> tuple[list[Step], bool]:
    """The steps that carry only terminals of the stage, as far out as may be; and whether the instances that carry
    both had to be entered side by side, so that no one scope holds them all. Raises NoCut."""
    level = 0
    while True:
        pure, mixed = _at_level(inside, outside, level)
        if not mixed:
            return pure, False
        if pure or len(mixed) > 1:
            return _entered(inside, outside, level), True
        # one instance holds all of the stage's terminals, and others too: the cut goes into its text
        outside = [way for way in outside if len(way) > level and way[level].key in mixed]
        level += 1


def _at_level(
    inside: Iterable[tuple[Step, ...]], outside: Iterable[tuple[Step, ...]], level: int
) -> tuple[list[Step], set[StepKey]]:
    """The stage's steps at a level that carry nothing else, and the keys of those that carry both."""
    others = {way[level].key for way in outside if len(way) > level}
    here: dict[StepKey, Step] = {}
    for way in inside:
        if len(way) <= level:
            raise NoCut(f"one field of `{way[-1].card.fields[0].text}` carries both sides of this node")
        here[way[level].key] = way[level]
    return [step for key, step in here.items() if key not in others], others & set(here)


def _entered(inside: Sequence[tuple[Step, ...]], outside: Sequence[tuple[Step, ...]], level: int) -> list[Step]:
    """The stage's own steps below a level, each as far out as may be."""
    pure, mixed = _at_level(inside, outside, level)
    for key in mixed:
        below = [way for way in inside if way[level].key == key]
        beside = [way for way in outside if len(way) > level and way[level].key == key]
        pure += _entered(below, beside, level + 1)
    return pure


def _edits(steps: Iterable[Step], new: str) -> dict[Edit, str]:
    return {(id(step.card), spot.start, spot.end): new for step in steps for spot in step.spots}


def _sources(name: str, hub: str) -> tuple[str, ...]:
    """The cut: current through the voltage source counts from the hub into the stage."""
    return f"v{name} {hub} {name} dc 0 ac 0", f"i{name} 0 {name} dc 0 ac 0"
