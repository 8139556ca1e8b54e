"""Scale factors that cannot be meant: milli for mega, femto for farad. Judged by what the part does where
it stands.

**Milli for mega.** ngspice does not tell `1M` from `1m`. A deliberate milliohm is a shunt, a winding, a
wire, a capacitor's series resistance: something in the way of a current. So nothing is said of a resistor
with an end where current flows: a part of less than 100 Ohm, an inductor, a device, an ammeter, a source of
1 mA and more, or a lone capacitor. Of the others, a written `m` is taken for a mistake only where a
milliohm undoes the stage: from an amplifier's output to ground or to a virtual ground, as a leg of a
virtual ground, across an amplifier's inputs, from a signal at an input to ground. A written `M` is stronger
evidence, since people write milli small; there it suffices that a megohm fits the parts around. In a file
all in capitals `M` counts as `m`. Names prove nothing. A sweep whose end in `M` lies below its start says
so as clearly. Nothing is said of `M` on C and L: a millifarad and a millihenry are ordinary.

**Femto for farad.** `10F` is 10 fF. Chips have such capacitors and decks of boards leave `1f` in for none,
so a written `F` is taken for a mistake where no other capacitor is below half a picofarad, a written `f`
only where the capacitor is the one way for a signal into an amplifier's input; and both with an exponent,
since nobody writes 1e-6 femtofarad.
"""

from collections.abc import Iterator

from xcheck.circuit.elements import GROUND, Controlled, Device, Element, Passive, Source
from xcheck.deck.numbers import read_number
from xcheck.finding import Finding
from xcheck.notation import shortest
from xcheck.reviewed import Evidence
from xcheck.rules.graphs import around_amplifiers, terminals
from xcheck.rules.spots import Spot, Values, upper_case_files
from xcheck.stages.types import Amplifier

CURRENT_OHM = 100.0
"""A resistor below this carries a current worth measuring or wiring for."""
CURRENT_AMPERE = 1e-3
SIGNAL_OHM = 1e3
"""Resistors of a signal chain are rarely below (common practice)."""
SHORT_AMPERE = 10.0
MEGA_BY_MILLI = 1e9
GREATEST_MEANT = 1e10
"""Ohm; above this, 10 000 M, a megohm is no likelier than a milliohm."""
SUB_PICOFARAD = 0.5e-12
BOARD_FARAD = 1e-11


def milli_for_mega(evidence: Evidence) -> Iterator[Finding]:
    """`1M` on a resistor where one milliohm makes no sense and a megohm does, and on the end of a sweep."""
    values = Values(evidence.deck, evidence.circuit)
    suspects: dict[str, tuple[Passive, Spot]] = {}
    for element in evidence.circuit.elements:
        if isinstance(element, Passive) and element.kind == "r" and 0 < element.value < 1:
            spot = values.of(element)
            if spot is not None and spot.number.scale.lower() == "m" and not spot.number.rest[:1].isdigit():
                suspects[element.name] = element, spot
    if suspects:
        surroundings = _Surroundings(evidence, set(suspects))
        capitals = upper_case_files(evidence.deck)
        for element, spot in suspects.values():
            written_large = spot.number.scale == "M" and spot.place.file not in capitals
            why = surroundings.nonsense(element, written_large=written_large)
            if why and element.value * MEGA_BY_MILLI <= GREATEST_MEANT:
                yield _milli(element, spot, why)
    yield from _sweep_ends(evidence)


def _milli(element: Passive, spot: Spot, why: str) -> Finding:
    through = f"{element.name} takes its value from `{spot.key}`: " if spot.card is not element.origin.card else ""
    return Finding(
        "milli-for-mega",
        "error",
        spot.place,
        f"{through}`{spot.word}` is {shortest(element.value, 'Ohm')}, since M and m are both milli; {why}",
        subject=element.name,
        advice=f"write {spot.number.digits}Meg for {shortest(element.value * MEGA_BY_MILLI, 'Ohm')}",
    )


def _sweep_ends(evidence: Evidence) -> Iterator[Finding]:
    for card in evidence.deck.cards:
        if card.kind != ".ac" or len(card.fields) < 5:
            continue
        start, stop = (read_number(field.text) for field in card.fields[3:5])
        if start is None or stop is None or stop.scale.lower() != "m" or not stop.value < start.value:
            continue
        yield Finding(
            "milli-for-mega",
            "error",
            card.place(card.fields[4]),
            f"`{card.fields[4].text}` is {shortest(stop.value, 'Hz')}, since M and m are both milli; the sweep would "
            f"end below its start of {shortest(start.value, 'Hz')}",
            advice=f"write {stop.digits}Meg for {shortest(stop.value * MEGA_BY_MILLI, 'Hz')}",
        )


