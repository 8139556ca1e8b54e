"""Finding the amplifiers of a circuit by evidence: structure, pin names, connection comments, directives."""

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Instance
from xcheck.finding import Finding
from xcheck.stages.chains import Chain, Wiring, chain_from
from xcheck.stages.directives import PinDirective, pin_directives
from xcheck.stages.macromodel import SignalPins, signal_pins
from xcheck.stages.model import LinearModel, bench, open_loop
from xcheck.stages.nodes import held_still
from xcheck.stages.pins import Role, roles_by_comment, roles_by_name, supplies
from xcheck.stages.types import Amplifier, OpenLoop, Quantity


def find_amplifiers(circuit: Circuit) -> tuple[tuple[Amplifier, ...], tuple[Finding, ...]]:
    """All amplifiers in deck order, and what is wrong with directives that name them."""
    directives, findings = pin_directives(circuit)
    return _Search(circuit, directives).run(), findings


class _Search:
    def __init__(self, circuit: Circuit, directives: Mapping[str, PinDirective]) -> None:
        self.circuit = circuit
        self.directives = directives
        self.judged: dict[int, list[SignalPins]] = {}
        self.loops: dict[tuple[int, str, str, str], OpenLoop] = {}
        self.members: dict[str, list[Element]] = {}
        for element in circuit.elements:
            for name in element.origin.path:
                self.members.setdefault(name, []).append(element)

    def run(self) -> tuple[Amplifier, ...]:
        found: list[Amplifier] = []
        claimed: set[str] = set()
        inside: set[str] = set()
        for instance in self.circuit.instances:
            if inside & set(instance.origin.path):
                continue
            amplifier = self._by_instance(instance)
            if amplifier is not None:
                found.append(amplifier)
                inside.add(instance.name)
                claimed.update(amplifier.elements)
        found += self._bare(claimed)
        order = {element.name: k for k, element in enumerate(self.circuit.elements)}
        return tuple(sorted(found, key=lambda a: min(order[name] for name in a.elements)))

    def _by_instance(self, instance: Instance) -> Amplifier | None:
        pins = [pin for pin, _ in instance.pins]
        told = self.directives.get(instance.name)
        devices = [e for e in instance.local if isinstance(e, Device)]
        sources = [e for e in instance.local if isinstance(e, (Controlled, Device))]
        if not sources:
            return None
        seen: list[SignalPins] = []
        if not devices:
            seen = self._judge(instance, pins)
            if told is None and len(seen) != 1:
                return None
        elif told is None and not _looks_like_an_amplifier(devices, sources):
            return None
        named = roles_by_comment(pins, instance.comments) or roles_by_name(pins)
        roles, evidence = _weigh(seen, named, told, instance)
        if roles is None:
            return None
        return self._amplifier(instance, roles, evidence, seen, devices)

    def _judge(self, instance: Instance, pins: Sequence[str]) -> list[SignalPins]:
        key = id(instance.local)
        if key not in self.judged:
            try:
                self.judged[key] = signal_pins(instance.local, pins)
            except np.linalg.LinAlgError:
                self.judged[key] = []
        return self.judged[key]

    def _amplifier(
        self, instance: Instance, roles: Mapping[Role, str], evidence: tuple[str, ...],
        seen: Sequence[SignalPins], devices: Sequence[Device],
    ) -> Amplifier:  # fmt: skip
        nodes = dict(instance.pins)
        nodes[GROUND] = GROUND
        signal = [roles["in+"], roles["in-"], roles["out"]]
        told = self.directives.get(instance.name)
        power = {**supplies([p for p, _ in instance.pins], instance.comments, signal), **(told.roles if told else {})}
        members = self.members[instance.name]
        if devices:
            reason = f"no linear model is known for `{devices[0].name}` in `{instance.subckt}` ({devices[0].reason})"
            loop = OpenLoop({}, None, exact=False, reason=reason)
            first = next((e for e in members if isinstance(e, (Controlled, Device))), members[0])
            gain_element = first.name
        else:
            loop = self._open_loop(instance, roles)
            gain_element = f"{instance.name}.{seen[0].gain_element}" if seen else _first_source(members)
        return Amplifier(
            name=instance.name, subckt=instance.subckt, non_inverting=nodes[roles["in+"]],
            inverting=nodes[roles["in-"]], output=nodes[roles["out"]],
            positive_supply=nodes.get(power.get("v+", "")), negative_supply=nodes.get(power.get("v-", "")),
            evidence=evidence, elements=tuple(e.name for e in members), gain_element=gain_element,
            open_loop=loop, place=instance.origin.card.place(),
        )  # fmt: skip

    def _open_loop(self, instance: Instance, roles: Mapping[Role, str]) -> OpenLoop:
        key = (id(instance.local), roles["in+"], roles["in-"], roles["out"])
        if key not in self.loops:
            held = [p for p, _ in instance.pins if p != roles["out"]]
            model = LinearModel(bench(instance.local, held), roles["in+"], roles["in-"], roles["out"])
            try:
                self.loops[key] = open_loop(model)
            except np.linalg.LinAlgError:
                reason = f"the equations of `{instance.subckt}` alone have no solution"
                self.loops[key] = OpenLoop({}, None, exact=False, reason=reason)
        return self.loops[key]

    def _bare(self, claimed: set[str]) -> list[Amplifier]:
        elements = [e for e in self.circuit.elements if e.name not in claimed]
        wiring = Wiring.of(elements)
        still = held_still(self.circuit)
        taken: set[str] = set()
        found: list[Amplifier] = []
        for element in elements:
            if isinstance(element, Controlled) and element.kind in "eg" and element.name not in taken:
                chain = chain_from(element, wiring, still)
                if chain is not None and not taken & {e.name for e in chain.elements}:
                    taken.update(e.name for e in chain.elements)
                    found.append(_bare_amplifier(element, chain, still))
        return found


