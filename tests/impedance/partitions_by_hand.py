"""Partitions written by hand from plain element lines, so that no reader or splitter stands behind a test.

A line is a card in its simplest form with plain numbers: `r1 a b 1e3`, `k1 l1 l2 0.9`, `v1 a 0`,
`e1 out 0 inp inn 1e5`, `f1 out 0 vs 3`.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from xcheck.circuit.elements import (
    Circuit,
    Controlled,
    Coupling,
    Device,
    Element,
    Origin,
    Passive,
    Source,
    Term,
)
from xcheck.deck.cards import Card, Deck, Segment
from xcheck.stages.types import Amplifier, OpenLoop, Partition, Port, Side, Stage, Terminal

CARD = Card("", "", (), (Segment(0, "by hand", 1, 1),))
NOWHERE = Origin(CARD)


class SomeModel:
    """Stands for a linear model that nothing here evaluates."""

    def response(self, frequency: object) -> object:
        raise AssertionError(f"evaluated at {frequency}")


def elements_of(text: str) -> list[Element]:
    return [_element(line.split()) for line in text.strip().splitlines() if line.strip()]


def _element(words: list[str]) -> Element:
    name, kind = words[0], words[0].split(".")[-1][0]
    if kind in "rcl":
        return Passive(name, kind, (words[1], words[2]), float(words[3]), NOWHERE)  # type: ignore[arg-type]
    if kind == "k":
        return Coupling(name, (words[1], words[2]), float(words[3]), NOWHERE)
    if kind in "vi":
        return Source(name, kind, (words[1], words[2]), 0.0, None, "", NOWHERE)  # type: ignore[arg-type]
    if kind in "eg":
        reads = zip(words[3::3], words[4::3], words[5::3], strict=True)
        terms = tuple(Term(float(gain), positive, negative) for positive, negative, gain in reads)
        return Controlled(name, kind, (words[1], words[2]), terms, 0.0, NOWHERE)  # type: ignore[arg-type]
    if kind in "fh":
        pairs = zip(words[3::2], words[4::2], strict=True)
        terms = tuple(Term(float(gain), source=source) for source, gain in pairs)
        return Controlled(name, kind, (words[1], words[2]), terms, 0.0, NOWHERE)  # type: ignore[arg-type]
    if kind == "d":
        return Device(name, "d", (words[1], words[2]), (), "d", "diode", NOWHERE)
    raise AssertionError(f"unknown card {words}")


def amplifier(
    gain: str, pins: tuple[str, str, str] = ("", "", ""), linear: bool = True, inner: tuple[str, ...] = ()
) -> Amplifier:
    """pins: non-inverting, inverting, output; inner: its other elements."""
    model = SomeModel() if linear else None
    return Amplifier(
        name=gain,
        subckt="",
        non_inverting=pins[0],
        inverting=pins[1],
        output=pins[2],
        positive_supply=None,
        negative_supply=None,
        evidence=(),
        elements=(gain, *inner),
        gain_element=gain,
        open_loop=OpenLoop({}, model, reason="" if linear else "bjt"),  # type: ignore[arg-type]
        place=CARD.place(),
    )


@dataclass(frozen=True)
class PortAt:
    """node; the elements inside, each with all its terminals and sensing on the node."""

    node: str
    side: Side
    inside: tuple[str, ...]
    current_driven: bool = False


def partition(
    text: str,
    stages: Mapping[str, tuple[Sequence[Amplifier], Sequence[PortAt]]],
    still: Sequence[str] = (),
    soft: Sequence[str] = (),
) -> Partition:
    """still: nodes held by sources; soft: rails and references."""
    return partition_of(elements_of(text), stages, still, soft)


def partition_of(
    elements: Sequence[Element],
    stages: Mapping[str, tuple[Sequence[Amplifier], Sequence[PortAt]]],
    still: Sequence[str] = (),
    soft: Sequence[str] = (),
) -> Partition:
    circuit = Circuit(Deck("by hand", "", ()), tuple(elements))
    amplifiers = tuple(a for members, _ in stages.values() for a in members)
    inner = {name for a in amplifiers for name in a.elements}
    parts = []
    for name, (members, ports) in stages.items():
        made = tuple(_port(circuit, name, port) for port in ports)
        own = tuple(dict.fromkeys(t.element for p in made for t in p.inside if t.element not in inner))
        parts.append(Stage(name, tuple(members), own, made))
    stiff = dict.fromkeys(soft, "reference") | {a.output: f"output of {a.name}" for a in amplifiers}
    return Partition(
        circuit=circuit,
        amplifiers=amplifiers,
        stages=tuple(parts),
        stiff=stiff,
        ac_ground={"0": "ground"} | dict.fromkeys(still, "voltage source"),
        driver={a.output: a.name for a in amplifiers},
    )


def _port(circuit: Circuit, stage: str, port: PortAt) -> Port:
    inside: list[Terminal] = []
    for name in port.inside:
        element = circuit.by_name[name]
        inside += [Terminal(name, i) for i, node in enumerate(element.nodes) if node == port.node]
        if isinstance(element, (Controlled, Device)) and port.node in element.sensing:
            inside.append(Terminal(name, -1))
    return Port(stage, port.node, port.node, port.side, "signal", tuple(inside), port.current_driven, CARD.place())