class _Surroundings:
    """What hangs on the ends of resistors, and what a milliohm would do there."""

    def __init__(self, evidence: Evidence, suspects: set[str]) -> None:
        partition = evidence.partition
        self.ends = terminals(evidence.circuit)
        self.suspects = suspects
        self.still = {GROUND, *partition.ac_ground}
        self.amplifiers = partition.amplifiers
        self.own = {name: a for a in partition.amplifiers for name in a.elements}
        self.outputs = {a.output: a for a in partition.amplifiers}
        self.inverting: dict[str, Amplifier] = {a.inverting: a for a in partition.amplifiers}
        self.inputs = {n for a in partition.amplifiers for n in (a.non_inverting, a.inverting)}

    def nonsense(self, element: Passive, *, written_large: bool) -> str:
        """What a milliohm would do, where that cannot be meant; else ''."""
        one, other = element.nodes
        if element.name in self.own:
            return self._inside(element, written_large=written_large)
        for near, far in ((one, other), (other, one)):
            why = self._undoes(element, near, far)
            if why:
                return why
        if not written_large:
            return ""
        if self._carries_current(element, one) or self._carries_current(element, other):
            return ""
        if one in self.still and other in self.still:
            return self._across_a_source(element)
        fits = {one, other} & (self.inputs | self.outputs.keys()) or any(
            isinstance(e, Passive) and e.kind == "r" and e.value >= SIGNAL_OHM
            for node in (one, other)
            if node not in self.still
            for e in self.others(element, node)
        )
        return "a megohm fits the parts around it, a milliohm would tie its ends together" if fits else ""

    def _inside(self, element: Passive, *, written_large: bool) -> str:
        """Of an amplifier's model nothing is certain but its input resistance."""
        amplifier = self.own[element.name]
        inputs = {amplifier.non_inverting, amplifier.inverting}
        if set(element.nodes) == inputs:
            return f"it would short the inputs of {amplifier.name}"
        if written_large and inputs & set(element.nodes) and self.still & set(element.nodes):
            return f"it would short an input of {amplifier.name} to ground"
        return ""

    def _undoes(self, element: Passive, near: str, far: str) -> str:
        """What a milliohm from near to far does to a stage, whatever the case of the letter."""
        if near in self.outputs and far in self.still:
            return f"it would short the output of {self.outputs[near].name}"
        if near in self.inverting and near not in self.outputs:
            amplifier = self.inverting[near]
            legs = [e for e in self.others(element, near) if not (isinstance(e, Passive) and e.kind == "c")]
            if far == amplifier.output and legs:
                return f"as feedback of {amplifier.name} it would leave no gain"
            held = far in self.still or far in self.outputs
            if held and far != amplifier.output and self._fed_back(element, amplifier):
                return f"at the virtual ground of {amplifier.name} it would ask for a gain without bounds"
        pair = {near, far}
        if any({a.non_inverting, a.inverting} == pair for a in self.amplifiers) and not (
            pair & self.still or any(self._carries_current(element, node) for node in pair)
        ):
            return "it would short an amplifier's inputs"
        if far == GROUND and near in self.inputs and near not in self.still and self._is_signal(element, near):
            return f"it would short the signal at `{near}` to ground"
        return ""

    def others(self, element: Element, node: str) -> list[Element]:
        """What else ends on a node, amplifiers' insides left out."""
        return [e for e, i in self.ends.get(node, ()) if i >= 0 and e is not element and e.name not in self.own]

    def _fed_back(self, element: Passive, amplifier: Amplifier) -> bool:
        """Whether a device, or a part of at least the signal chain's size, lies between output and inverting
        input."""
        pair = {amplifier.inverting, amplifier.output}
        return any(
            pair <= set(e.nodes) and (not isinstance(e, Passive) or e.kind == "c" or e.value >= CURRENT_OHM)
            for e in self.others(element, amplifier.inverting)
        )

    def _is_signal(self, element: Passive, node: str) -> bool:
        """A signal's node: parts of a signal chain end there, and none that a supply's current comes
        through."""
        others = self.others(element, node)
        if not others or self._carries_current(element, node):
            return False
        for other in others:
            if isinstance(other, Passive) and other.kind == "r" and other.name not in self.suspects:
                far = other.nodes[1] if other.nodes[0] == node else other.nodes[0]
                if other.value < SIGNAL_OHM or (far in self.still and far != GROUND and not self._moves(far)):
                    return False
        return True

    def _moves(self, node: str) -> bool:
        """Whether a source with a signal holds a node."""
        return any(isinstance(e, Source) and (e.ac or e.transient) for e, _ in self.ends.get(node, ()))

    def _carries_current(self, element: Passive, node: str) -> bool:
        """Whether something on a node, beside the element, takes or gives a current that milliohms are
        for."""
        if node in self.still or node in self.outputs:
            return False
        others = self.others(element, node)
        if len(others) == 1 and isinstance(others[0], Passive) and others[0].kind == "c":
            return node not in self.inputs
        return any(self._is_heavy(e) for e in others)

    def _is_heavy(self, element: Element) -> bool:
        match element:
            case Passive():
                light = element.kind == "c" or element.name in self.suspects
                return not light and (element.kind == "l" or element.value < CURRENT_OHM)
            case Source():
                return element.kind == "v" or abs(element.dc) >= CURRENT_AMPERE
            case Controlled():
                return element.kind in "fg"
            case _:
                return isinstance(element, Device)

    def _across_a_source(self, element: Passive) -> str:
        for node in element.nodes:
            for other, _ in self.ends.get(node, ()):
                if isinstance(other, Source) and other.kind == "v" and set(other.nodes) == set(element.nodes):
                    ampere = abs(other.dc) / element.value
                    if ampere > SHORT_AMPERE:
                        return f"it would draw {shortest(ampere, 'A', 3)} from {other.name}"
        return ""


