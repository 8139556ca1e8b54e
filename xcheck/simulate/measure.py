"""Measuring every port of a deck with ngspice."""

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Circuit, Device
from xcheck.deck.cards import Card, Deck
from xcheck.simulate.cuts import Cut, CutWriter, NoCut, Taken, Terminals
from xcheck.simulate.engine import find_engine
from xcheck.simulate.names import circuit_name
from xcheck.simulate.process import WORKER, WorkerEnded, answers_of
from xcheck.simulate.sanitize import Harmless, harmless
from xcheck.simulate.size import MOST_ELEMENTS, expanded_size
from xcheck.simulate.sweeps import Sweeps, sweeps_of
from xcheck.simulate.types import MISSING_MODEL, EngineInfo, Simulation
from xcheck.simulate.written import blocks_of, deck_lines, reviewed_block, unused_mark
from xcheck.stages.types import Partition, Port, Terminal

TIME_LIMIT = 120.0
"""Seconds of wall time for all ports of a deck."""
MEMORY_LIMIT = 2_000_000_000
"""Bytes of address space of the worker, ngspice's code and Python included."""
SAME_POINT = 1e-9
"""Relative distance of ngspice's frequency from the one asked for."""
LEAST_SHARE = 1e-10
"""The least part of the test signal that may be left to a port: what of 1 V drops across it, what of 1 A flows into
it. It is known to about 1e-16 of the whole, so that of a smaller part less than six figures would be right."""
LEAST_CURRENT = 1e-18
"""Ampere, with 1 V in series: less is no current but rounding."""
CODE_MODELS_MISSING = "ngspice's code models are missing; on Debian and Ubuntu the package `ngspice` brings them"


def measure(
    deck: Deck,
    circuit: Circuit,
    partition: Partition,
    frequency: Real,
    *,
    time_limit: float = TIME_LIMIT,
    memory_limit: int = MEMORY_LIMIT,
    progress: Callable[[int, int], None] | None = None,
    engine: EngineInfo | None = None,
    command: Sequence[str] = WORKER,
) -> Simulation:
    """The impedance of each port (ohm, shape (F,) on `frequency`, Hz, ascending), in the deck as it stands.

    input: 1 V in series in the cut, Z = V(stage side) / I(into the stage); outputs and current-driven inputs: 1 A
    into the stage's side, Z = V / (1 A - I(cut, into the outside)). progress is told the ports done and all ports.
    engine and command: which ngspice, and what is run for it. What fails is in the result; nothing is raised.
    """
    engine = find_engine() if engine is None else engine
    ports = {port.subject: port for stage in partition.stages for port in stage.ports}
    sane = harmless(deck.cards)
    fault = engine.reason if not engine.available else why_not(sane, circuit)
    missing = "" if fault else undefined_in(circuit)
    if fault or missing:
        step = MISSING_MODEL if missing else "load"
        why = fault or missing
        return Simulation(
            engine, unmeasured=dict.fromkeys(ports, why), failure=why, failed_step=step, left_out=sane.left_out
        )
    written = {subject: as_written(port, circuit, partition.circuit) for subject, port in ports.items()}
    plan = planned(sane.cards, circuit, partition, written)
    sweeps = sweeps_of(frequency)
    first = float(frequency[0])
    job = {
        "task": "measure", "loads": plan.loads, "sweeps": sweeps.commands, "glance": f"ac lin 1 {first!r} {first!r}",
        "memory_bytes": memory_limit, "cpu_seconds": math.ceil(time_limit) + 1,
    }  # fmt: skip
    found = _Found(plan, len(plan.cuts), progress)
    try:
        for answer in answers_of(job, engine.library, time_limit, command):
            found.take(answer)
    except WorkerEnded as ended:
        found.failure, found.failed_step = str(ended), ended.step
    return found.simulation(engine, frequency, sweeps, ports, sane.left_out)


def as_written(port: Port, circuit: Circuit, linear: Circuit) -> Port:
    """A port whose side of the stage is made of elements of the deck: for what stands for a device at its operating
    point, the device's own terminals on the port's node."""
    inside: dict[Terminal, None] = {}
    for terminal in port.inside:
        element = linear.by_name.get(terminal.element)
        device = circuit.by_name.get(element.origin.device) if element is not None else None
        if device is None:
            original = circuit.by_name.get(terminal.element)
            if original is None:
                inside.update((t, None) for t in _of_the_model(terminal.element, port.node, circuit))
                continue
            known = isinstance(original, Device) and terminal.index < 0 and port.node not in original.sensing
            if not known:  # a behavioural resistor senses its own ends once it is linear
                inside[terminal] = None
            continue
        inside.update((Terminal(device.name, k), None) for k, node in enumerate(device.nodes) if node == port.node)
        if port.node in getattr(device, "sensing", ()):
            inside[Terminal(device.name, -1)] = None
    return replace(port, inside=tuple(inside))


