"""Cuts in the user's own text: where a port's terminals part, a zero-volt source and a test current.

A terminal of the flat circuit is followed outwards, from its element's card through the instance cards around it,
to the scope that owns the node. There the fields on the node are told apart: those that carry only terminals of
the stage's side and those that carry only others. Where one instance carries both, its subcircuit's text is
looked into instead. The fields of one side then get a new node. A cut in a subcircuit's text stands in all
its instances; zero volts change nothing there, and the test signal is given to one instance's source alone.
"""

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Instance
from xcheck.deck.cards import Card
from xcheck.stages.types import Port


class NoCut(Exception):
    """Why no cut can be written for a port."""


@dataclass(frozen=True, slots=True)
class Step:
    """A field of a card in one scope through which a terminal is reached. field: its index, -1 for all that the
    element senses at `word`; word: the node's name in that scope; path: instance names around, outermost first."""

    path: tuple[str, ...]
    card: Card
    field: int
    word: str

    @property
    def key(self) -> tuple[int, int, tuple[str, ...]]:
        return id(self.card), self.field, self.path


@dataclass(frozen=True)
class Cut:
    """A cut written into a scope. name: unique; definition: the `.subckt` card of the scope, None at the top;
    path: the instance whose copy of the cut belongs to this port; word: the node's name there; moved: the side
    whose fields get the new node; inner: whether that is the stage's side."""

    name: str
    definition: Card | None
    path: tuple[str, ...]
    word: str
    moved: tuple[Step, ...]
    inner: bool

    @property
    def node(self) -> str:
        """The new node's name in its scope."""
        return f"xc_{self.name}"

    def flat(self, kind: str) -> str:
        """ngspice's name for the voltage ('v') or current ('i') source of this port's copy of the cut."""
        own = f"{kind}xc_{self.name}"
        return own if not self.path else f"{kind}.{self.path[-1]}.{own}"

    def stage_node(self, port: Port) -> str:
        """ngspice's flat name of the node on the stage's side."""
        if not self.inner:
            return port.node
        return self.node if not self.path else f"{self.path[-1]}.{self.node}"


@dataclass
class CutWriter:
    """Places cuts and edits card texts."""

    circuit: Circuit
    edits: dict[int, list[tuple[int, int, str]]] = field(default_factory=dict)
    added: dict[int, list[str]] = field(default_factory=dict)
    known: dict[tuple[object, ...], Cut] = field(default_factory=dict)
    taken: dict[tuple[int, int, str], str] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.instances: dict[str, Instance] = {i.name: i for i in self.circuit.instances}
        self.at: dict[str, list[tuple[Element, int]]] = {}
        for element in self.circuit.elements:
            for index, node in enumerate(element.nodes):
                self.at.setdefault(node, []).append((element, index))
            if isinstance(element, (Controlled, Device)):
                for node in dict.fromkeys(element.sensing):
                    self.at.setdefault(node, []).append((element, -1))
        self.everywhere = {f.key for card in self.circuit.deck.cards if card.kind == ".global" for f in card.fields[1:]}

    def cut(self, port: Port) -> Cut:
        """Writes a port's cut. Raises NoCut."""
        wanted = {(t.element, t.index) for t in port.inside}
        inside: list[tuple[Step, ...]] = []
        outside: list[tuple[Step, ...]] = []
        for element, index in self.at.get(port.node, ()):
            side = inside if (element.name, index) in wanted else outside
            side += [self._chain(step) for step in self._first_steps(element, index, port.node)]
        if not inside:
            raise NoCut(f"nothing of the stage was found at node `{port.node}`")
        moved, inner = _side_to_move(inside, outside)
        return self._write(moved, inner)

    def _first_steps(self, element: Element, index: int, node: str) -> list[Step]:
        """The step at an element's own card: its node field, or each name by which it senses the node."""
        card, path = element.origin.card, element.origin.path
        if index < 0:
            words = [w for w in _words_sensed(card) if self._flat(w, path) == node]
            if words:
                return [Step(path, card, -1, word) for word in dict.fromkeys(words)]
        elif len(card.fields) > index + 1 and self._flat(card.fields[index + 1].key, path) == node:
            return [Step(path, card, index + 1, card.fields[index + 1].key)]
        raise NoCut(f"the node field of `{card.fields[0].text}` could not be told in its card")

    def _chain(self, step: Step) -> tuple[Step, ...]:
        """The steps from the scope that owns the node down to a terminal, outermost first."""
        steps = [step]
        while step.path:
            instance = self.instances[step.path[-1]]
            pins = [pin for pin, _ in instance.pins]
            if step.word not in pins:
                break
            position = pins.index(step.word) + 1
            card = instance.origin.card
            step = Step(instance.origin.path, card, position, card.fields[position].key)
            steps.append(step)
        return tuple(reversed(steps))

    def _flat(self, word: str, path: tuple[str, ...]) -> str:
        """The flat name of a node that the text inside an instance calls `word`."""
        if word in ("0", "gnd"):
            return GROUND
        if not path:
            return word
        outer = dict(self.instances[path[-1]].pins).get(word)
        if outer is not None:
            return outer
        return word if word in self.everywhere else f"{path[-1]}.{word}"

    def _write(self, moved: Sequence[Step], inner: bool) -> Cut:
        path, word = moved[0].path, moved[0].word
        if any(s.path != path or s.word != word for s in moved):
            raise NoCut("the terminals of one side are spread over several subcircuits")
        if word in _spellings(GROUND):
            raise NoCut("the node is ground")
        definition = self.instances[path[-1]].definition if path else None
        place = (id(definition), word, frozenset((id(s.card), s.field) for s in moved), inner)
        earlier = self.known.get(place)
        if earlier is not None:
            return Cut(earlier.name, definition, path, word, tuple(moved), inner)
        for step in moved:
            if (id(step.card), step.field, step.word) in self.taken:
                raise NoCut("another port's cut stands in the same text in another way")
        cut = Cut(str(len(self.known) + 1), definition, path, word, tuple(moved), inner)
        self.known[place] = cut
        for step in moved:
            self.taken[id(step.card), step.field, step.word] = cut.name
            self.edits.setdefault(id(step.card), []).extend(_renamings(step, cut.node))
        new, old = cut.node, word
        stage, rest = (new, old) if inner else (old, new)
        lines = [f"vxc_{cut.name} {rest} {stage} dc 0 ac 0", f"ixc_{cut.name} 0 {stage} dc 0 ac 0"]
        self.added.setdefault(id(definition), []).extend(lines)
        return cut

    def text_of(self, card: Card) -> str:
        """A card's text with its edits."""
        text = card.text
        for start, end, new in sorted(set(self.edits.get(id(card), ())), reverse=True):
            text = text[:start] + new + text[end:]
        return text


