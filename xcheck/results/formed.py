"""Impedances that the vectors of an AC plot support, by the definition of a port's cut; else why there is none.

By Kirchhoff's current law at a port's node the current into the stage's side is what all outside elements there give.
Each of these follows from saved vectors: a source's own current, an R, L or C from the voltages at its ends. The ratio
of the node's voltage to that current is the stage's impedance where the one source that is alive is outside and reaches
the stage through this port alone.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import GROUND, Circuit, Controlled, Coupling, Device, Element, Passive, Source
from xcheck.results.rawfile import Plot
from xcheck.stages.types import Partition, Port, Stage

LEAST_CURRENT = 1e-15
"""Of the largest current at the node: with less, the difference that goes into the stage is rounding."""

ZERO_OHM = 1e-3
"""What a resistor written as 0 is to ngspice."""

Vectors = Mapping[str, Complex]


@dataclass(frozen=True)
class Formed:
    """frequency: Hz, shape (F,), ascending and above zero; values: ohm by port subject, shape (F,);
    not_formed: why, by the subject of every other port; doubts: what speaks for another deck behind the file."""

    frequency: Real
    values: dict[str, Complex] = field(default_factory=dict)
    not_formed: dict[str, str] = field(default_factory=dict)
    doubts: tuple[str, ...] = ()


class NotFormed(Exception):
    """Why a port's impedance does not follow from the vectors."""


def impedances(plots: Sequence[Plot], circuit: Circuit, partition: Partition) -> Formed:
    """What the first AC plot says of each port. Every port's subject is in `values` or in `not_formed`."""
    ports = [(stage, port) for stage in partition.stages for port in stage.ports]
    plot = next((p for p in plots if p.is_complex and p.variables and p.variables[0].kind == "frequency"), None)
    if plot is None:
        return Formed(np.empty(0), {}, {p.subject: "not formed: the file holds no AC plot" for _, p in ports})
    hertz = plot.data[0].real
    kept = np.unique(hertz, return_index=True)[1]
    kept = kept[np.isfinite(hertz[kept]) & (hertz[kept] > 0)]
    vectors = {v.name: plot.data[k, kept].astype(np.complex128) for k, v in enumerate(plot.variables)}
    formed = Formed(hertz[kept].astype(np.float64), doubts=_doubts(plot, circuit))
    for stage, port in ports:
        try:
            formed.values[port.subject] = _Forming(circuit, partition, vectors, formed.frequency).value(stage, port)
        except NotFormed as why:
            formed.not_formed[port.subject] = f"not formed: {why}"
    return formed


def _doubts(plot: Plot, circuit: Circuit) -> tuple[str, ...]:
    """What of a plot does not fit the deck. ngspice writes titles in lower case."""
    found = []
    title, own = plot.title.strip().lower(), circuit.deck.title.strip().lower()
    if title and own and title.lstrip("* ") != own.lstrip("* "):
        found.append(f"its title is `{plot.title.strip()[:60]}`, the deck's is `{circuit.deck.title.strip()[:60]}`")
    nodes = set(circuit.nodes)
    names = [v.name for v in plot.variables[1:]]
    strange = [n for n in names if n.startswith("v(") and n[2:-1] not in nodes and "#" not in n and "," not in n]
    sources = {e.name for e in circuit.elements}
    strange += [n for n in names if n.startswith("i(") and _flat(n[2:-1]) not in sources and "#" not in n]
    if strange:
        more = f" and {len(strange) - 3} more" if len(strange) > 3 else ""
        found.append(f"it holds {', '.join(strange[:3])}{more}, which the deck has not")
    return tuple(found)


def _flat(name: str) -> str:
    """The flat name of a source that ngspice names: `v.x1.v3` for `x1.v3`."""
    head, dot, rest = name.partition(".")
    return rest if dot and len(head) == 1 else name


