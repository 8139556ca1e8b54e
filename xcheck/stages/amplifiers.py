"""Finding the amplifiers of a circuit by evidence: structure, pin names, connection comments, directives."""

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Instance
from xcheck.finding import Finding
from xcheck.parts.catalogue import find
from xcheck.project import Project
from xcheck.stages.bare import bare_amplifiers
from xcheck.stages.boosters import with_boosters
from xcheck.stages.directives import PinDirective, pin_directives, project_pins
from xcheck.stages.fit import fitted
from xcheck.stages.kinds import kind_of
from xcheck.stages.macromodel import LEAST_GAIN, SignalPins, other_pins
from xcheck.stages.missing import missing_amplifiers
from xcheck.stages.model import LinearModel, bench, measured, open_loop
from xcheck.stages.nodes import held_still
from xcheck.stages.packages import members_of, sections
from xcheck.stages.pins import (
    OTHERS,
    POWER,
    SIGNAL,
    Role,
    roles_by_comment,
    roles_by_name,
    roles_by_package,
    speak_of_an_amplifier,
    supplies,
)
from xcheck.stages.structure import Structure
from xcheck.stages.supplies import SupplyLevels
from xcheck.stages.types import Amplifier, OpenLoop
from xcheck.stages.weighing import AT_THE_POINT, IN_PRINCIPLE, LINEAR, Evidence, Written, weigh

LEAST_NOMINAL_GAIN = 100.0
"""Where nominal values stand for devices: a gain is then no size, only a sign that there is a way."""
LEAST_BALANCE = 0.5
"""Of the gain from one input against that from the other, in a model of transistors."""
FEWEST_OF_TWO = 6
"""Pins of a package of two op-amps: two times two inputs and an output; supplies may be missing."""
LEAST_NAMED_GAIN = 10.0
"""What is enough where pin names or a comment tell an op-amp and the deck closes a loop around it: a part that the
designer made poor on purpose."""


def find_amplifiers(
    circuit: Circuit, written: Circuit | None = None, project: Project | None = None
) -> tuple[tuple[Amplifier, ...], tuple[Finding, ...]]:
    """All amplifiers in deck order, and what is wrong with directives that name them or with their pins.

    written: the circuit as the deck has it, where `circuit` is the same at its operating point; project: what the
    project file says of pins and parts."""
    project = project or Project()
    directives, findings = pin_directives(circuit)
    told, faults = project_pins(circuit, project)
    directives = {**told, **directives}
    search = _Search(circuit, written or circuit, directives)
    amplifiers = with_boosters(search.run(), circuit, written or circuit, search.held.still)
    known = tuple(replace(a, part=project.part_of(a.subckt)) for a in amplifiers)
    known = tuple(replace(a, kind=a.part.kind) if a.part is not None else a for a in known)
    return known, (*findings, *faults, *search.findings)


