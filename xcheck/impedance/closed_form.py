"""Closed forms of all ports of recognised stages, evaluated with their real loads and sources.

A port's form needs what its stage's other ports look out into, and that is other stages' forms; along a chain of stages
each is worked out once, in an order in which what it needs is there already.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Controlled, Element, Passive
from xcheck.impedance.couplings import Couplings
from xcheck.impedance.surroundings import Outside, PortImpedance, Surroundings
from xcheck.impedance.types import ClosedForm
from xcheck.notation import engineering
from xcheck.stages.types import Partition, Port, Stage
from xcheck.topologies.branches import known
from xcheck.topologies.drawing import Draughtsman
from xcheck.topologies.expression import Expression, number
from xcheck.topologies.forms import Core, core_of
from xcheck.topologies.placing import NotPlaced, PortView, closed_form, ideal
from xcheck.topologies.recognition import recognise
from xcheck.topologies.topology import Topology

DEFAULT_BAND = (10.0, 10e3)

TELLING = 1e-7
"""Relative change of a port's impedance, when a neighbour's is halved and doubled, below which it does not matter that
the neighbour's own value rests on a premise."""

LIMIT_OHM = 1e24
"""At DC, the limit of a small frequency, an impedance above this is infinite and one below its inverse zero."""


IDLE = 1e-3
"""Of the conductances of a transistor: with less transconductance it is a resistance between its terminals."""


def _is_gain_of_device(element: Element) -> bool:
    return isinstance(element, Controlled) and bool(element.origin.device)


@dataclass(frozen=True)
class Forms:
    """by_subject: the closed form of each port, or the reason why there is none; neighbours: ohm, shape (F,), what
    each port looks out into: inf for nothing, 0 for a source that holds it."""

    by_subject: dict[str, ClosedForm | str]
    neighbours: dict[str, Complex]


def closed_forms(partition: Partition, frequency: Real, band: tuple[float, float] = DEFAULT_BAND) -> Forms:
    """The closed forms on a frequency grid (Hz, shape (F,)); band: Hz, at whose middle topologies are told and single
    numbers are quoted."""
    if not partition.stages:
        return Forms({}, {})
    return _Evaluation(partition, frequency, band).run()


