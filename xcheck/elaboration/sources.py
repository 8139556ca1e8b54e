"""V and I cards to elements."""

import cmath
import math
from typing import Literal

from xcheck.circuit.elements import Element, Origin, Source
from xcheck.deck.cards import Card, Field
from xcheck.elaboration.context import Amount, Context, is_value
from xcheck.elaboration.passives import Maker
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.words import opened, words_of

WAVEFORMS = ("pulse", "sin", "exp", "pwl", "sffm", "am", "trnoise", "trrandom", "external", "port")
MARKS = ("dc", "ac", "distof1", "distof2", "portnum", "z0", "pwr", "freq", "phase")


def source(card: Card, problems: Problems) -> Maker | None:
    """An independent source: `V1 a b [DC] 5 AC 1 45 SIN(0 1 1k)`, parts in any order."""
    fields = opened(card.fields[1:2]) + card.fields[2:]
    if len(fields) < 2:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: two nodes are wanted")
        return None
    kind: Literal["v", "i"] = "v" if card.kind == "v" else "i"
    nodes = (fields[0].key, fields[1].key)
    words = words_of(card)
    number = words.pairs.get("m") if kind == "i" else None
    left_out = () if number is None else (number.start, number.end)
    behind = fields[2:] if number is None else tuple(f for f in fields[2:] if f.key != "m" and f.start not in left_out)
    parts = _parts(tuple(f for f in behind if f.text != "="))
    own = Amount(card, number) if number is not None else None
    dc = Amount(card, parts.dc) if parts.dc is not None else None
    ac = [Amount(card, f) for f in parts.ac] if parts.ac is not None else None
    start = [Amount(card, f) for f in parts.start]

    def make(context: Context) -> Element | None:
        many = (context.many or (own.at(context) if own is not None else None) or 1.0) if kind == "i" else 1.0
        level = dc.at(context) if dc is not None else _at_zero(parts.waveform, [a.at(context) or 0.0 for a in start])
        phasor: complex | None = None
        if ac is not None:
            magnitude = ac[0].at(context) if ac else 1.0
            phase = ac[1].at(context) if len(ac) > 1 else 0.0
            if magnitude is not None and phase is not None:
                phasor = cmath.rect(magnitude * many, math.radians(phase))
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        origin = Origin(card, context.path)
        return Source(context.name(card), kind, ends, (level or 0.0) * many, phasor, parts.waveform, origin)

    return make


class _Parts:
    """dc: the field of the DC value; ac: fields after AC, None without AC; waveform: its word; start: the fields
    that its value at time zero depends on."""

    def __init__(self) -> None:
        self.dc: Field | None = None
        self.ac: list[Field] | None = None
        self.waveform = ""
        self.start: list[Field] = []


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
                parts.start = _inside(field)
        elif mark == "waveform":
            if not parts.start and key.startswith("("):
                parts.start = _inside(field)
            elif is_value(field):
                parts.start.append(field)
        elif mark == "ac" and parts.ac is not None and len(parts.ac) < 2:
            parts.ac.append(field)
        elif mark == "dc" and parts.dc is None:
            parts.dc = field
    wanted = {"sin": (0, 1, 5), "pulse": (0,), "exp": (0,), "pwl": (1,), "sffm": (0,)}.get(parts.waveform, ())
    parts.start = [parts.start[index] for index in wanted if index < len(parts.start)]
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


def _at_zero(waveform: str, values: list[float]) -> float:
    """The value at time zero, of which an operating point is made: offset and phase of a sine, the first level of
    what has levels; noise and amplitude modulation begin at zero."""
    if not values:
        return 0.0
    if waveform == "sin" and len(values) == 3:
        return values[0] + values[1] * math.sin(math.radians(values[2]))
    return values[0]