def _of_the_model(stand_in: str, node: str, circuit: Circuit) -> Iterator[Terminal]:
    """The terminals on a node of the model that a stand-in's element is there for."""
    amplifier = stand_in.rpartition(".")[0]
    for element in circuit.at.get(node, ()):
        if element.name == amplifier or amplifier in element.origin.path:
            yield from (Terminal(element.name, k) for k, end in enumerate(element.nodes) if end == node)
            if node in getattr(element, "sensing", ()):
                yield Terminal(element.name, -1)


def undefined_in(circuit: Circuit) -> str:
    """Why a deck with instances of undefined subcircuits is not handed to ngspice, '' where there are none."""
    names = dict.fromkeys(e.model for e in circuit.elements if isinstance(e, Device) and e.reason == "undefined")
    listed = ", ".join(f"`{name}`" for name in list(names)[:3])
    return f"the deck does not define {listed}, so ngspice cannot run it" if names else ""


def why_not(sane: Harmless, circuit: Circuit) -> str:
    """Why a deck is not handed to ngspice at all, '' where it is."""
    used = {id(e.origin.card) for e in circuit.elements}
    missing = [card for card in sane.refused if id(card) in used]
    if missing:
        named = ", ".join(f"`{c.fields[0].text}` ({c.place()})" for c in missing[:3])
        return f"{named} may not be handed to ngspice, and without it the circuit would be another one"
    size = expanded_size(blocks_of(sane.cards))
    if size > MOST_ELEMENTS:
        count = "endless" if math.isinf(size) else f"{size:.0f} elements"
        return f"the deck is too large for a simulation: expanded it is {count}, {MOST_ELEMENTS} may be"
    return ""


@dataclass
class Plan:
    """What the worker gets. loads: lines and ports; cuts: by port subject; refused: why a port has none; mark: begins
    the names of all that was added; root: of the instance that stands for the reviewed block, '' without one."""

    loads: list[dict[str, Any]]
    cuts: dict[str, Cut]
    refused: dict[str, str]
    mark: str
    root: str = ""


def planned(cards: tuple[Card, ...], circuit: Circuit, partition: Partition, ports: Mapping[str, Port]) -> Plan:
    """The deck with cuts. One load serves all ports, unless two of them would move the same terminals."""
    top = blocks_of(cards)
    block = reviewed_block(circuit, top)
    mark = unused_mark(cards)
    plan = Plan([], {}, {}, mark, f"x{mark}" if block is not None else "")
    terminals = Terminals(circuit)
    writers: list[tuple[CutWriter, list[Port]]] = []
    for port in ports.values():
        try:
            plan.cuts[port.subject] = _placed(port, writers, terminals, plan)
        except NoCut as why:
            plan.refused[port.subject] = f"no cut could be written into the deck: {why}"
    for writer, served in writers or [(CutWriter(terminals, mark, plan.root), [])]:
        try:
            lines = deck_lines(top, block, writer, circuit, partition)
        except NoCut as why:
            for port in served:
                del plan.cuts[port.subject]
                plan.refused[port.subject] = f"no cut could be written into the deck: {why}"
            continue
        plan.loads.append({"lines": lines, "ports": [_port_job(port, plan.cuts[port.subject]) for port in served]})
    return plan


def _placed(port: Port, writers: list[tuple[CutWriter, list[Port]]], terminals: Terminals, plan: Plan) -> Cut:
    for writer, served in writers:
        try:
            cut = writer.cut(port)
        except Taken:
            continue
        served.append(port)
        return cut
    writer = CutWriter(terminals, plan.mark, plan.root)
    cut = writer.cut(port)
    writers.append((writer, [port]))
    return cut


def _by_voltage(port: Port) -> bool:
    return port.side == "input" and not port.current_driven


def _port_job(port: Port, cut: Cut) -> dict[str, str]:
    return {"subject": port.subject, "node": cut.node, "source": cut.source, "test": "v" if _by_voltage(port) else "i"}


