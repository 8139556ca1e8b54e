"""Pins of nonlinear models in the orders and with the comments that are met in the field (common practice), with
ngspice and without it."""

import pytest

from tests.stages.macromodels import BODIES, definition
from xcheck.deck.reader import read_text
from xcheck.finding import Finding
from xcheck.options import Options
from xcheck.reviewing import analyse
from xcheck.simulate import find_engine
from xcheck.simulate.types import EngineInfo
from xcheck.stages.types import Amplifier

ROLES = ("p", "n", "vp", "vn", "o")
NODES = {"p": "0", "n": "sum", "vp": "vcc", "vn": "vee", "o": "out"}
AROUND = "vcc vcc 0 12\nvee vee 0 -12\nvin in 0 ac 1\nr1 in sum 10k\nr2 sum out 47k\nrl out 0 10k\n"
NUMBERS = dict(zip(ROLES, "12345", strict=True))

BARS = """* connections:   non-inverting input
*                | inverting input
*                | | positive power supply
*                | | | negative power supply
*                | | | | output
*                | | | | |"""
BARS_BACK = """* connections:           output
*          negative supply |
*        positive supply | |
*      inverting input | | |
* non-inverting input | | | |
*                   | | | | |"""
BARS_OUTPUT_FIRST = """* output
* | inverting input
* | | non-inverting input
* | | | vcc
* | | | | vee
* | | | | |"""
STYLES: dict[str, tuple[str, str, dict[str, str]]] = {
    # what: comment, pins of the card in order, what each role is called
    "nothing but numbers in order": ("", "1 2 3 4 5", NUMBERS),
    "bars": (BARS, "1 2 3 4 5", NUMBERS),
    "bars read from the right": (BARS_BACK, "1 2 3 4 5", NUMBERS),
    "bars, output first": (BARS_OUTPUT_FIRST, "1 2 3 4 5", {"o": "1", "n": "2", "p": "3", "vp": "4", "vn": "5"}),
    "package numbers": ("", "3 2 7 4 6", {"p": "3", "n": "2", "vp": "7", "vn": "4", "o": "6"}),
    "package numbers, rising": ("", "2 3 4 6 7", {"p": "3", "n": "2", "vp": "7", "vn": "4", "o": "6"}),
    "eight pins of the package": (
        "* offset null, in-, in+, v-, offset null, out, v+, nc", "1 2 3 4 5 6 7 8",
        {"p": "3", "n": "2", "vp": "7", "vn": "4", "o": "6"},
    ),
    "signs on one line": ("* + - V+ V- O", "a b c d e", dict(zip(ROLES, "abcde", strict=True))),
    "output third": ("", "inp inn out vdd vss", {"p": "inp", "n": "inn", "o": "out", "vp": "vdd", "vn": "vss"}),
    "inverting first": ("", "in- in+ v+ v- out", {"p": "in+", "n": "in-", "o": "out", "vp": "v+", "vn": "v-"}),
    "supplies first": ("", "vcc vee in+ in- out", {"p": "in+", "n": "in-", "o": "out", "vp": "vcc", "vn": "vee"}),
    "negative supply first": ("", "non inv vee vcc o", {"p": "non", "n": "inv", "o": "o", "vp": "vcc", "vn": "vee"}),
    "output first": ("", "vo ip im vp vn", {"p": "ip", "n": "im", "o": "vo", "vp": "vp", "vn": "vn"}),
    "numbered list": (
        "* 1: output\n* 2: negative supply\n* 3: non-inverting input\n* 4: inverting input\n* 5: positive supply",
        "1 2 3 4 5", {"o": "1", "vn": "2", "p": "3", "n": "4", "vp": "5"},
    ),
    "one role a line": (
        "* pinout:\n* inverting input\n* non-inverting input\n* output\n* positive supply\n* negative supply",
        "20 21 22 23 24", {"n": "20", "p": "21", "o": "22", "vp": "23", "vn": "24"},
    ),
    "numbered list of places": (
        "* pin order\n* 1. inverting input\n* 2. non-inverting input\n* 3. output\n* 4. v+\n* 5. v-",
        "a b c d e", {"n": "a", "p": "b", "o": "c", "vp": "d", "vn": "e"},
    ),
    "signs in names": ("", "15+ 15- 95 50 28", {"p": "15+", "n": "15-", "vp": "95", "vn": "50", "o": "28"}),
    "in capitals": ("", "INP INM VDD VSS OUT", {"p": "inp", "n": "inm", "vp": "vdd", "vn": "vss", "o": "out"}),
}  # fmt: skip


def deck(kind: str, style: str, below: bool = False) -> str:
    comment, order, pins = STYLES[style]
    card = f".subckt part {order}"
    header = f"{card}\n{comment}" if below else f"{comment}\n{card}"
    by_pin = {pin: NODES[role] for role, pin in pins.items()}
    nodes = [by_pin.get(pin, f"open{k}") for k, pin in enumerate(order.lower().split())]
    return f"styles\n{definition(kind, header.strip(), pins)}{AROUND}xu1 {' '.join(nodes)} part\n.end\n"


def found(text: str, engine: EngineInfo) -> tuple[Amplifier, list[Finding]]:
    evidence, findings = analyse(read_text(text), Options(), engine)
    assert [s.name for s in evidence.partition.stages] == ["xu1"], [f.message for f in findings]
    assert evidence.recognised["xu1"].topology == "inverting"
    return evidence.partition.amplifiers[0], [f for f in findings if f.level != "note"]


def pins_of(amplifier: Amplifier) -> dict[str, str | None]:
    return {
        "p": amplifier.non_inverting, "n": amplifier.inverting, "o": amplifier.output,
        "vp": amplifier.positive_supply, "vn": amplifier.negative_supply,
    }  # fmt: skip


@pytest.mark.parametrize("below", [False, True], ids=["above", "below"])
@pytest.mark.parametrize("style", STYLES)
@pytest.mark.parametrize("kind", BODIES)
def test_pins_without_a_simulator(kind: str, style: str, below: bool) -> None:
    amplifier, findings = found(deck(kind, style, below), EngineInfo(available=False))
    assert pins_of(amplifier) == NODES, amplifier.evidence
    assert not findings, [f.message for f in findings]


@pytest.mark.engine
@pytest.mark.parametrize("style", STYLES)
@pytest.mark.parametrize("kind", BODIES)
def test_pins_and_impedances_at_the_operating_point(kind: str, style: str) -> None:
    amplifier, findings = found(deck(kind, style), find_engine())
    assert pins_of(amplifier) == NODES, amplifier.evidence
    assert not findings, [f.message for f in findings]
    assert amplifier.open_loop.model is not None, amplifier.open_loop.reason