class _Evaluation:
    def __init__(self, partition: Partition, frequency: Real, band: tuple[float, float]) -> None:
        self.partition = partition
        self.frequency = frequency
        with np.errstate(divide="ignore"):
            self.at = int(np.argmin(np.abs(np.log(frequency / np.sqrt(band[0] * band[1])))))
        self.draughtsman = Draughtsman(partition)
        self.stages = {stage.name: stage for stage in partition.stages}
        self.topology = {s.name: recognise(self.draughtsman, s, band)[0] for s in partition.stages}
        self.outer = {s.name: self._outer(s) for s in partition.stages}
        self.couplings = Couplings(partition, self.outer)
        self.surroundings = Surroundings(partition, frequency, self.couplings)
        self.cores: dict[int, Core] = {}
        self.outsides: dict[str, Outside] = {}
        self.found: dict[str, ClosedForm | str] = {}
        self.started: set[str] = set()
        self.alone: dict[str, PortImpedance] = {}

    def run(self) -> Forms:
        ports = [port for stage in self.partition.stages for port in stage.ports]
        for port in ports:
            self._complete(port)
        by_subject = {port.subject: self.found[port.subject] for port in ports}
        shape = self.frequency.shape
        return Forms(by_subject, {port.subject: self._outside(port).impedance(shape) for port in ports})

    def _complete(self, port: Port) -> None:
        """Works out a port and what it needs, depth first without recursion: chains may be long."""
        waiting = [port]
        while waiting:
            current = waiting[-1]
            if current.subject not in self.started:
                self.started.add(current.subject)
                waiting += [q for q in self._needs(current) if q.subject not in self.started]
                continue
            waiting.pop()
            if current.subject not in self.found:
                self.found[current.subject] = self._form(current)

    def _needs(self, port: Port) -> list[Port]:
        """Ports of other stages whose forms this one's needs."""
        needed: list[Port] = []
        for other in self._others(port):
            needed += [q for q in self.surroundings.neighbours(other) if self._told_apart(q)]
        return needed

    def _others(self, port: Port) -> list[Port]:
        """Ports of a stage that bear on the impedance at one of them: its other inputs, and the output of an input."""
        return [
            p for p in self.outer[port.stage]
            if p.node != port.node and (p.side == "input" or port.side == "input")
            and not self.draughtsman.outside_at(self.stages[port.stage], port) & {t.element for t in p.inside}
        ]  # fmt: skip

    def _outer(self, stage: Stage) -> list[Port]:
        """The ports at which a stage meets the rest: its inputs but those behind a source's series element, and its
        amplifiers' outputs, but no nodes further on that were asked for."""
        outputs = {a.output for a in stage.amplifiers}
        inputs = self.draughtsman.outer_inputs(stage)
        return [p for p in stage.ports if (p.node in inputs if p.side == "input" else p.node in outputs)]

    def _told_apart(self, port: Port) -> bool:
        """Whether a port is asked for its full form by its neighbours: not where connections form a ring, or too many
        hang on one net."""
        return port.subject not in self.couplings.on_ring and not self.couplings.crowded(port.node)

    def _impedance(self, port: Port) -> PortImpedance:
        """What a port is to its neighbours. On a ring, or where working it out needs itself, it is the
        stage's alone, its other inputs at ground and its output open."""
        unfinished = port.subject in self.started and port.subject not in self.found
        if unfinished or not self._told_apart(port):
            if port.subject not in self.alone:
                form = self._form(port, alone=True)
                self.alone[port.subject] = PortImpedance(None if isinstance(form, str) else form.value, False)
            return self.alone[port.subject]
        if port.subject not in self.found:
            self._complete(port)
        form = self.found[port.subject]
        if isinstance(form, str):
            return PortImpedance(None, False)
        return PortImpedance(form.value, form.exact)

    def _outside(self, port: Port) -> Outside:
        if port.subject not in self.outsides:
            self.outsides[port.subject] = self.surroundings.outside(port, self._impedance)
        return self.outsides[port.subject]

    def _form(self, port: Port, alone: bool = False) -> ClosedForm | str:
        """alone: with sources without impedance at the other inputs and no load."""
        try:
            return self._worked_out(port, alone)
        except NotPlaced as refusal:
            return f"no closed form: {refusal}"

    def _worked_out(self, port: Port, alone: bool) -> ClosedForm:
        stage = self.stages[port.stage]
        topology, core = self._ready(stage)
        others = self._others(port)
        outsides = {p.node: Outside(held=p.side == "input") if alone else self._outside(p) for p in others}
        view = self._view(stage, port, others, outsides)
        form = closed_form(view, topology, core, self.at)
        premises = self._premises(stage, view, others, outsides)
        if form is not None and not premises:
            premises = [
                f"only nearly known at {node}: {', '.join(outside.doubtful)}"
                for node, outside in outsides.items()
                if outside.doubtful and self._matters(topology, core, view, node, form.value)
            ]
        return self._written(form, view, premises)

    def _ready(self, stage: Stage) -> tuple[Topology, Core]:
        """What a stage's closed forms need; raises NotPlaced where it is not there."""
        topology = self.topology[stage.name]
        if topology is None or not topology.has_form:
            raise NotPlaced(f"the topology is {'unclassified' if topology is None else topology.name}")
        loop = stage.amplifiers[0].open_loop
        if stage.amplifiers[0].kind == "current-feedback":
            raise NotPlaced("the closed forms are those of voltage feedback, and the amplifier feeds back a current")
        if loop.model is None:
            raise NotPlaced(loop.reason)
        shared = [name for name in stage.elements if len(self.surroundings.owners[name]) > 1]
        if shared:
            raise NotPlaced(f"`{shared[0]}` belongs to several stages")
        working = self._working(stage)
        if working:
            raise NotPlaced(f"`{working}` amplifies within its network")
        if id(loop.model) not in self.cores:
            self.cores[id(loop.model)] = core_of(loop.model.response(self.surroundings.frequency), self.at)
        return topology, self.cores[id(loop.model)]

    def _working(self, stage: Stage) -> str:
        """A transistor in the network of a stage that is more than the resistances between its ends, or nothing."""
        by_name = self.partition.circuit.by_name
        parts = [by_name[name] for name in stage.elements if by_name[name].origin.device]
        conductance: dict[str, float] = {}
        for part in parts:
            if isinstance(part, Passive) and part.kind == "r" and part.value:
                device = part.origin.device
                conductance[device] = max(conductance.get(device, 0.0), 1 / abs(part.value))
        for part in parts:
            gains = [abs(t.gain) for t in part.terms] if isinstance(part, Controlled) else []
            if max(gains, default=0.0) > IDLE * conductance.get(part.origin.device, 0.0):
                return part.origin.device
        return ""

    def _premises(
        self, stage: Stage, view: PortView, others: list[Port], outsides: Mapping[str, Outside]
    ) -> list[str]:  # fmt: skip
        """What is taken for granted though it is not quite so, in words. Raises NotPlaced for a source of unknown
        impedance: it can change everything behind it, and no number is better than a wrong one."""
        loop = stage.amplifiers[0].open_loop
        premises = [] if loop.exact else [loop.reason]
        by_name = self.partition.circuit.by_name
        parts = (by_name[name] for name in stage.elements)
        premises += [f"{e.origin.device} taken without its gain" for e in parts if _is_gain_of_device(e)]
        premises += [f"{node} taken as AC ground" for node in view.drawing.soft]
        if view.drawing.tied:
            premises.append("nodes that a voltage source ties together taken as one")
        ring = [p.name for p in self.outer[stage.name] if p.subject in self.couplings.on_ring]
        if ring or any(outside.coupled for outside in outsides.values()):
            premises.append(f"{', '.join(ring)} taken as independent, though other stages tie them together")
        for other in others:
            unknown = ", ".join(outsides[other.node].unknown)
            if unknown and other.side == "input":
                raise NotPlaced(f"the source at {other.node} is not known ({unknown})")
            if unknown:
                premises.append(f"not counted as load: {unknown}")
        return premises

    def _view(self, stage: Stage, port: Port, others: list[Port], outsides: Mapping[str, Outside]) -> PortView:
        left_out = self.draughtsman.outside_at(stage, port)
        drawing = self.draughtsman.draw(stage, self.surroundings.frequency, left_out)
        if isinstance(drawing, str):
            raise NotPlaced(drawing)
        inputs = {p.node: outsides[p.node] for p in others if p.side == "input"}
        load = next((outsides[p.node].branch for p in others if p.side == "output"), None)
        return PortView(
            drawing=drawing,
            node=port.node,
            side=port.side,
            held=frozenset(node for node, outside in inputs.items() if outside.held),
            stiff=frozenset(node for node, outside in inputs.items() if outside.held or outside.driven),
            sources={node: outside.branch for node, outside in inputs.items() if outside.branch is not None},
            load=load,
        )

    def _matters(self, topology: Topology, core: Core, view: PortView, node: str, value: Complex) -> bool:
        """Whether what a port of the stage looks out into, halved or doubled, can be told from this one."""
        for factor in (0.5, 2.0):
            sources, load = dict(view.sources), view.load
            if node in sources:
                sources[node] = known(sources[node].text, sources[node].admittance * factor)
            elif load is not None:
                load = known(load.text, load.admittance * factor)
            other = closed_form(replace(view, sources=sources, load=load), topology, core, self.at)
            if other is None or np.any(np.abs(other.value - value) > TELLING * np.abs(value)):
                return True
        return False

    def _written(self, form: Expression | None, view: PortView, premises: list[str]) -> ClosedForm:
        rule, rule_text = ideal(view)
        exact = not premises
        if form is None:
            none = view.side == "input"
            value = np.full(self.frequency.shape, np.inf if none else 0.0, dtype=np.complex128)
            text = "infinite" if none else "0 Ohm"
            return ClosedForm(text, text, value, self._at_dc(rule), rule_text, exact, tuple(premises))
        value = self._at_dc(form.value)
        legend = ", ".join(f"{symbol} = {meaning}" for symbol, meaning in form.legend)
        hertz = float(self.frequency[self.at])
        where = engineering(hertz, "Hz") if hertz else "DC"
        return ClosedForm(
            formula=f"{form.text}; {legend}" if legend else form.text,
            numbers=f"{form.figures} = {number(complex(value[self.at]))} at {where}",
            value=value,
            rule_of_thumb=self._at_dc(rule),
            rule_text=rule_text,
            exact=exact,
            assumptions=tuple(dict.fromkeys(premises)),
        )

    def _at_dc(self, value: Complex) -> Complex:
        """With the limit at DC taken."""
        still = self.frequency == 0
        if not np.any(still):
            return value
        size = np.abs(value)
        limit = np.where(size > LIMIT_OHM, np.inf, np.where(size < 1 / LIMIT_OHM, 0.0, value))
        return np.where(still, limit, value).astype(np.complex128)
