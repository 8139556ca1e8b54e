"""Transistors between an op-amp's output and its load, inside the feedback loop: part of the amplifier.

From the op-amp's own output everything is followed, through passives, diodes, sources and from base to emitter (gate
to source), up to nodes that lie in the feedback network: what can be reached from the inverting input through passives
alone. One such node is the boosted output; where there are several, each must have one small resistor to a common node,
which then is. If all that was met on the way leads nowhere else, the op-amp and the booster are one amplifier.
"""

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Instance, Passive, Source
from xcheck.stages.fit import fitted
from xcheck.stages.model import LinearModel, bench, measured, open_loop
from xcheck.stages.types import Amplifier, OpenLoop

BALLAST_OHM = 100.0
"""The largest resistor between an emitter and the common output (common practice: 0.1 Ohm to some tens of ohms)."""
TRANSISTORS: Mapping[str, tuple[int, int]] = {"q": (1, 2), "m": (1, 2), "j": (1, 2)}
"""Places of base and emitter, or of gate and source, among the nodes of a device."""
PLUS, MINUS, OUTPUT = "in+", "in-", "out"


@dataclass(frozen=True)
class _Booster:
    output: str
    names: frozenset[str]
    transistors: tuple[str, ...]


def with_boosters(
    amplifiers: Sequence[Amplifier], circuit: Circuit, written: Circuit, still: Collection[str]
) -> tuple[Amplifier, ...]:
    """The amplifiers, those with a booster in their loop together with it. written: the circuit before it was
    linearised; still: nodes that do not move at AC."""
    if not any(isinstance(e, Device) and e.kind in TRANSISTORS for e in written.elements):
        return tuple(amplifiers)
    search = _Search(amplifiers, written, still)
    instances = {i.name: i for i in circuit.instances}
    found = []
    for amplifier in amplifiers:
        booster = search.booster(amplifier)
        if booster is None:
            found.append(amplifier)
        else:
            found.append(_joined(amplifier, booster, circuit, instances.get(amplifier.name), still))
    return tuple(found)


class _Search:
    def __init__(self, amplifiers: Sequence[Amplifier], written: Circuit, still: Collection[str]) -> None:
        models = {name for a in amplifiers for name in a.elements}
        models |= {device for name in models for device in [name.partition(":")[0]]}
        self.still = {GROUND, *still}
        self.pins = {n for a in amplifiers for n in (a.non_inverting, a.inverting, a.output)}
        self.at: dict[str, list[Element]] = {}
        for element in written.elements:
            if element.name not in models:
                sensing = element.sensing if isinstance(element, (Controlled, Device)) else ()
                for node in dict.fromkeys((*element.nodes, *sensing)):
                    self.at.setdefault(node, []).append(element)

    def booster(self, amplifier: Amplifier) -> _Booster | None:
        feedback = self._through_passives(amplifier.inverting)
        if amplifier.output in feedback or not feedback:
            return None
        region, ends, met = self._from_output(amplifier.output, feedback)
        transistors = tuple(
            e.name for e in met if isinstance(e, Device) and e.kind in TRANSISTORS and e.nodes[1] in region
        )
        if not transistors or not ends or (region & self.pins) - {amplifier.output}:
            return None
        output, ballasts = self._common(ends, region)
        inside = {*met, *ballasts}
        if (
            output is None
            or output in self.still
            or (output == amplifier.inverting != amplifier.output and not feedback)
        ):
            return None
        allowed = region | ends | {output} | self.still
        if any(n not in allowed for e in inside for n in e.nodes):
            return None
        return _Booster(output, frozenset(e.name for e in inside), transistors)

    def _through_passives(self, start: str) -> set[str]:
        """The nodes that resistors, capacitors and inductors tie to one, not through nodes that do not move."""
        if start in self.still:
            return set()
        seen = {start}
        waiting = [start]
        while waiting:
            for element in self.at.get(waiting.pop(), ()):
                if isinstance(element, Passive):
                    fresh = [n for n in element.nodes if n not in seen and n not in self.still]
                    seen.update(fresh)
                    waiting += fresh
        return seen

    def _from_output(self, output: str, feedback: Collection[str]) -> tuple[set[str], set[str], list[Element]]:
        """The nodes between the op-amp and the feedback network, those of the feedback network that are met, and the
        elements met on the way."""
        region = {output}
        ends: set[str] = set()
        met: dict[str, Element] = {}
        waiting = [output]
        while waiting:
            node = waiting.pop()
            for element in self.at.get(node, ()):
                for other in self._beyond(element, node):
                    if other in self.still or other in region:
                        continue
                    if other in feedback:
                        ends.add(other)
                    else:
                        region.add(other)
                        waiting.append(other)
                met.setdefault(element.name, element)
        return region, ends, list(met.values())

    def _beyond(self, element: Element, node: str) -> Iterable[str]:
        """Where an element leads from one of its nodes: a transistor from its base to its emitter alone."""
        if isinstance(element, Device) and element.kind in TRANSISTORS:
            base, emitter = TRANSISTORS[element.kind]
            return (element.nodes[emitter],) if element.nodes[base] == node else element.nodes
        return element.nodes

    def _common(self, ends: set[str], region: Collection[str]) -> tuple[str | None, list[Element]]:
        """The node that the emitters meet at, and the resistors in between."""
        ballasts: list[Element] = []
        meeting: set[str] = set()
        for end in sorted(ends):
            beyond = [e for e in self.at[end] if isinstance(e, Passive) and not set(e.nodes) & set(region)]
            if len(beyond) == 1 and beyond[0].kind == "r" and beyond[0].value <= BALLAST_OHM:
                ballasts.append(beyond[0])
                meeting.update(n for n in beyond[0].nodes if n != end)
            else:
                meeting.add(end)
        return (meeting.pop(), ballasts) if len(meeting) == 1 else (None, [])