def impedance(port: Port, voltage: Complex, current: Complex) -> Complex | str:
    """A port's impedance from the voltage on the stage's side and the cut's current into the stage, with a test
    signal of 1 V or 1 A; or why there is none."""
    if not np.all(np.isfinite(voltage) & np.isfinite(current)):
        return "ngspice gave values that are no numbers"
    if _by_voltage(port):
        if np.any(np.abs(current) < LEAST_CURRENT):
            return "no current flows into the port: its impedance is infinite, or nothing drives it"
        if np.any((voltage != 0) & (np.abs(voltage) < LEAST_SHARE)):
            return "the outside takes all of the test voltage: the port's impedance is beyond measure"
        return voltage / current
    # the cut's current counts from the outside into the stage; 1 A - I(outside) is 1 A + that
    share = 1.0 + current
    if np.any(np.abs(share) < LEAST_SHARE):
        return "the outside takes all of the test current: the port's impedance is beyond measure"
    return voltage / share


@dataclass
class _Found:
    """Collects the worker's answers."""

    plan: Plan
    total: int
    progress: Callable[[int, int], None] | None
    raw: dict[str, dict[str, Complex]] = field(default_factory=dict)
    refused: dict[str, str] = field(default_factory=dict)
    volts: dict[str, float] = field(default_factory=dict)
    amperes: dict[str, float] = field(default_factory=dict)
    messages: list[str] = field(default_factory=list)
    failure: str = ""
    failed_step: str = ""

    def take(self, answer: Mapping[str, Any]) -> None:
        """One answer."""
        match answer["event"]:
            case "operating point":
                self._operating_point(answer["values"])
            case "port":
                parts = {k: np.array(answer[k], dtype=np.float64) for k in ("frequency", "voltage", "current")}
                self.raw[answer["subject"]] = {k: pairs[:, 0] + 1j * pairs[:, 1] for k, pairs in parts.items()}
            case "unmeasured":
                self.refused[answer["subject"]] = answer["reason"]
            case "failed":
                self.failure, self.failed_step = answer["words"], answer["step"]
            case "done":
                self.messages = answer["messages"]
        if self.progress is not None and answer["event"] in ("port", "unmeasured"):
            self.progress(len(self.raw) + len(self.refused), self.total)

    def _operating_point(self, values: Mapping[str, float]) -> None:
        for name, value in values.items():
            base, hash_, rest = name.partition("#")
            if name.startswith("@") or self.plan.mark in base.removeprefix(f"{self.plan.root}.").split(".")[-1]:
                continue
            if not hash_:
                self.volts[self._flat(base)] = value
            elif rest == "branch" and "$" not in base:
                self.amperes[self._flat(circuit_name(base))] = value

    def _flat(self, name: str) -> str:
        return name.removeprefix(f"{self.plan.root}.")

    def simulation(
        self, engine: EngineInfo, frequency: Real, sweeps: Sweeps, ports: Mapping[str, Port], left_out: tuple[str, ...]
    ) -> Simulation:
        """All that was found."""
        values: dict[str, Complex] = {}
        unmeasured = dict(self.plan.refused)
        if self.failure and self.failed_step == "load" and not engine.code_models and _speaks_of_models(self.failure):
            self.failure += f" / {CODE_MODELS_MISSING}"
        for subject in self.plan.cuts:
            value = self._value(subject, ports[subject], frequency, sweeps)
            if isinstance(value, str):
                unmeasured[subject] = value
            else:
                values[subject] = value
        return Simulation(
            engine, values, unmeasured, self.volts, self.amperes, self.failure, self.failed_step,
            tuple(self.messages), left_out,
        )  # fmt: skip

    def _value(self, subject: str, port: Port, frequency: Real, sweeps: Sweeps) -> Complex | str:
        raw = self.raw.get(subject)
        if raw is None:
            return self.refused.get(subject) or self.failure or "ngspice gave no result"
        if any(len(part) != len(frequency) for part in raw.values()):
            return "ngspice gave another number of points than were asked for"
        voltage, current, seen = (raw[k][sweeps.order] for k in ("voltage", "current", "frequency"))
        if np.any(np.abs(seen - frequency) > SAME_POINT * np.abs(frequency)):
            return "ngspice gave points at other frequencies than were asked for"
        return impedance(port, voltage, current)


def _speaks_of_models(words: str) -> bool:
    return "MIF-ERROR" in words or "unable to find definition of model" in words.lower()
