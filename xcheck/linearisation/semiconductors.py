"""Small-signal equivalents of semiconductors and switches, from what ngspice reports of each.

The equivalents are those of the models as published for SPICE 2 (Nagel, SPICE2: A computer program to simulate
semiconductor circuits, University of California, 1975) and described in ngspice's manual: hybrid-pi for the bipolar
transistor, Shichman and Hodges with Meyer's capacitances for the field-effect transistors. Resistors in series with the
terminals come from the model card.
"""

import math
from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace
from typing import Literal

from xcheck.circuit.elements import GROUND, Controlled, Device, Element, Passive, Source, Term

Values = Mapping[str, float]


BLOCKED = 1e-3
"""Of the output conductance: the collector's junction of an active transistor conducts less."""
LEAST_STORED = 0.005
"""Of the collector's capacitance: less charge moved at the emitter by the collector changes nothing to see."""


class NoEquivalent(Exception):
    """Why a device has no linear equivalent here."""


class Parts:
    """Collects the parts of one device. Nothing is made of a zero, and of what lies between one node and itself."""

    def __init__(self, device: Device, values: Values) -> None:
        self.device = device
        self.values = values
        self.origin = replace(device.origin, device=device.name)
        self.made: list[Element] = []
        parameters = dict(device.parameters)
        self.times = parameters.get("m", 1.0)
        self.area = parameters.get("area", 1.0)

    def value(self, name: str) -> float:
        """A reported value. Raises NoEquivalent where it is missing."""
        if name not in self.values:
            raise NoEquivalent(f"ngspice reports no {name} of it")
        return self.values[name]

    def model(self, name: str, otherwise: float = 0.0) -> float:
        """A parameter of the model card."""
        return self.device.definition.get(name, otherwise) if self.device.definition is not None else otherwise

    def conductance(self, name: str, a: str, b: str, siemens: float) -> None:
        self._passive(f"r{name}", "r", a, b, 1.0 / siemens if siemens else 0.0)

    def capacitance(self, name: str, a: str, b: str, farad: float) -> None:
        self._passive(f"c{name}", "c", a, b, farad)

    def _passive(self, name: str, kind: Literal["r", "c"], a: str, b: str, value: float) -> None:
        if value and a != b:
            self.made.append(Passive(self._named(name), kind, (a, b), value, self.origin))

    def transconductance(self, name: str, ends: tuple[str, str], senses: tuple[str, str], siemens: float) -> None:
        """A current from ends[0] through the part to ends[1], by the voltage between two nodes."""
        if siemens and ends[0] != ends[1] and senses[0] != senses[1]:
            terms = (Term(siemens, *senses),)
            self.made.append(Controlled(self._named(name), "g", ends, terms, 0.0, self.origin))

    def transcapacitance(self, name: str, ends: tuple[str, str], senses: tuple[str, str], farad: float) -> None:
        """A current from ends[0] to ends[1] that charges with the voltage between two other nodes: what a copy of that
        voltage drives through a capacitor."""
        copy, short = f"{self.device.name}:{name}", f"{self.device.name}:{name}0"
        meter = self._named(f"v{name}")
        self.made += [
            Controlled(self._named(f"e{name}"), "e", (copy, GROUND), (Term(1.0, *senses),), 0.0, self.origin),
            Passive(self._named(f"c{name}"), "c", (copy, short), farad, self.origin),
            Source(meter, "v", (short, GROUND), 0.0, None, "", self.origin),
            Controlled(self._named(f"f{name}"), "f", ends, (Term(1.0, source=meter),), 0.0, self.origin),
        ]

    def behind(self, terminal: str, name: str, ohm: float) -> str:
        """The node behind a resistor in series with a terminal; the terminal itself where there is none."""
        if not ohm:
            return terminal
        inner = f"{self.device.name}:{name}"
        self.made.append(Passive(self._named(f"r{name}"), "r", (terminal, inner), ohm, self.origin))
        return inner

    def _named(self, name: str) -> str:
        return f"{self.device.name}:{name}"


def diode(parts: Parts) -> None:
    """Conductance and capacitance of the junction behind the ohmic resistance."""
    anode, cathode = parts.device.nodes[:2]
    if parts.area != 1.0 and parts.times != 1.0 and parts.model("rs"):
        raise NoEquivalent("ngspice 39 counts `area` and `m` together otherwise than each alone")
    inner = parts.behind(anode, "s", parts.model("rs") / (parts.area * parts.times))
    parts.conductance("d", inner, cathode, parts.value("gd"))
    parts.capacitance("d", inner, cathode, parts.value("cd"))