def _side_to_move(inside: Sequence[tuple[Step, ...]], outside: Sequence[tuple[Step, ...]]) -> tuple[list[Step], bool]:
    """The fields to move to a new node, and whether they are the stage's side."""
    level = 0
    descended: bool | None = None
    while True:
        here = {c[level].key for c in inside}
        there = {c[level].key for c in outside if len(c) > level}
        mixed = here & there
        if not mixed:
            inner = descended is not False
            chosen = inside if inner else outside
            return list({c[level].key: c[level] for c in chosen}.values()), inner
        if len(mixed) > 1:
            raise NoCut("the stage and the rest meet at this node in several subcircuits at once")
        key = next(iter(mixed))
        if here == {key} and descended is not False:
            outside = [c for c in outside if c[level].key == key]
            descended = True
        elif there == {key} and descended is not True:
            inside = [c for c in inside if c[level].key == key]
            descended = False
        else:
            raise NoCut("the stage's terminals at this node are spread over several subcircuits")
        level += 1
        if any(len(c) <= level for c in (*inside, *outside)):
            raise NoCut("one element's field carries both sides of this node")


def _words_sensed(card: Card) -> list[str]:
    """All words of a card that can name a node it senses, lower case."""
    words: list[str] = []
    for target in card.fields[3:]:
        if target.text[0] in "({'\"" or "(" in target.text:
            words += [w.lower() for w in re.findall(r"[^\s,(){}'\"]+", target.text)]
        else:
            words.append(target.key)
    return words


def _spellings(word: str) -> tuple[str, ...]:
    return ("0", "gnd") if word in ("0", "gnd") else (word,)


def _renamings(step: Step, new: str) -> Iterable[tuple[int, int, str]]:
    """Edits of a card's text that put a new node into a field, or everywhere where the element senses it."""
    card = step.card
    if step.field >= 0:
        target = card.fields[step.field]
        yield target.start, target.end, new
        return
    for target in card.fields[3:]:
        if target.key == step.word:
            yield target.start, target.end, new
        elif target.text.startswith("("):
            yield from _inside(target.text, target.start, step.word, new)
        elif target.text[0] in "{'\"" or "(" in target.text:
            for probe in re.finditer(r"\bv\s*\(([^()]*)\)", target.text, re.IGNORECASE):
                yield from _inside(probe.group(1), target.start + probe.start(1), step.word, new)


def _inside(text: str, offset: int, word: str, new: str) -> Iterable[tuple[int, int, str]]:
    """Whole words among nodes separated by blanks, commas and parentheses."""
    for found in re.finditer(r"[^\s,()]+", text):
        if found.group().lower() == word:
            yield offset + found.start(), offset + found.end(), new