class _Search:
    """Looks at instances from the innermost outwards: an instance takes the place of the one amplifier inside it where
    it is itself an op-amp."""

    def __init__(self, circuit: Circuit, written: Circuit, directives: Mapping[str, PinDirective]) -> None:
        self.circuit = circuit
        self.directives = directives
        self.findings: list[Finding] = []
        self.held = held_still(circuit, _follows)
        self.structure = Structure(circuit, written, self.held.still)
        self.levels = SupplyLevels(circuit)
        self.loops: dict[tuple[object, ...], OpenLoop] = {}
        self.kinds: dict[int, tuple[OpenLoop, str]] = {}
        self.devices: dict[int, tuple[Device, ...]] = {}
        self.members: dict[str, list[Element]] = {}
        for element in circuit.elements:
            for name in element.origin.path:
                self.members.setdefault(name, []).append(element)

    def run(self) -> tuple[Amplifier, ...]:
        below: dict[str, list[Amplifier]] = {}
        for instance in reversed(self.circuit.instances):
            inner = below.pop(instance.name, [])
            one = self._by_instance(instance, inner)
            found = [one] if one is not None else [] if inner else self._package(instance)
            parent = instance.origin.path[-1] if instance.origin.path else ""
            below.setdefault(parent, []).extend(found or inner)
        amplifiers = below.get("", [])
        missing, doubts = missing_amplifiers(self.circuit, self.levels)
        amplifiers += missing
        self.findings += doubts
        claimed = {name for a in amplifiers for name in a.elements}
        amplifiers += bare_amplifiers(self.circuit, claimed, self.held, self.directives)
        order = {element.name: k for k, element in enumerate(self.circuit.elements)}
        return tuple(sorted(amplifiers, key=lambda a: min(order[name] for name in a.elements)))

    def _by_instance(self, instance: Instance, inner: Sequence[Amplifier]) -> Amplifier | None:
        """The amplifier that an instance is, None where it is none. inner: the amplifiers found inside it."""
        told = self.directives.get(instance.name)
        if told is None and (len(inner) > 1 or any(a.name in self.directives for a in inner)):
            return None
        if not any(isinstance(e, (Controlled, Device)) for e in instance.local):
            return None
        evidence = self._evidence(instance, told, inner)
        if evidence is None:
            return None
        if evidence.fault and told is not None:
            self.findings.append(Finding("syntax", "error", told.place, evidence.fault, instance.name))
        if evidence.conflict:
            self.findings.append(_uncertain(instance, evidence.conflict))
        return self._amplifier(instance, evidence)

    def _package(self, instance: Instance) -> list[Amplifier]:
        """The op-amps of an instance that holds several, named after it and numbered."""
        if instance.name in self.directives or len(instance.pins) < FEWEST_OF_TWO:
            return []
        structure, nodes = self.structure, dict(instance.pins)
        how = AT_THE_POINT if structure.nonlinear(instance) else LINEAR
        judged = structure.at_the_point(instance, {}, LEAST_GAIN)
        if len(judged) < 2 and structure.nonlinear(instance):
            how, judged = IN_PRINCIPLE, structure.in_principle(instance, {}, LEAST_NOMINAL_GAIN)
        free = [s for s in judged if nodes[s.output] not in self.held.reasons and _is_differential(s)]
        found = []
        several = sections(free)
        own = members_of(instance.local, [p for p, _ in instance.pins], several) if several else []
        for number, (seen, names) in enumerate(zip(several, own, strict=True), 1):
            evidence = weigh(instance, seen, how, (), None)
            if evidence is not None:
                one = self._amplifier(instance, evidence, structure.loose(instance, {}))
                elements = tuple(n for n in one.elements if n.removeprefix(f"{instance.name}.") in names)
                found.append(replace(one, name=f"{instance.name}.{number}", elements=elements))
        return found

    def _evidence(self, instance: Instance, told: PinDirective | None, inner: Sequence[Amplifier]) -> Evidence | None:
        written = _written(instance)
        named = written[0].roles if written else {}
        seen, how = self._seen(instance, named)
        if told is None and seen is None:
            if not named or not self.structure.nonlinear(instance) or not _looks_like_an_amplifier(instance.local):
                return None
            if inner and not _is_wrapper(instance, inner[0], self.members):
                return None
        if told is None and seen is not None and inner and GROUND in (seen.plus, seen.minus):
            one = inner[0]
            if GROUND not in (one.non_inverting, one.inverting):
                return None
        return weigh(instance, seen, how, written, told)

    def _seen(self, instance: Instance, named: Mapping[Role, str]) -> tuple[SignalPins | None, str]:
        """What the instance's elements do at its pins, and how that is known; None where that is no op-amp's."""
        structure = self.structure
        found = self._fitting(instance, named, structure.at_the_point(instance, named, LEAST_GAIN))
        if found is None and set(SIGNAL) <= named.keys() and self._is_fed_back(instance, named):
            found = self._fitting(instance, named, structure.at_the_point(instance, named, LEAST_NAMED_GAIN))
        if not self.structure.nonlinear(instance):
            return found, LINEAR
        if found is None or not _is_differential(found):
            found = self._fitting(instance, named, structure.in_principle(instance, named, LEAST_NOMINAL_GAIN))
            told = bool(named) or find(instance.subckt) is not None
            sure = found is not None and _is_differential(found) and (told or self._has_a_loop(instance, found))
            return found if sure else None, IN_PRINCIPLE
        return found, AT_THE_POINT

    def _has_a_loop(self, instance: Instance, seen: SignalPins) -> bool:
        """Whether the deck ties the output to an input: logic gates have pins like an op-amp's, but no such loop."""
        nodes = dict(instance.pins)
        return any(self.levels.tied(nodes[seen.output], nodes[pin]) for pin in (seen.plus, seen.minus))

    def _fitting(
        self, instance: Instance, named: Mapping[Role, str], judged: Sequence[SignalPins]
    ) -> SignalPins | None:
        nodes = dict(instance.pins)
        power = {named[role] for role in POWER if role in named}
        free = [s for s in judged if s.output not in power]
        outputs = [s for s in free if nodes[s.output] not in self.held.reasons]
        if not outputs:  # a board may have an output on a supply by mistake
            outputs = [s for s in free if s.output == named.get("out")]
        if not outputs:  # or a comment may call an output a supply
            outputs = [s for s in judged if nodes[s.output] not in self.held.reasons]
        if len(outputs) > 1:
            outputs = [s for s in outputs if s.output == named.get("out")]
        if len(outputs) != 1:
            return None
        seen = outputs[0]
        return seen if all(self._is_supply(instance, pin, named) for pin in seen.tied) else None

    def _is_supply(self, instance: Instance, pin: str, named: Mapping[Role, str]) -> bool:
        """Whether a pin that conducts to an input may do so: a supply, by its name, its comment or its node."""
        by_name = roles_by_name([pin]).keys() | {role for role, p in named.items() if p == pin}
        node = dict(instance.pins)[pin]
        return bool(set(POWER) & by_name) or node in self.held.quiet or OTHERS.fullmatch(pin) is not None

    def _devices(self, instance: Instance) -> tuple[Device, ...]:
        key = id(instance.local)
        if key not in self.devices:
            self.devices[key] = tuple(e for e in instance.local if isinstance(e, Device))
        return self.devices[key]

    def _is_fed_back(self, instance: Instance, named: Mapping[Role, str]) -> bool:
        nodes = dict(instance.pins)
        return self.levels.tied(nodes[named["out"]], nodes[named["in-"]])

    def _amplifier(self, instance: Instance, evidence: Evidence, loose: Sequence[str] | None = None) -> Amplifier:
        """The amplifier that the evidence speaks of. loose: pins that nothing holds, None where the roles tell them."""
        roles = evidence.roles
        nodes = {**dict(instance.pins), GROUND: GROUND}
        signal = [roles[role] for role in SIGNAL]
        pins = [pin for pin, _ in instance.pins]
        power = {**supplies(pins, instance.comments, signal), **{r: p for r, p in roles.items() if r in POWER}}
        unnamed = [p for p in pins if p not in (*signal, *power.values()) and roles_by_name([p]) == {}]
        power = {**self.levels.by_level(unnamed, nodes, power), **power}
        members = self.members[instance.name]
        devices = self._devices(instance)
        if devices:
            reason = f"no linear model is known for `{devices[0].name}` in `{instance.subckt}` ({devices[0].reason})"
            loop = OpenLoop({}, None, exact=False, reason=reason)
            kind = self._kind_in_principle(instance, signal)
        else:
            all_roles = {**roles, **power}
            free = self.structure.loose(instance, all_roles) if loose is None else tuple(loose)
            loop = self._open_loop(instance, all_roles, free)
            loop, kind = self._judged(loop, self.structure.nonlinear(instance))
        first = next((e for e in members if isinstance(e, Controlled)), None) or next(
            (e for e in members if isinstance(e, Device)), members[0]
        )
        return Amplifier(
            name=instance.name, subckt=instance.subckt, non_inverting=nodes[roles["in+"]],
            inverting=nodes[roles["in-"]], output=nodes[roles["out"]],
            positive_supply=nodes.get(power.get("v+", "")), negative_supply=nodes.get(power.get("v-", "")),
            evidence=evidence.words, elements=tuple(e.name for e in members),
            gain_element=f"{instance.name}.{evidence.gain_element}" if evidence.gain_element else first.name,
            open_loop=loop, place=instance.origin.card.place(), kind=kind,
        )  # fmt: skip

    def _judged(self, loop: OpenLoop, nonlinear: bool) -> tuple[OpenLoop, str]:
        """The values of a model as they are told, and its kind; worked out once for all amplifiers that share it."""
        key = id(loop.model)
        if loop.model is None or key not in self.kinds:
            self.kinds[key] = (fitted(measured(loop)) if nonlinear else loop, kind_of(loop))
        told, kind = self.kinds[key]
        same = (told.exact, told.reason) == (loop.exact, loop.reason)
        return told if same else replace(told, exact=loop.exact, reason=loop.reason), kind

    def _kind_in_principle(self, instance: Instance, signal: Sequence[str]) -> str:
        """The kind of a model by nominal values in place of its devices."""
        linear = self.structure.nominal_elements(instance)
        plus, minus, output = signal
        held = [p for p, _ in instance.pins if p != output]
        try:
            return kind_of(open_loop(LinearModel(bench(linear, held), plus, minus, output)))
        except (np.linalg.LinAlgError, KeyError):
            return "voltage-feedback"

    def _open_loop(self, instance: Instance, roles: Mapping[Role, str], loose: tuple[str, ...]) -> OpenLoop:
        signal = [roles[role] for role in SIGNAL]
        key = (id(instance.local), tuple(signal), loose)
        pins = [p for p, _ in instance.pins if p not in loose]
        if key not in self.loops:
            plus, minus, output = signal
            model = LinearModel(bench(instance.local, [p for p in pins if p != output]), plus, minus, output)
            try:
                self.loops[key] = open_loop(model)
            except np.linalg.LinAlgError:
                reason = f"the equations of `{instance.subckt}` alone have no solution"
                self.loops[key] = OpenLoop({}, None, exact=False, reason=reason)
        loop = self.loops[key]
        nodes = dict(instance.pins)
        tied_outside = [p for p in loose if not self.structure.alone(instance.name, nodes[p])]
        if tied_outside and loop.exact:
            return replace(loop, exact=False, reason=f"what hangs on its pin `{tied_outside[0]}` is left out")
        soft = [p for p in pins if p not in signal and nodes[p] not in self.held.still]
        if soft and loop.exact:
            tied, moving = other_pins(instance.local, pins, signal[:2], signal[2])
            moved = [p for p in soft if p in tied or p in moving]
            if moved:
                node = nodes[moved[0]]
                reason = f"its pin `{moved[0]}` has a part in its signal, and node `{node}` is not at AC ground"
                return replace(loop, exact=False, reason=reason)
        return loop


