"""Which of the user's cards ngspice gets to see: those on a list of harmless ones."""

import re
from collections.abc import Sequence
from dataclasses import dataclass

from xcheck.deck.cards import Card, Field
from xcheck.deck.numbers import read_number

ELEMENTS = frozenset("abcdefghijklmopqrstuvwxyz") - frozenset("n")
"""Letters of elements; N loads compiled models."""
DOTS = frozenset(
    ".param .func .subckt .ends .macro .eom .model .global .if .elseif .else .endif .temp .ic .nodeset".split()
)
"""Dot cards that define or set; whatever analyses, prints, measures, loads, includes or commands is left out."""
OPTIONS = frozenset(
    "abstol chgtol reltol vntol gmin gminsteps srcsteps itl1 itl2 itl6 temp tnom pivrel pivtol rshunt cshunt scale "
    "noopiter defl defw defad defas".split()
)
"""Options of the operating point and of models; those of output, files and further programs are left out."""
MODELS = frozenset(
    "r c l res cap ind d npn pnp nmos pmos njf pjf nmf pmf nhfet phfet vdmos vdmosn vdmosp sw csw ltra txl cpl urc "
    "gain summer mult divide limit climit slew s_xfer int d_dt hyst ilimit pwl pwlts cmeter lmeter core lcouple "
    "aswitch zener memristor sine square triangle oneshot adc_bridge dac_bridge d_buffer d_inverter d_and d_nand "
    "d_or d_nor d_xor d_xnor d_tristate d_pullup d_pulldown d_open_c d_open_e d_dff d_jkff d_tff d_srff "
    "d_dlatch d_srlatch d_fdiv spice2poly multi_input_pwl".split()
)
"""Types of models that neither open a file nor start a program, as filesource, d_source, d_state, table2d, table3d,
numerical devices (numd, nbjt, numos) and models of later versions (d_process, d_cosim) do."""
_CONTROL = re.compile("[\x00-\x08\x0a-\x1f\x7f-\x9f\u2028\u2029]")
"""Characters that some reader may take for the end of a line."""


@dataclass(frozen=True, slots=True)
class Harmless:
    """cards: what ngspice gets, in order; refused: the cards that it does not; left_out: these and the options
    that it does not get, in words."""

    cards: tuple[Card, ...]
    refused: tuple[Card, ...]
    left_out: tuple[str, ...]


def harmless(cards: Sequence[Card]) -> Harmless:
    """Sorts the cards of a deck by the lists above."""
    banned = {c.fields[1].key for c in cards if c.kind == ".model" and len(c.fields) > 1 and not _known_model(c)}
    kept: list[Card] = []
    refused: list[Card] = []
    words: list[str] = []
    for card in cards:
        if _fits(card, banned):
            kept.append(card)
            words += _options_left_out(card)
        else:
            refused.append(card)
    words += [f"{card.place()}: `{_short(card.text)}`" for card in refused]
    return Harmless(tuple(kept), tuple(refused), tuple(words))


def _fits(card: Card, banned: set[str]) -> bool:
    if _CONTROL.search(card.text):
        return False
    if card.kind.startswith("."):
        return is_options(card) or (card.kind in DOTS and (card.kind != ".model" or _known_model(card)))
    first = len(card.fields) - 1 if card.kind == "a" else 3
    if card.kind not in ELEMENTS or any(field.key in banned for field in card.fields[first:]):
        return False
    return not (card.kind in "vi" and "file" in card.text.lower())


def _known_model(card: Card) -> bool:
    return len(card.fields) > 2 and card.fields[2].key.split("(")[0] in MODELS


def is_options(card: Card) -> bool:
    """Whether a card sets options."""
    return card.kind in (".options", ".option", ".opt")


def options_text(card: Card) -> str:
    """An options card with the harmless keys alone; '' where none is left."""
    words = [card.text[first.start : last.end] for first, last in _settings(card) if first.key in OPTIONS]
    return f".options {' '.join(words)}" if words else ""


def _options_left_out(card: Card) -> list[str]:
    if not is_options(card):
        return []
    return [f"{card.place(first)}: option `{first.text}`" for first, _ in _settings(card) if first.key not in OPTIONS]


def _settings(card: Card) -> list[tuple[Field, Field]]:
    """The first and last field of each option: `gmin = 1e-12` or `noopiter`."""
    fields = card.fields[1:]
    found: list[tuple[Field, Field]] = []
    index = 0
    while index < len(fields):
        wide = index + 2 < len(fields) and fields[index + 1].text == "="
        found.append((fields[index], fields[index + 2 * wide]))
        index += 1 + 2 * wide
    return found


def ac_parts(card: Card) -> list[tuple[int, int]]:
    """The ranges of offsets of a source's AC part: `ac`, its magnitude and phase in all spellings."""
    if card.kind not in "vi":
        return []
    fields = card.fields
    ranges: list[tuple[int, int]] = []
    for index, field in enumerate(fields[3:], 3):
        if field.key in ("ac", "acmag", "acphase", "acreal", "acimag"):
            last = index
            if last + 1 < len(fields) and fields[last + 1].text == "=":
                last += 1
            most = last + (2 if field.key == "ac" else 1)
            while last < most and last + 1 < len(fields) and _is_value(fields[last + 1]):
                last += 1
            ranges.append((field.start, fields[last].end))
    return ranges


def _is_value(field: Field) -> bool:
    return field.text[0] in "{'\"(" or read_number(field.text) is not None


def _short(text: str) -> str:
    return text if len(text) <= 60 else text[:57] + "..."
