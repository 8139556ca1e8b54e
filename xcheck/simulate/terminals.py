"""Where node names stand in the text of an element's card."""

import re
from dataclasses import dataclass

from xcheck.deck.cards import Card, Field
from xcheck.elaboration.devices import node_words

_EXPRESSIONS = frozenset("value vol cur table laplace freq chebyshev".split())
_POLY = re.compile(r"poly(?:\((\d+)\))?$")
_PROBE = re.compile(r"\bv\s*\(([^()]*)\)", re.IGNORECASE)
_WORD = re.compile(r"[^\s,()]+")


@dataclass(frozen=True, slots=True)
class Spot:
    """A node's name in a card's text: lower case, and its half-open range of offsets."""

    word: str
    start: int
    end: int


def node_spots(card: Card) -> tuple[Spot, ...]:
    """The words of an element's card in order, its nodes first, parenthesised groups opened."""
    if card.kind == "a":
        return tuple(Spot(*word) for word in node_words(card))
    return tuple(spot for field in card.fields[1:] for spot in _opened(field))


def sensed_spots(card: Card) -> tuple[Spot, ...]:
    """The node names by which an element senses voltages: control pairs, POLY inputs, `V(...)` in expressions."""
    words = node_spots(card)
    if card.kind == "s":
        return words[2:4]
    if card.kind in "eg" and len(words) > 4:
        poly = _POLY.match(words[2].word)
        if poly is not None:
            first = 3 if poly.group(1) else 4
            count = poly.group(1) or words[3].word
            return words[first : first + 2 * int(count)] if count.isdigit() else ()
        if words[2].word[0] not in "{'\"" and re.split(r"[({]", words[2].word)[0] not in _EXPRESSIONS:
            return words[2:4]
    if len(card.fields) < 4:
        return ()
    start = card.fields[3].start
    probes = _PROBE.finditer(card.text, start)
    return tuple(spot for probe in probes for spot in _words(probe.group(1), probe.start(1)))


def _opened(field: Field) -> list[Spot]:
    if field.text.startswith("(") and field.text.endswith(")"):
        return _words(field.text, field.start)
    return [Spot(field.key, field.start, field.end)]


def _words(text: str, offset: int) -> list[Spot]:
    return [Spot(w.group().lower(), offset + w.start(), offset + w.end()) for w in _WORD.finditer(text)]
