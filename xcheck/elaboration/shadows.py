"""Names that are defined twice in one scope with different contents, and which of the two ngspice takes."""

import re
from typing import TYPE_CHECKING

from xcheck.deck.cards import Card, Field
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.words import words_of

if TYPE_CHECKING:
    from xcheck.elaboration.definitions import Body, Definition

_Written = tuple[str, ...]


class Shadows:
    """Collects definitions in order of text. ngspice 39 takes the first subcircuit or model of a name and the last
    parameter or function; a definition repeated word for word, as by a file included twice, changes nothing."""

    def __init__(self, problems: Problems) -> None:
        self.problems = problems
        self.known: dict[tuple[int, str, str], tuple[Card, _Written]] = {}
        self.subckts: dict[tuple[int, str], Definition] = {}
        self.twice: list[tuple[Definition, Definition]] = []

    def subckt(self, definition: "Definition", body: "Body") -> None:
        """A subcircuit's head; its body is compared once all is read."""
        first = self.subckts.setdefault((id(body), definition.name), definition)
        if first is not definition:
            self.twice.append((first, definition))

    def card(self, card: Card, body: "Body") -> None:
        """A card that may define something."""
        if card.kind == ".model" and len(card.fields) > 1:
            self._seen("model", card.fields[1].key, card, card.fields[1], _text(card), body)
        elif card.kind == ".func" and len(card.fields) > 1:
            name = card.fields[1].key.split("(")[0]
            self._seen("function", name, card, card.fields[1], _text(card), body)
        elif card.kind == ".param":
            for name, value in words_of(card).pairs.items():
                kind = "function" if "(" in name else "parameter"
                text = (name, value.key)
                self._seen(kind, name.split("(")[0], card, value, text, body)

    def _seen(self, kind: str, name: str, card: Card, field: Field, text: _Written, body: "Body") -> None:
        key = (id(body), kind, name)
        earlier = self.known.get(key)
        first_counts = kind == "model"
        if earlier is None or not first_counts:
            self.known[key] = card, text
        if earlier is not None and earlier[1] != text:
            self._say(kind, name, card, field, earlier[0], first_counts=first_counts)

    def _say(self, kind: str, name: str, card: Card, field: Field, earlier: Card, *, first_counts: bool) -> None:
        counts = "the first one counts, this one is ignored" if first_counts else "this one counts, from the start"
        self.problems.say(
            "shadowed-definition", "warning", card, field,
            f"{kind} `{name}` is defined twice, first at {earlier.place()}; {counts}",
            "delete one of the two, or rename it", name,
        )  # fmt: skip

    def tell(self) -> None:
        """The findings on subcircuits."""
        for first, second in self.twice:
            if _contents(first) != _contents(second):
                card = second.card
                self._say("subcircuit", second.name, card, card.fields[1], first.card, first_counts=True)


def _text(card: Card) -> _Written:
    """What a card says, whatever its blanks, commas and parentheses."""
    return tuple(re.sub(r"[\s(),]+", " ", re.sub(r"\s*=\s*", "=", card.text.lower())).split())


def _contents(definition: "Definition") -> list[_Written]:
    found = [_text(definition.card)]
    waiting = [definition.body]
    while waiting:
        body = waiting.pop(0)
        found += [(name, *_text(inner.card)) for name, inner in body.subckts.items()]
        waiting += [inner.body for inner in body.subckts.values()]
        for item in body.items:
            if isinstance(item, Card):
                found.append(_text(item))
            else:
                waiting += [branch for _, branch in item.branches]
    return found
