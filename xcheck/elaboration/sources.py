"""V and I cards to elements."""

import cmath
import math
from typing import Literal

from xcheck.circuit.elements import Element, Origin, Source
from xcheck.deck.cards import Card, Field
from xcheck.elaboration.context import Amount, Context, is_value
from xcheck.elaboration.passives import Maker
from xcheck.elaboration.problems import Problems

WAVEFORMS = ("pulse", "sin", "exp", "pwl", "sffm", "am", "trnoise", "trrandom", "external", "port")
MARKS = ("dc", "ac", "distof1", "distof2")


def source(card: Card, problems: Problems) -> Maker | None:
    """An independent source: `V1 a b [DC] 5 AC 1 45 SIN(0 1 1k)`, parts in any order."""
    fields = card.fields[1:]
    if len(fields) < 2:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: two nodes are wanted")
        return None
    kind: Literal["v", "i"] = "v" if card.kind == "v" else "i"
    nodes = (fields[0].key, fields[1].key)
    parts = _parts(tuple(f for f in fields[2:] if f.text != "="))
    dc = Amount(card, parts.dc) if parts.dc is not None else None
    ac = [Amount(card, f) for f in parts.ac] if parts.ac is not None else None
    first = Amount(card, parts.first) if parts.first is not None else None

    def make(context: Context) -> Element | None:
        given = dc if dc is not None else first
        level = given.at(context) if given is not None else 0.0
        phasor: complex | None = None
        if ac is not None:
            magnitude = ac[0].at(context) if ac else 1.0
            phase = ac[1].at(context) if len(ac) > 1 else 0.0
            if magnitude is not None and phase is not None:
                phasor = cmath.rect(magnitude, math.radians(phase))
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        origin = Origin(card, context.path)
        return Source(context.name(card), kind, ends, level or 0.0, phasor, parts.waveform, origin)

    return make


class _Parts:
    """dc: the field of the DC value; ac: fields after AC, None without AC; waveform: its word; first: the
    field of the waveform's value at time zero."""

    def __init__(self) -> None:
        self.dc: Field | None = None
        self.ac: list[Field] | None = None
        self.waveform = ""
        self.first: Field | None = None


def _parts(fields: tuple[Field, ...]) -> _Parts:
    parts = _Parts()
    mark = "dc"
    for field in fields:
        key = field.key
        word = key.split("(", 1)[0]
        if key in MARKS:
            mark = key
            if key == "ac":
                parts.ac = []
        elif word in WAVEFORMS:
            mark = "waveform"
            parts.waveform = word
            if "(" in key:
                parts.first = _first_value(word, _inside(field))
        elif mark == "waveform":
            if parts.first is None and key.startswith("("):
                parts.first = _first_value(parts.waveform, _inside(field))
            elif parts.first is None and is_value(field):
                parts.first = field
        elif mark == "ac" and parts.ac is not None and len(parts.ac) < 2:
            parts.ac.append(field)
        elif mark == "dc" and parts.dc is None:
            parts.dc = field
    return parts


def _inside(field: Field) -> list[Field]:
    """The words between a field's parentheses, with their own offsets."""
    opening = field.text.index("(")
    found: list[Field] = []
    start = -1
    for position in range(opening + 1, len(field.text)):
        character = field.text[position]
        if character in " \t,)":
            if start >= 0:
                offset = field.start + start
                found.append(Field(field.text[start:position], offset, field.start + position))
            start = -1
        elif start < 0:
            start = position
    return found


def _first_value(waveform: str, values: list[Field]) -> Field | None:
    """The value at time zero: the offset of a sine, the initial value of a pulse, the first level of a PWL."""
    position = 1 if waveform == "pwl" else 0
    return values[position] if len(values) > position else None