def femto_for_farad(evidence: Evidence) -> Iterator[Finding]:
    """`10F` on a capacitor; see the head of this module."""
    values = Values(evidence.deck, evidence.circuit)
    capacitors = [e for e in around_amplifiers(evidence.partition) if isinstance(e, Passive) and e.kind == "c"]
    suspects: list[tuple[Passive, Spot]] = []
    least_other = float("inf")
    for element in capacitors:
        small = 0 < element.value < BOARD_FARAD
        spot = values.of(element) if small else None
        if spot is not None and spot.number.scale.lower() == "f" and spot.number.rest[:1] not in ("f", "F"):
            suspects.append((element, spot))
        elif element.value > 0:
            least_other = min(least_other, element.value)
    if not suspects:
        return
    capitals = upper_case_files(evidence.deck)
    surroundings = _Surroundings(evidence, set())
    for element, spot in suspects:
        exponent = "e" in spot.number.digits.lower()
        written_large = spot.number.scale == "F" and spot.place.file not in capitals
        if (
            exponent
            or (written_large and least_other >= SUB_PICOFARAD)
            or (least_other >= BOARD_FARAD and _only_way_in(surroundings, element))
        ):
            yield _femto(element, spot)


def _femto(element: Passive, spot: Spot) -> Finding:
    through = f"{element.name} takes its value from `{spot.key}`: " if spot.card is not element.origin.card else ""
    exponent = "e" in spot.number.digits.lower()
    advice = f"write {spot.number.digits} for {shortest(element.value * 1e15, 'F')}"
    if not exponent:
        advice += f", {spot.number.digits}u, {spot.number.digits}n or {spot.number.digits}p if that is meant"
    return Finding(
        "femto-for-farad",
        "error",
        spot.place,
        f"{through}`{spot.word}` is {shortest(element.value, 'F')}, since F after a number is femto, not farad",
        subject=element.name,
        advice=advice,
    )


def _only_way_in(surroundings: _Surroundings, element: Passive) -> bool:
    """Whether a signal can come to an amplifier's input through this capacitor alone: what else ends on the
    node are resistors to ground or a bias voltage."""
    for near, far in (element.nodes, element.nodes[::-1]):
        if near not in surroundings.inputs or near in surroundings.still or far == GROUND:
            continue
        others = surroundings.others(element, near)
        if others and all(
            isinstance(e, Passive) and e.kind == "r" and surroundings.still & set(e.nodes) for e in others
        ):
            return True
    return False