def bipolar(parts: Parts) -> None:
    """Hybrid pi of Gummel and Poon's model."""
    if parts.model("level", 1.0) != 1.0 or parts.model("rco"):
        raise NoEquivalent("its model is not Gummel and Poon's")
    collector, base, emitter, *rest = parts.device.nodes
    size = parts.area * parts.times
    c = parts.behind(collector, "c", parts.model("rc") / size)
    e = parts.behind(emitter, "e", parts.model("re") / size)
    gx = parts.value("gx")
    b = parts.behind(base, "b", 1.0 / gx if gx else 0.0)
    parts.transconductance("gm", (c, e), (b, e), parts.value("gm"))
    parts.conductance("pi", b, e, parts.value("gpi"))
    parts.conductance("mu", b, c, parts.value("gmu"))
    parts.conductance("o", c, e, parts.value("go"))
    parts.capacitance("pi", b, e, parts.value("cpi"))
    parts.capacitance("mu", b, c, parts.value("cmu"))
    parts.capacitance("bx", base, c, parts.value("cbx"))
    lateral = (parts.device.definition is not None and parts.device.definition.type == "pnp") and not parts.model(
        "subs"
    )
    # the emitter's stored charge tf Ic falls as Ic does with the collector's voltage; while the collector's junction
    # conducts, go speaks of that and not of Early's effect
    stored = -parts.model("tf") * parts.value("go") if parts.value("gmu") < BLOCKED * parts.value("go") else 0.0
    if abs(stored) > LEAST_STORED * parts.value("cmu"):
        parts.transcapacitance("stored", (b, e), (b, c), stored)
    well = b if lateral or parts.model("subs") < 0 else c
    substrate = rest[0] if rest else GROUND
    parts.capacitance("sub", well, substrate, parts.value("csub"))
    if parts.model("iss"):  # without it ngspice reports 1 pS there that its equations do not have
        parts.conductance("sub", well, substrate, parts.values.get("gdsub", 0.0))


def _is_lateral(parts: Parts) -> bool:
    """Whether the substrate lies under the base: where the model says so, and for a PNP where it says nothing."""
    definition = parts.device.definition
    return parts.model("subs", -1.0 if definition is not None and definition.type == "pnp" else 1.0) < 0


def junction_fet(parts: Parts) -> None:
    """Shichman and Hodges' model; gate capacitances by the junctions' voltages."""
    if parts.model("level", 1.0) != 1.0:
        raise NoEquivalent("its model is not Shichman and Hodges'")
    drain, gate, source = parts.device.nodes[:3]
    size = parts.area * parts.times
    d = parts.behind(drain, "d", parts.model("rd") / size)
    s = parts.behind(source, "s", parts.model("rs") / size)
    parts.transconductance("gm", (d, s), (gate, s), parts.value("gm"))
    parts.conductance("ds", d, s, parts.value("gds"))
    parts.conductance("gs", gate, s, parts.value("ggs"))
    parts.conductance("gd", gate, d, parts.value("ggd"))
    for name, node, volt in (("gs", s, parts.value("vgs")), ("gd", d, parts.value("vgd"))):
        parts.capacitance(name, gate, node, size * depletion(parts, parts.model(f"c{name}"), volt))


def depletion(parts: Parts, farad: float, volt: float) -> float:
    """Capacitance of a junction with a grading of one half, forward of fc pb on a straight line (SPICE 2)."""
    potential, forward = parts.model("pb", 1.0), parts.model("fc", 0.5)
    if volt < forward * potential:
        return farad / math.sqrt(1.0 - volt / potential)
    return farad * (1.0 - 1.5 * forward + volt / (2.0 * potential)) / float((1.0 - forward) ** 1.5)


def mos(parts: Parts) -> None:
    """Models of level 1 to 3 with Meyer's capacitances. With drain and source exchanged by the voltage between them,
    the transconductances work from the other end."""
    kind = parts.device.definition.type if parts.device.definition is not None else "nmos"
    if parts.model("level", 1.0) not in (1.0, 2.0, 3.0) or kind not in ("nmos", "pmos"):
        raise NoEquivalent("its model is none of level 1 to 3")
    drain, gate, source = parts.device.nodes[:3]
    bulk = parts.device.nodes[3] if len(parts.device.nodes) > 3 else source
    d = parts.behind(drain, "d", parts.value("rd"))
    s = parts.behind(source, "s", parts.value("rs"))
    near, far = (s, d) if parts.value("vds") >= 0 else (d, s)
    parts.transconductance("gm", (far, near), (gate, near), parts.value("gm"))
    parts.transconductance("gmb", (far, near), (bulk, near), parts.value("gmbs"))
    parts.conductance("ds", d, s, parts.value("gds"))
    parts.conductance("bd", bulk, d, parts.value("gbd"))
    parts.conductance("bs", bulk, s, parts.value("gbs"))
    for name, a, b in (("gs", gate, s), ("gd", gate, d), ("gb", gate, bulk), ("bd", bulk, d), ("bs", bulk, s)):
        parts.capacitance(name, a, b, parts.value(f"c{name}"))


EQUIVALENTS: Mapping[str, Callable[[Parts], None]] = {"d": diode, "q": bipolar, "j": junction_fet, "m": mos}
"""One function a letter of device."""


def equivalent(device: Device, values: Values) -> Iterator[Element]:
    """The linear parts of a semiconductor, named after it. Raises NoEquivalent."""
    make = EQUIVALENTS.get(device.kind)
    if make is None:
        raise NoEquivalent(f"no equivalent is known for a {device.reason}")
    if not values:
        raise NoEquivalent("ngspice reports nothing of it")
    parts = Parts(device, values)
    make(parts)
    yield from parts.made
