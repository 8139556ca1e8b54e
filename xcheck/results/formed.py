"""Impedances that the vectors of an AC plot support, by the definition of a port's cut; else why there is none.

What is formed here: the input impedance at a node that the deck's only AC voltage source drives alone. The saved
current of the source is then the current into the stage's side of the cut, and nothing has to be assumed.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import GROUND, Circuit, Source
from xcheck.results.rawfile import Plot
from xcheck.stages.types import Partition, Port


@dataclass(frozen=True)
class Formed:
    """frequency: Hz, shape (F,), ascending and above zero; values: ohm by port subject, shape (F,);
    not_formed: why, by the subject of every other port."""

    frequency: Real
    values: dict[str, Complex] = field(default_factory=dict)
    not_formed: dict[str, str] = field(default_factory=dict)


def impedances(plots: Sequence[Plot], circuit: Circuit, partition: Partition) -> Formed:
    """What the first AC plot says of each port. Every port's subject is in `values` or in `not_formed`."""
    ports = [port for stage in partition.stages for port in stage.ports]
    plot = next((p for p in plots if p.is_complex and p.variables and p.variables[0].kind == "frequency"), None)
    if plot is None:
        return Formed(np.empty(0), {}, {p.subject: "not formed: the file holds no AC plot" for p in ports})
    hertz = plot.data[0].real
    kept = np.unique(hertz, return_index=True)[1]
    kept = kept[np.isfinite(hertz[kept]) & (hertz[kept] > 0)]
    vectors = {v.name: plot.data[k, kept].astype(np.complex128) for k, v in enumerate(plot.variables)}
    formed = Formed(hertz[kept].astype(np.float64))
    for port in ports:
        answer = _formed(port, circuit, vectors)
        if isinstance(answer, str):
            formed.not_formed[port.subject] = f"not formed: {answer}"
        else:
            formed.values[port.subject] = answer
    return formed


def _formed(port: Port, circuit: Circuit, vectors: dict[str, Complex]) -> Complex | str:
    if port.side == "output":
        return "an output impedance needs a test current at the output, and its load's current"
    alive = [e for e in circuit.elements if isinstance(e, Source) and e.ac is not None and e.ac != 0]
    if len(alive) != 1:
        return f"the deck has {len(alive)} sources with an AC magnitude, and one alone must be alive"
    source = alive[0]
    if source.kind != "v" or port.node not in source.nodes or GROUND not in source.nodes:
        return f"`{source.name}` is no AC voltage source from `{port.node}` to ground"
    inside = {terminal.element for terminal in port.inside}
    others = sorted(e.name for e in circuit.at.get(port.node, ()) if e.name not in inside and e is not source)
    if others:
        return f"the current of `{source.name}` also feeds {', '.join(others)}"
    voltage = vectors.get(f"v({port.node})", vectors.get(port.node))
    current = vectors.get(f"i({source.name})", vectors.get(f"{source.name}#branch"))
    if voltage is None or current is None:
        return f"v({port.node}) and i({source.name}) are not both in the file"
    if not bool(np.all(np.isfinite(voltage) & np.isfinite(current) & (current != 0))):
        return f"i({source.name}) is zero or no number somewhere"
    # a source's current runs from its first node through it: into the stage it is the negative of that
    into_stage = -current if source.nodes[0] == port.node else current
    impedance: Complex = voltage / into_stage
    return impedance