def _bare_amplifier(first: Controlled, chain: Chain, still: Mapping[str, str]) -> Amplifier:
    on_bench = tuple(_grounded(e, still) for e in chain.elements)
    held = [n for n in (chain.plus, chain.minus) if n != GROUND]
    model = LinearModel(bench(on_bench, held), chain.plus, chain.minus, chain.output)
    try:
        loop = open_loop(model)
    except np.linalg.LinAlgError:
        loop = OpenLoop({"gain": Quantity(chain.gain, "deck")}, None, exact=False, reason="its equations are singular")
    return Amplifier(
        name=first.name, subckt="", non_inverting=chain.plus, inverting=chain.minus, output=chain.output,
        positive_supply=None, negative_supply=None,
        evidence=(
            f"structure: gain {chain.gain:.4g} from ({chain.plus}, {chain.minus}) to `{chain.output}` through "
            + ", ".join(e.name for e in chain.elements),
        ),
        elements=tuple(e.name for e in chain.elements), gain_element=first.name, open_loop=loop,
        place=first.origin.card.place(),
    )  # fmt: skip


def _grounded(element: Element, still: Mapping[str, str]) -> Element:
    """The element with nodes at AC ground replaced by ground."""
    nodes = tuple(GROUND if n in still else n for n in element.nodes)
    return replace(element, nodes=nodes)  # type: ignore[arg-type]  # as many nodes as before


def _looks_like_an_amplifier(devices: Sequence[Device], sources: Sequence[Element]) -> bool:
    """Whether a nonlinear subcircuit has what an op-amp model needs: active parts beyond diodes."""
    active = any(d.kind in "qmj" or d.reason == "expression" for d in devices)
    return active or any(isinstance(s, Controlled) for s in sources)


def _first_source(members: Sequence[Element]) -> str:
    return next(e.name for e in members if isinstance(e, Controlled))


def _weigh(
    seen: Sequence[SignalPins], named: Mapping[Role, str], told: PinDirective | None, instance: Instance
) -> tuple[Mapping[Role, str] | None, tuple[str, ...]]:
    """The signal pins that the evidence speaks for, and the evidence in words. A directive is the designer's own
    word; structure is what the elements do; names and comments are what an author wrote."""
    evidence: list[str] = []
    roles: dict[Role, str] | None = None
    if told is not None:
        roles = dict(told.roles)
        evidence.append(f"directive at {told.place}")
    if len(seen) == 1:
        pins = seen[0]
        by_structure: dict[Role, str] = {"in+": pins.plus, "in-": pins.minus, "out": pins.output}
        roles = roles or by_structure
        evidence.append(f"structure: gain {pins.gain:.4g} from ({pins.plus}, {pins.minus}) to `{pins.output}`")
    if {"in+", "in-", "out"} <= named.keys():
        source = "comment" if roles_by_comment([p for p, _ in instance.pins], instance.comments) else "pin names"
        written = f"{source}: in+ `{named['in+']}`, in- `{named['in-']}`, out `{named['out']}`"
        if roles is None:
            roles = {role: named[role] for role in ("in+", "in-", "out")}
        elif any(roles[role] != named[role] for role in ("in+", "in-", "out")):
            written += " (contradicts the above, which counts)"
        evidence.append(written)
    return roles, tuple(evidence)
