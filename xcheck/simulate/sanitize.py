"""Which of the user's cards ngspice gets to see: those on a list of harmless ones, test signals silenced."""

from collections.abc import Sequence
from dataclasses import dataclass

from xcheck.deck.cards import Card, Field
from xcheck.deck.numbers import read_number

ELEMENTS = frozenset("abcdefghijklmopqrstuvwxyz") - frozenset("n")
DOTS = frozenset(
    ".param .func .subckt .ends .macro .eom .model .global .if .elseif .else .endif .temp .ic .nodeset".split()
)
"""Dot cards that define or set; everything that analyses, prints, measures, loads or commands is left out."""
OPTIONS = frozenset(
    "abstol reltol vntol gmin gminsteps srcsteps itl1 itl2 itl6 temp tnom pivrel pivtol rshunt scale noopiter "
    "defl defw defad defas".split()
)
"""Options of the operating point and of models; those of output and files are left out."""
MODELS = frozenset(
    "r c l res cap ind d npn pnp nmos pmos njf pjf nmf pmf nhfet phfet vdmos vdmosn vdmosp sw csw ltra txl cpl urc "
    "gain summer mult divide limit climit slew s_xfer int d_dt hyst ilimit pwlts cmeter lmeter core lcouple "
    "aswitch zener memristor sine square triangle oneshot adc_bridge dac_bridge d_buffer d_inverter d_and d_nand "
    "d_or d_nor d_xor d_xnor d_tristate d_pullup d_pulldown d_open_c d_open_e d_dff d_jkff d_tff d_srff "
    "d_dlatch d_srlatch d_fdiv spice2poly multi_input_pwl".split()
)
"""Model types that open no file. (filesource, d_source, d_state, d_ram, table2d and the like do.)"""


@dataclass(frozen=True, slots=True)
class Harmless:
    """cards: what ngspice gets, in order; left_out: what it does not, in words."""

    cards: tuple[Card, ...]
    left_out: tuple[str, ...]


def harmless(cards: Sequence[Card]) -> Harmless:
    """Sorts cards by the lists above."""
    banned = {c.fields[1].key for c in cards if c.kind == ".model" and not _model_is_harmless(c)}
    kept: list[Card] = []
    dropped: list[str] = []
    for card in cards:
        if card.kind in DOTS:
            fits = card.kind != ".model" or _model_is_harmless(card)
        elif card.kind in (".options", ".option", ".opt"):
            fits = True
        else:
            named_banned = card.kind == "a" and card.fields[-1].key in banned
            fits = card.kind in ELEMENTS and not named_banned and not _names_a_file(card)
        if fits:
            kept.append(card)
        else:
            dropped.append(f"{card.place()}: `{card.text[:60]}`")
    return Harmless(tuple(kept), tuple(dropped))


def _model_is_harmless(card: Card) -> bool:
    if len(card.fields) < 3:
        return False
    kind = card.fields[2].key.split("(")[0]
    return kind in MODELS and "file" not in card.text.lower().replace("profile", "")


def _names_a_file(card: Card) -> bool:
    """Whether a source reads its values from a file."""
    return card.kind in "vi" and "file" in card.text.lower()


def options_text(card: Card) -> str:
    """An options card with the harmless keys alone; '' where none is left."""
    words: list[str] = []
    fields = card.fields[1:]
    for index, field in enumerate(fields):
        if field.key not in OPTIONS:
            continue
        if index + 2 < len(fields) and fields[index + 1].text == "=":
            words.append(f"{field.text}={fields[index + 2].text}")
        else:
            words.append(field.text)
    return f".options {' '.join(words)}" if words else ""


def ac_part(card: Card) -> tuple[int, int] | None:
    """The offsets of a source's AC part (the word and its magnitude and phase); None without one."""
    if card.kind not in "vi":
        return None
    fields = card.fields
    for index, field in enumerate(fields[3:], 3):
        if field.key == "ac":
            last = index
            while last + 1 < len(fields) and last - index < 2 and _is_value(fields[last + 1]):
                last += 1
            return field.start, fields[last].end
    return None


def _is_value(field: Field) -> bool:
    return field.text[0] in "{'\"" or read_number(field.text) is not None
