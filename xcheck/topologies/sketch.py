"""A one-amplifier stage drawn in its places: what leads from each input of the amplifier where."""

from dataclasses import dataclass

import numpy as np

from xcheck.circuit.elements import Coupling, Device, Passive, Source
from xcheck.stages.types import Partition, Port, Stage
from xcheck.topologies.branches import Part
from xcheck.topologies.network import GROUND, Joined, Network, Pair, mesh

CAPACITIVE = 3.0
"""A branch counts as a capacitor where its reactance is more than three times its resistance at mid band; for R
parallel to C that is |Zc| < R/3, for R in series with C it is |Zc| > 3 R."""


LOADING = 0.05
"""Share of gain below which a star's branch to ground counts as load inside the loop."""


@dataclass(frozen=True)
class Sketch:
    """Places of a stage. Signal and reference nodes that reach the inverting (n) and non-inverting (p) input, each
    with the branch between; feedback: what lies between output and inverting input; shorted: the output is the
    inverting input; positive: what lies between output and non-inverting input; ground_n, ground_p: to ground.
    current_n: the inverting input is driven by a current. why_not: why the stage could not be drawn, '' where
    it was."""

    signal_n: dict[str, Joined]
    signal_p: dict[str, Joined]
    reference_n: dict[str, Joined]
    reference_p: dict[str, Joined]
    feedback: Joined | None
    positive: Joined | None
    shorted: bool
    ground_n: Joined | None
    ground_p: Joined | None
    current_n: bool
    direct_p: str
    why_not: str = ""
    bypass: bool = False

    @property
    def closed(self) -> bool:
        """Whether there is negative feedback."""
        return self.shorted or self.feedback is not None

    @property
    def seen(self) -> str:
        """What was seen, in words."""
        words = []
        if self.shorted:
            words.append("output tied to the inverting input")
        elif self.feedback is not None:
            words.append(f"feedback {self.feedback.text} to the inverting input")
        for where, place in (
            (self.signal_n, "inverting"), (self.signal_p, "non-inverting"),
            (self.reference_n, "inverting"), (self.reference_p, "non-inverting"),
        ):  # fmt: skip
            for node, joined in where.items():
                words.append(f"{node} through {joined.text or 'nothing'} to the {place} input")
        if self.current_n:
            words.append("a current into the inverting input")
        if self.ground_n is not None:
            words.append(f"{self.ground_n.text} from the inverting input to ground")
        return "; ".join(words)


def is_capacitive(joined: Joined) -> bool:
    """Whether a place behaves as a capacitor at the frequency it was drawn at."""
    z = complex(1.0 / joined.admittance[0])
    return -z.imag > CAPACITIVE * abs(z.real)


def still_nodes(partition: Partition, ports: tuple[Port, ...]) -> set[str]:
    """Nodes that count as ground in a drawing: at AC ground or references, and no input of the stage."""
    inputs = {p.node for p in ports if p.side == "input"}
    still = set(partition.ac_ground) | set(partition.references)
    return (still - inputs) | {GROUND}


def network_of(partition: Partition, stage: Stage, left_out: frozenset[str] = frozenset()) -> Network | str:
    """The stage's passive network with still nodes as ground, or why it cannot be drawn."""
    ground = still_nodes(partition, stage.ports)
    network = Network()
    coupled = {n for e in partition.circuit.elements if isinstance(e, Coupling) for n in e.inductors}
    for name in stage.elements:
        if name in left_out:
            continue
        element = partition.circuit.by_name[name]
        if isinstance(element, Device):
            return f"`{name}` is a {element.reason}"
        if isinstance(element, Source):
            return f"source `{name}` stands inside the stage"
        if name in coupled:
            return f"`{name}` is magnetically coupled"
        if isinstance(element, Passive):
            a, b = (GROUND if n in ground else n for n in element.nodes)
            network.add(Part(name, element.kind, element.value), a, b)
    return network


def sketch(partition: Partition, stage: Stage, band: tuple[float, float]) -> Sketch:
    """The places of a stage with one amplifier, judged at mid band (the geometric mean, Hz)."""
    if len(stage.amplifiers) != 1:
        return _undrawn(f"{len(stage.amplifiers)} amplifiers in common loops")
    network = network_of(partition, stage)
    if isinstance(network, str):
        return _undrawn(network)
    amplifier = stage.amplifiers[0]
    ground = still_nodes(partition, stage.ports)
    n, p, o = (GROUND if x in ground else x for x in (amplifier.inverting, amplifier.non_inverting, amplifier.output))
    inputs = _outer_inputs(partition, stage)
    terminals = list(dict.fromkeys([n, p, o, GROUND, *inputs]))
    middle = np.array([np.sqrt(band[0] * band[1])])
    links = mesh(network.reduced(terminals), terminals, middle, {})
    return _draw(links, inputs, n, p, o)


def _undrawn(why: str) -> Sketch:
    return Sketch({}, {}, {}, {}, None, None, False, None, None, False, "", why)


def _outer_inputs(partition: Partition, stage: Stage) -> dict[str, Port]:
    """Input ports by node, those left out that lie behind a source's series element: an element of the stage that
    the port itself counts as outside."""
    found: dict[str, Port] = {}
    touching: dict[str, set[str]] = {}
    for name in stage.elements:
        for node in partition.circuit.by_name[name].nodes:
            touching.setdefault(node, set()).add(name)
    for port in stage.ports:
        if port.side == "input" and touching.get(port.node, set()) <= {t.element for t in port.inside}:
            found[port.node] = port
    return found


def _draw(links: dict[Pair, Joined], inputs: dict[str, Port], n: str, p: str, o: str) -> Sketch:
    def between(a: str, b: str) -> Joined | None:
        return links.get(frozenset((a, b))) if a != b else None

    quiet = p == GROUND

    nothing = Joined(np.full(1, np.inf, dtype=np.complex128), "", ())
    reach: dict[tuple[str, str], dict[str, Joined]] = {
        ("signal", "n"): {}, ("signal", "p"): {}, ("reference", "n"): {}, ("reference", "p"): {},
    }  # fmt: skip
    for node, port in inputs.items():
        for pin, name in ((n, "n"), (p, "p")):
            if pin == GROUND:
                continue
            joined = nothing if node == pin else between(node, pin)
            if joined is not None and not (node == n and port.current_driven):
                reach[port.kind, name][node] = joined
    current = any(node == n and port.current_driven for node, port in inputs.items())
    return Sketch(
        signal_n=reach["signal", "n"],
        signal_p=reach["signal", "p"],
        reference_n=reach["reference", "n"],
        reference_p=reach["reference", "p"],
        feedback=between(n, o),
        positive=None if quiet else between(p, o),
        shorted=n == o,
        ground_n=_gain_leg(between(n, GROUND), between(n, o)),
        ground_p=between(p, GROUND),
        current_n=current,
        direct_p=p if p in inputs else "",
        bypass=any(between(node, o) is not None for node in inputs if node not in (n, p)),
    )


def _gain_leg(ground: Joined | None, feedback: Joined | None) -> Joined | None:
    """What leads from the inverting input to ground; a load that hangs inside the feedback path draws a little too
    (a star of isolation resistor, feedback and load), which is no gain leg."""
    if ground is None or feedback is None or not ground.star:
        return ground
    return ground if abs(complex(ground.admittance[0] / feedback.admittance[0])) > LOADING else None