def _joined(
    amplifier: Amplifier, booster: _Booster, circuit: Circuit, instance: Instance | None, still: Collection[str]
) -> Amplifier:
    """The op-amp with its booster as one amplifier."""
    added = [e for e in circuit.elements if e.name in booster.names or e.origin.device in booster.names]
    named = ", ".join(booster.transistors)
    words = f"booster: {named} between `{amplifier.output}` and `{booster.output}`, inside the loop"
    loop = _open_loop(amplifier, booster, added, instance, still)
    return replace(
        amplifier, output=booster.output, elements=(*amplifier.elements, *(e.name for e in added)),
        evidence=(*amplifier.evidence, words), open_loop=loop,
    )  # fmt: skip


def _open_loop(
    amplifier: Amplifier, booster: _Booster, added: Sequence[Element], instance: Instance | None, still: Collection[str]
) -> OpenLoop:
    nonlinear = next((e for e in added if isinstance(e, Device)), None)
    if nonlinear is not None or instance is None or amplifier.open_loop.model is None:
        reason = amplifier.open_loop.reason or f"no linear model is known for `{nonlinear.name if nonlinear else '?'}`"
        return OpenLoop({}, None, exact=False, reason=reason)
    inner = _private(amplifier, instance)
    outer = [_renamed(e, {booster.output: OUTPUT}) for e in added]
    elements = [*inner, *outer]
    around = {node for _, node in instance.pins} | {n for e in outer for n in e.nodes if ":" not in n}
    held = [PLUS, MINUS, *sorted(n for n in around if n in still and n != GROUND)]
    try:
        return fitted(measured(open_loop(LinearModel(bench(elements, held), PLUS, MINUS, OUTPUT))))
    except (np.linalg.LinAlgError, KeyError):
        return OpenLoop({}, None, exact=False, reason=f"the equations of `{amplifier.name}` alone have no solution")


def _private(amplifier: Amplifier, instance: Instance) -> list[Element]:
    """The op-amp's own elements with its signal pins apart, whatever they are tied to outside."""
    table: dict[str, str] = {}
    roles = [(amplifier.output, amplifier.output), (amplifier.inverting, MINUS), (amplifier.non_inverting, PLUS)]
    for pin, node in instance.pins:
        role = next((name for flat, name in roles if flat == node and name not in table.values()), node)
        table[pin] = role
    prefix = instance.name + "."
    own = {n for e in instance.local for n in (*e.nodes, *_sensed(e))} - table.keys() - {GROUND}
    table.update({node: prefix + node for node in own})
    return [_renamed(e, table, prefix) for e in instance.local]


def _sensed(element: Element) -> tuple[str, ...]:
    return element.sensing if isinstance(element, Controlled) else ()


def _renamed(element: Element, nodes: Mapping[str, str], prefix: str = "") -> Element:
    changed = tuple(nodes.get(n, n) for n in element.nodes)
    name = prefix + element.name
    if isinstance(element, Controlled):
        terms = tuple(
            replace(
                t, positive=nodes.get(t.positive, t.positive), negative=nodes.get(t.negative, t.negative),
                source=prefix + t.source if t.source else "",
            )
            for t in element.terms
        )  # fmt: skip
        return replace(element, name=name, nodes=changed, terms=terms)  # type: ignore[arg-type]  # as many as before
    if isinstance(element, (Passive, Source)):
        return replace(element, name=name, nodes=changed)  # type: ignore[arg-type]  # as many nodes as before
    return replace(element, name=name)
