"""Linear amplifiers made of stated values, in place of those whose own model is missing, nonlinear or not trusted.

The model is that of a data sheet: A(s) = A0/((1 + s/p1)(1 + s/p2)), p1 = gain-bandwidth/A0, p2 where it is known or
where the phase margin at unity gain tells it; Rid || Cid between the inputs, Ric || Cic from each to ground, Ro at the
output.
"""

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Element, Origin, Passive, Term
from xcheck.parts.catalogue import Part
from xcheck.stages.model import LinearModel, bench, open_loop
from xcheck.stages.types import Amplifier, OpenLoop, Quantity

ASSUMED: Mapping[str, float] = {
    "gain": 1e5, "gain_bandwidth_hz": 1e6, "input_resistance_ohm": 1e6, "output_resistance_ohm": 100.0,
}  # fmt: skip
"""What is taken where nobody gives a value: an ordinary general-purpose part (common practice)."""
STATED = (
    "gain", "gain_bandwidth_hz", "second_pole_hz", "input_resistance_ohm", "input_capacitance_f",
    "common_mode_resistance_ohm", "common_mode_capacitance_f", "output_resistance_ohm",
)  # fmt: skip
"""What the stand-in is made of."""
PLUS, MINUS, OUTPUT = "in+", "in-", "out"
FIRST_SIEMENS = 1e-3
"""Of the input stage; the rest is scaled to it."""
SECOND_OHM = 1e3


def stated(
    part: Part | None, own: Mapping[str, Quantity], project: Mapping[str, float] | None = None
) -> dict[str, Quantity]:
    """The values of a stand-in: the project's, else the data sheet's, else the model's own, else assumed ones."""
    found: dict[str, Quantity] = {}
    project = project or {}
    sheet = dict(part.values) if part is not None else {}
    if "second_pole_hz" not in sheet and {"phase_margin_deg", "gain_bandwidth_hz"} <= sheet.keys():
        sheet["second_pole_hz"] = second_pole(sheet["gain_bandwidth_hz"], sheet["phase_margin_deg"])
    for name in STATED:
        if name in project:
            found[name] = Quantity(project[name], "project")
        elif name in sheet:
            found[name] = Quantity(sheet[name], "data sheet")
        elif name in own and not isinstance(own[name].value, tuple):
            found[name] = own[name]
        elif name in ASSUMED:
            found[name] = Quantity(ASSUMED[name], "assumed")
    return found


def second_pole(gain_bandwidth: float, phase_margin: float) -> float:
    """The pole (Hz) that leaves a phase margin (degrees) at unity gain behind an integrator: f_c/p2 = tan(90 - margin)
    with f_c where |A| is one. Infinite for 90 degrees and more."""
    lag = math.radians(90.0 - phase_margin)
    if lag <= 0:
        return math.inf
    # |A| = (gbw/f) / sqrt(1 + (f/p2)^2) = 1 with f/p2 = tan(lag)
    crossing = gain_bandwidth * math.cos(lag)
    return crossing / math.tan(lag)


