"""What recognition looks at: which places of a stage are there, and what fills them at the middle of the band."""

from dataclasses import dataclass, field, replace

import numpy as np

from xcheck.circuit.elements import Circuit, Controlled, Source
from xcheck.stages.types import Port, Stage
from xcheck.topologies.branches import Branch, known
from xcheck.topologies.drawing import Draughtsman, Drawing
from xcheck.topologies.network import GROUND, Links

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
    current_n: the inverting input is driven by a current; direct_p: the non-inverting input is itself an input;
    transconductance: the amplifier's output is a current.
    why_not: why the stage could not be drawn or named, '' where nothing speaks against it."""

    signal_n: dict[str, Branch] = field(default_factory=dict)
    signal_p: dict[str, Branch] = field(default_factory=dict)
    reference_n: dict[str, Branch] = field(default_factory=dict)
    reference_p: dict[str, Branch] = field(default_factory=dict)
    feedback: Branch | None = None
    positive: Branch | None = None
    shorted: bool = False
    ground_n: Branch | None = None
    ground_p: Branch | None = None
    current_n: bool = False
    direct_p: bool = False
    transconductance: bool = False
    why_not: str = ""

    @property
    def closed(self) -> bool:
        """Whether there is negative feedback and no positive one."""
        return (self.shorted or self.feedback is not None) and self.positive is None

    @property
    def seen(self) -> str:
        """What was seen, in words."""
        words = []
        if self.shorted:
            words.append("output tied to the inverting input")
        elif self.feedback is not None:
            words.append(f"feedback {self.feedback.meaning} to the inverting input")
        if self.positive is not None:
            words.append(f"{self.positive.meaning} from the output to the non-inverting input")
        for where, place in (
            (self.signal_n, "inverting"), (self.signal_p, "non-inverting"),
            (self.reference_n, "inverting"), (self.reference_p, "non-inverting"),
        ):  # fmt: skip
            words += [f"{node} {_by_way_of(branch)} the {place} input" for node, branch in where.items()]
        if self.current_n:
            words.append("a current into the inverting input")
        if self.ground_n is not None:
            words.append(f"{self.ground_n.meaning} from the inverting input to ground")
        if self.ground_p is not None:
            words.append(f"{self.ground_p.meaning} from the non-inverting input to ground")
        return "; ".join(words)


def is_capacitive(branch: Branch) -> bool:
    """Whether a place behaves as a capacitor at mid band."""
    z = complex(branch.impedance[0])
    return -z.imag > CAPACITIVE * abs(z.real)


def sketch(draughtsman: Draughtsman, stage: Stage, band: tuple[float, float]) -> Sketch:
    """The places of a stage, judged at mid band (the geometric mean, Hz). What is not linear is left out where the
    rest closes the loop: protection, clamps."""
    middle = np.array([np.sqrt(band[0] * band[1])])
    drawing = draughtsman.draw(stage, middle)
    if isinstance(drawing, str):
        devices = draughtsman.devices(stage)
        rest = draughtsman.draw(stage, middle, devices) if devices else drawing
        drawn = _sketch(draughtsman, rest, stage)
        return drawn if drawn.closed and not drawn.why_not else Sketch(why_not=drawing)
    return _sketch(draughtsman, drawing, stage)


def _sketch(draughtsman: Draughtsman, drawing: Drawing | str, stage: Stage) -> Sketch:
    if isinstance(drawing, str):
        return Sketch(why_not=drawing)
    n, p, o = drawing.inverting, drawing.non_inverting, drawing.output
    if n == p:
        return Sketch(why_not="both inputs are on one node")
    links = drawing.network.reduced({n, p, o, GROUND, *drawing.inputs})
    drawn = _places(links, drawing, draughtsman.partition.circuit)
    return replace(drawn, transconductance=stage.amplifiers[0].kind == "transconductance")


def _places(links: Links, drawing: Drawing, circuit: Circuit) -> Sketch:
    n, p, o = drawing.inverting, drawing.non_inverting, drawing.output
    s = Sketch(
        feedback=None if n == o else links.between(n, o),
        positive=None if p in (GROUND, n) else links.between(p, o),
        shorted=n == o,
        # at an output, what hangs on the inverting input is load
        ground_n=None if n == o else _gain_leg(links.between(n, GROUND), links.between(n, o)),
        ground_p=links.between(p, GROUND),
        current_n=n in drawing.inputs and drawing.inputs[n].current_driven,
        direct_p=p in drawing.inputs,
        why_not=_against(links, drawing),
    )
    tables = {"signal": (s.signal_n, s.signal_p), "reference": (s.reference_n, s.reference_p)}
    for node, port in drawing.inputs.items():
        for pin, table in zip((n, p), tables[port.kind], strict=True):
            branch = _DIRECT if node == pin else links.between(node, pin)
            if branch is None or pin == GROUND or (pin == n and (n == o or (node == n and port.current_driven))):
                continue
            table[node] = branch
    driven = [node for node in s.signal_n if _is_current(drawing.inputs[node], s.signal_n[node], links, circuit)]
    if driven and len(s.signal_n) == 1:
        return replace(s, current_n=True, signal_n={})
    return s


_DIRECT = known("", np.full(1, np.inf, dtype=np.complex128))


def _gain_leg(ground: Branch | None, feedback: Branch | None) -> Branch | None:
    """What leads from the inverting input to ground; a load that hangs inside the feedback path draws a little too
    (a star of isolation resistor, feedback and load), which is no gain leg."""
    if ground is None or feedback is None or not ground.tee:
        return ground
    return ground if abs(ground.admittance[0]) > LOADING * abs(feedback.admittance[0]) else None


def _against(links: Links, drawing: Drawing) -> str:
    """What keeps the stage from being one of the plain ones."""
    n, p, o = drawing.inverting, drawing.non_inverting, drawing.output
    for node, port in drawing.inputs.items():
        if node in (n, p, o) or port.kind != "signal":
            continue
        beside = links.between(node, o) if n != o else None
        if beside is not None:
            return f"{node} reaches the output through {beside.meaning} beside the amplifier"
        if n != o and p != GROUND and links.between(node, n) is not None and links.between(node, p) is not None:
            return f"{node} reaches both inputs"
    return ""


def _is_current(port: Port, branch: Branch, links: Links, circuit: Circuit) -> bool:
    """Whether an input is a current source's in front of a branch smaller than what lies across the source."""
    if not port.current_driven:
        return False
    near = [e for e in circuit.at.get(port.node, ()) if not e.origin.device]
    if not any(isinstance(e, (Source, Controlled)) and e.kind in "ifg" for e in near):
        return False
    across = links.between(port.node, GROUND)
    return across is None or abs(across.impedance[0]) > abs(branch.impedance[0])


def _by_way_of(branch: Branch) -> str:
    return f"through {branch.meaning} to" if branch.text else "on"