def _follows(source: Controlled) -> bool:
    """Whether a controlled voltage is no amplifier, so that it is still where what it senses is."""
    return sum(abs(t.gain) for t in source.terms) <= LEAST_NAMED_GAIN


def _written(instance: Instance) -> list[Written]:
    """What the author of a subcircuit wrote of its pins, what counts most first."""
    pins = [pin for pin, _ in instance.pins]
    by_comment = roles_by_comment(pins, instance.comments)
    found = [Written("comment", by_comment)] if by_comment else []
    if speak_of_an_amplifier(pins):
        found.append(Written("pin names", roles_by_name(pins)))
    by_package = roles_by_package(pins)
    if by_package:
        found.append(Written("package pin numbers", by_package))
    return found


def _uncertain(instance: Instance, conflict: str) -> Finding:
    return Finding(
        "amplifier-pins-uncertain", "warning", instance.origin.card.place(),
        f"what is known of the pins of `{instance.subckt}` does not agree: {conflict}", instance.name,
        advice=f"correct what is wrong, or write `* xcheck: amplifier {instance.subckt} in+=PIN in-=PIN out=PIN`",
    )  # fmt: skip


def _is_differential(seen: SignalPins) -> bool:
    """Whether a nonlinear block has two inputs of about the same gain: a gate or a transistor stage has not."""
    return GROUND not in (seen.plus, seen.minus) and seen.balance > LEAST_BALANCE


def _looks_like_an_amplifier(elements: Sequence[Element]) -> bool:
    """Whether a nonlinear subcircuit has what an op-amp model needs: active parts beyond diodes."""
    return any(
        isinstance(e, Controlled) or (isinstance(e, Device) and (e.kind in "qmjz" or e.sensing)) for e in elements
    )


def _is_wrapper(instance: Instance, inner: Amplifier, members: Mapping[str, Sequence[Element]]) -> bool:
    """Whether an instance only hands the pins of the amplifier inside it on: its signal nodes are pins of the
    instance, apart from one another, and nothing else in the instance touches both the output and an input."""
    pins = {node for _, node in instance.pins}
    signal = {inner.non_inverting, inner.inverting, inner.output}
    if len(signal) < 3 or not signal <= pins:
        return False
    own = set(inner.elements)
    around = [e for e in members[instance.name] if e.name not in own]
    return not any(signal & set(e.nodes) for e in around)