def elements_of(
    name: str, values: Mapping[str, Quantity], pins: tuple[str, str, str], origin: Origin
) -> tuple[Element, ...]:
    """The elements of a stand-in named `name.rid` and so on, between non-inverting input, inverting input, output."""
    plus, minus, output = pins
    number = {key: q.value for key, q in values.items() if isinstance(q.value, float) and q.value > 0}
    gain = number.get("gain", ASSUMED["gain"])
    first, second = f"{name}.a", f"{name}.b"

    def passive(part: str, kind: str, a: str, b: str, value: float | None) -> Iterable[Passive]:
        if value is not None and math.isfinite(value) and a != b:
            yield Passive(f"{name}.{part}", kind, (a, b), value, origin)  # type: ignore[arg-type]  # r or c

    made: list[Element] = [
        *passive("rid", "r", plus, minus, number.get("input_resistance_ohm")),
        *passive("cid", "c", plus, minus, number.get("input_capacitance_f")),
    ]
    for end, pin in (("p", plus), ("n", minus)):
        made += passive(f"ri{end}", "r", pin, GROUND, number.get("common_mode_resistance_ohm"))
        made += passive(f"ci{end}", "c", pin, GROUND, number.get("common_mode_capacitance_f"))
    terms = (Term(FIRST_SIEMENS, plus, minus),)
    made.append(Controlled(f"{name}.gm", "g", (GROUND, first), terms, 0.0, origin))
    made += passive("ra", "r", first, GROUND, gain / FIRST_SIEMENS)
    bandwidth = number.get("gain_bandwidth_hz")
    if bandwidth is not None:
        made += passive("ca", "c", first, GROUND, FIRST_SIEMENS / (2 * math.pi * bandwidth))
    last = first
    pole = number.get("second_pole_hz")
    if pole is not None and math.isfinite(pole):
        made.append(Controlled(f"{name}.eb", "e", (f"{name}.c", GROUND), (Term(1.0, first),), 0.0, origin))
        made += passive("rb", "r", f"{name}.c", second, SECOND_OHM)
        made += passive("cb", "c", second, GROUND, 1 / (2 * math.pi * pole * SECOND_OHM))
        last = second
    resistance = number.get("output_resistance_ohm")
    driven = output if resistance is None else f"{name}.o"
    made.append(Controlled(f"{name}.eo", "e", (driven, GROUND), (Term(1.0, last),), 0.0, origin))
    made += passive("ro", "r", driven, output, resistance)
    return tuple(made)


def open_loop_of(values: Mapping[str, Quantity], origin: Origin) -> OpenLoop:
    """The open-loop values and the model of a stand-in, each value with where it comes from."""
    elements = elements_of("part", values, (PLUS, MINUS, OUTPUT), origin)
    loop = open_loop(LinearModel(bench(elements, [PLUS, MINUS]), PLUS, MINUS, OUTPUT))
    from_where = {name: q.origin for name, q in values.items()}
    from_where["poles_hz"] = from_where.get("gain_bandwidth_hz", "assumed")
    known = {name: Quantity(q.value, from_where.get(name, "assumed")) for name, q in loop.values.items()}
    return replace(loop, values=known)


def with_stand_ins(
    circuit: Circuit, amplifiers: Sequence[Amplifier], chosen: Mapping[str, Mapping[str, Quantity]]
) -> tuple[Circuit, tuple[Amplifier, ...]]:
    """The circuit and its amplifiers with stand-ins of the chosen values, by amplifier's name. The elements of those
    amplifiers, and undefined instances that they stand for, are no longer part of the circuit."""
    owners: dict[str, list[Amplifier]] = {}
    for amplifier in amplifiers:
        if amplifier.name in chosen:
            for name in amplifier.elements:
                owners.setdefault(name, []).append(amplifier)
    made: dict[str, tuple[Element, ...]] = {}
    elements: list[Element] = []
    for element in circuit.elements:
        if element.name not in owners:
            elements.append(element)
            continue
        for amplifier in owners[element.name]:
            if amplifier.name not in made:
                pins = (amplifier.non_inverting, amplifier.inverting, amplifier.output)
                values = chosen[amplifier.name]
                made[amplifier.name] = elements_of(amplifier.name, values, pins, element.origin)
                elements += made[amplifier.name]
    changed = tuple(_standing_in(a, made[a.name], chosen[a.name]) if a.name in made else a for a in amplifiers)
    return replace(circuit, elements=tuple(elements)), changed


def _standing_in(amplifier: Amplifier, elements: Sequence[Element], values: Mapping[str, Quantity]) -> Amplifier:
    return replace(
        amplifier, elements=tuple(e.name for e in elements), gain_element=f"{amplifier.name}.gm",
        open_loop=open_loop_of(values, elements[0].origin),
    )  # fmt: skip