class _Forming:
    def __init__(self, circuit: Circuit, partition: Partition, vectors: Vectors, frequency: Real) -> None:
        self.circuit = circuit
        self.partition = partition
        self.vectors = vectors
        self.frequency = frequency

    def value(self, stage: Stage, port: Port) -> Complex:
        """The impedance at a port, ohm, shape (F,). Raises NotFormed."""
        source = self._alive()
        inside = {t.element for t in port.inside}
        outside = [
            e for e in self.circuit.at.get(port.node, ()) if e.name not in inside and not self._is_part(e, inside)
        ]
        self._reaches_alone(source, stage, port)
        voltage = self._volt(port.node)
        into: Complex = np.zeros_like(voltage)
        largest: Real = np.zeros(len(self.frequency))
        for element in outside:
            current = self._towards(element, port.node)
            into = into + current
            largest = np.maximum(largest, np.abs(current))
        if not bool(np.all(np.isfinite(voltage) & np.isfinite(into))):
            raise NotFormed("some saved values are no numbers")
        if not bool(np.all(np.abs(into) > LEAST_CURRENT * largest)) or not largest.any():
            raise NotFormed("no current flows into the stage's side, or it is lost beside what flows past it")
        impedance: Complex = voltage / into
        return impedance

    def _is_part(self, element: Element, inside: set[str]) -> bool:
        """Whether an element of the deck is there as parts of itself on the stage's side."""
        return any(name.partition(":")[0] == element.name for name in inside)

    def _alive(self) -> Source:
        alive = [e for e in self.circuit.elements if isinstance(e, Source) and e.ac is not None and e.ac != 0]
        if len(alive) != 1:
            raise NotFormed(f"the deck has {len(alive)} sources with an AC magnitude, and one alone must be alive")
        return alive[0]

    def _reaches_alone(self, source: Source, stage: Stage, port: Port) -> None:
        """Raises NotFormed where the source reaches the stage elsewhere than at the port, or not at all."""
        own = {*stage.elements, *(name for a in stage.amplifiers for name in a.elements)}
        own |= {name.partition(":")[0] for name in own}
        inside = {t.element.partition(":")[0] for t in port.inside}
        # a source's own series element is the stage's at the port before it and outside at the one behind it
        series = {e.name for e in self.circuit.at.get(port.node, ()) if e.name in own and e.name not in inside}
        own -= series
        others = {
            p.node: p.name for p in stage.ports if p.node != port.node and not {t.element for t in p.inside} <= series
        }
        still = ((self.partition.ac_ground.keys() | set(self.partition.references)) - set(source.nodes)) | {GROUND}
        if source.name in inside:
            raise NotFormed(f"`{source.name}` is on the stage's own side")
        seen = {n for n in source.nodes if n != GROUND}
        waiting = list(seen)
        while waiting:
            node = waiting.pop()
            if node in others:
                raise NotFormed(f"`{source.name}` reaches the stage at {others[node]} too")
            for element in self.circuit.at.get(node, ()):
                if element.name in own or isinstance(element, Coupling):
                    continue
                sensed = element.sensing if isinstance(element, (Controlled, Device)) else ()
                for far in (*element.nodes, *sensed):
                    if far not in seen and far not in still:
                        seen.add(far)
                        waiting.append(far)
        if port.node not in seen:
            raise NotFormed(f"`{source.name}`, the one source that is alive, does not drive it")

    def _volt(self, node: str) -> Complex:
        if node == GROUND:
            return np.zeros(len(self.frequency), dtype=np.complex128)
        found = self.vectors.get(f"v({node})", self.vectors.get(node))
        if found is None:
            if node in self.partition.ac_ground and not any(
                isinstance(e, Source) and e.ac for e in self.circuit.at.get(node, ())
            ):
                return np.zeros(len(self.frequency), dtype=np.complex128)
            raise NotFormed(f"v({node}) is not in the file")
        return found

    def _branch(self, name: str, letter: str) -> Complex | None:
        around, _, own = name.rpartition(".")
        engine = f"{letter}.{around}.{own}" if around else own
        keys = (f"i({engine})", f"{engine}#branch", f"i({name})", f"{name}#branch")
        return next((self.vectors[key] for key in keys if key in self.vectors), None)

    def _towards(self, element: Element, node: str) -> Complex:
        """The current (A) that an outside element gives to a node."""
        sign = 1.0 if element.nodes[:1] == (node,) else -1.0
        if len(set(element.nodes)) == 1:
            return np.zeros(len(self.frequency), dtype=np.complex128)
        match element:
            case Source(kind="i"):
                return np.full(len(self.frequency), -sign * (element.ac or 0.0), dtype=np.complex128)
            case Source() | Controlled(kind="e" | "h"):
                current = self._branch(element.name, element.name.rpartition(".")[2][0])
                if current is None:
                    raise NotFormed(f"the current of `{element.name}` is not in the file")
                # a source's current runs from its first node through it
                return -sign * current
            case Passive() if element.name not in self.circuit.coupled:
                far = element.nodes[1] if element.nodes[0] == node else element.nodes[0]
                s = 2j * np.pi * self.frequency
                across = self._volt(far) - self._volt(node)
                if element.kind == "r":
                    return across / (element.value or ZERO_OHM)
                by_frequency = s * element.value if element.kind == "c" else 1.0 / (s * element.value)
                return np.asarray(across * by_frequency, dtype=np.complex128)
            case Controlled(kind="g") if all(not t.source for t in element.terms):
                driven: Complex = np.zeros(len(self.frequency), dtype=np.complex128)
                for term in element.terms if node in element.nodes else ():
                    driven = driven + term.gain * (self._volt(term.positive) - self._volt(term.negative))
                return np.asarray(-sign * driven)
            case Controlled() if node not in element.nodes:
                return np.zeros(len(self.frequency), dtype=np.complex128)
        raise NotFormed(f"the current of `{element.name}` does not follow from the file")
