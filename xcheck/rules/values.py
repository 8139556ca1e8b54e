"""Values that ngspice reads otherwise than they look: the figures themselves, whatever the circuit."""

import math
import re
from collections.abc import Iterator

from xcheck.circuit.elements import Passive
from xcheck.deck.cards import Card
from xcheck.deck.numbers import SCALES
from xcheck.finding import Finding
from xcheck.notation import shortest
from xcheck.reviewed import Evidence
from xcheck.rules.spots import Spot, comma_pairs, spots

UNITS = {"r": "Ohm", "c": "F", "l": "H", "v": "V", "i": "A"}

LOST = re.compile(r"(?P<letter>[rRvV])?(?P<figures>\d{1,3})(?P<unit>[A-Za-z]*)")
"""What follows the scale factor in `4k7`, `2R2`, `3V3`, `1u5F`: a letter that stands for the decimal point
where no scale factor does, and the figures after it."""

FIGURES_APART = re.compile(r"\d[A-Za-z]+\d")
"""Tells quickly that a card cannot hold such a value."""

USUAL = frozenset("ohm ohms f farad h henry v volt volts a amp amps hz s sec w db deg c \u03c9".split())
"""What may follow a number without a word, in lower case; the last one is the ohm sign."""

MU = "\u03bc"
"""The Greek letter; the micro sign, which looks like it, is a scale factor to ngspice 39."""

FIGURES_AFTER_KEY = 2
"""After `key =` more figures than this are rather a part's name (`1n4148`) than a value."""


def digit_after_suffix(evidence: Evidence) -> Iterator[Finding]:
    """`4k7`, `2R2`, `1u5`: a letter as decimal point (IEC 60062 marks parts so). ngspice drops all that
    follows the scale factor. Where nothing is lost (`5V0`, `1k0`) nothing is said, nor of `10u50V` and
    `10k1%`."""
    for card in evidence.deck.cards:
        for spot in spots(card) if FIGURES_APART.search(card.text) else ():
            lost = _lost(spot)
            if lost is not None:
                yield _digits_lost(spot, *lost)


def _lost(spot: Spot) -> tuple[str, float] | None:
    """The word as it should be written and its value, where figures after the scale factor are lost."""
    number = spot.number
    match = LOST.fullmatch(number.rest)
    if match is None or bool(match["letter"]) == bool(number.scale) or number.scale.lower() == "mil":
        return None
    figures = match["figures"]
    if match["unit"].lower().startswith("v") and not spot.card.kind.startswith("v"):
        return None
    if spot.key and not spot.own and len(figures) > FIGURES_AFTER_KEY:
        return None
    if not number.digits.lstrip("+-").isdigit():
        return f"{number.digits}{figures}{number.scale}", float("nan")
    # IEC 60062: M is mega on a resistor, and nobody marks a part in femtofarad
    scale = "Meg" if number.scale == "M" and spot.card.kind not in ("c", "l") else number.scale
    written = f"{number.digits}.{figures}"
    meant = float(written) * SCALES.get(scale.lower(), 1.0)
    return None if meant == number.value else (written + scale, meant)


def _digits_lost(spot: Spot, written: str, meant: float) -> Finding:
    unit = UNITS.get(spot.card.kind, "") if spot.own or spot.card.kind in ("v", "i") else ""
    read = f"ngspice reads {shortest(spot.number.value, unit)}"
    if spot.key and not spot.own and spot.card.kind in ("x", ".param", ".subckt"):
        read = "ngspice takes it for no number and refuses the deck"
    expected = f"; by IEC 60062 it is {shortest(meant, unit)}" if math.isfinite(meant) else ""
    return Finding(
        "digit-after-suffix",
        "error",
        spot.place,
        f"`{spot.word}`: figures after the scale factor are lost, {read}{expected}",
        subject=_name(spot.card),
        advice=f"write {written}",
    )


def comma_in_number(evidence: Evidence) -> Iterator[Finding]:
    """`1,5k`: a comma separates words, so there are two numbers. `AC 1,90`, lists in parentheses and the
    arguments of analyses are separated by commas rightly."""
    values = {e.origin.card.segments[0]: e.value for e in evidence.circuit.elements if isinstance(e, Passive)}
    for card in evidence.deck.cards:
        for first, second in comma_pairs(card) if "," in card.text else ():
            word = card.text[first.start : second.end]
            read = f"ngspice sees two numbers, `{first.text}` and `{second.text}`"
            if card.kind in ("r", "c", "l") and card.segments[0] in values:
                read += f", and takes {shortest(values[card.segments[0]], UNITS[card.kind])}"
            point = f"{first.text}.{second.text}"
            whole = f"{first.text}{second.text}"
            thousands = re.fullmatch(r"\d{3}(?!\d).*", second.text)
            yield Finding(
                "comma-in-number",
                "error",
                card.place_of(first.start, second.end),
                f"`{word}`: a comma ends a number, so {read}",
                subject=_name(card),
                advice=f"write {point}, or {whole} if thousands are meant" if thousands else f"write {point}",
            )


def trailing_text(evidence: Evidence) -> Iterator[Finding]:
    """`10k1%`, `100n50V`, `5Vdc`: text after a number is ignored. Nothing is said of usual units, of `10R`, nor
    where another rule speaks of the word. A Greek mu, of all letters, loses a factor of a million."""
    for card in evidence.deck.cards:
        for spot in spots(card):
            rest = spot.number.rest
            if not rest or _is_usual(spot, rest) or _in_expression(spot) or _lost(spot) is not None:
                continue
            unit = UNITS.get(card.kind, "") if spot.own or card.kind in ("v", "i") else ""
            read = f"so it is {shortest(spot.number.value, unit)}"
            if rest[0].lower() == MU and not spot.number.scale:
                yield Finding(
                    "trailing-text", "error", spot.place,
                    f"`{spot.word}` holds the Greek letter mu, which ngspice does not take for micro, {read}",
                    subject=_name(card), advice=f"write {spot.number.digits}u",
                )  # fmt: skip
            elif not (spot.key and not spot.own and not rest.isalpha()):  # there it may be an operator
                yield Finding(
                    "trailing-text", "note", spot.place, f"`{spot.word}`: `{rest}` is ignored, {read}",
                    subject=_name(card), advice="delete it, or put it behind a `;`",
                )  # fmt: skip


def _in_expression(spot: Spot) -> bool:
    """Whether a number is part of an expression in braces or quotes."""
    before = spot.card.text[: spot.start]
    return before.count("{") > before.count("}") or before.count("'") % 2 == 1


def _is_usual(spot: Spot, rest: str) -> bool:
    """Whether what follows a number says nothing else than the number does."""
    low, scale = rest.lower(), spot.number.scale.lower()
    if low in USUAL or (low == "r" and spot.card.kind == "r" and not scale):
        return True
    if scale == "f" and spot.card.kind == "c":  # `1farad`: told by femto-for-farad where it matters
        return True
    figures = LOST.fullmatch(rest)
    return figures is not None and not figures["figures"].strip("0")  # `5V0`, `1k0`


def _name(card: Card) -> str:
    return "" if card.kind.startswith(".") else card.name
