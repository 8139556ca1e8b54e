"""A data sheet written out as a subcircuit, to use instead of an ideal source."""

import math

from xcheck.parts.catalogue import Part
from xcheck.stages.standins import ASSUMED, FIRST_SIEMENS, SECOND_OHM, second_pole

WORDS = {
    "gain": "open-loop gain", "gain_bandwidth_hz": "gain-bandwidth", "input_resistance_ohm": "differential resistance",
    "output_resistance_ohm": "output resistance",
}  # fmt: skip


def model_card(part: Part, *, railed: bool = False) -> str:
    """The text of a subcircuit with the pins in+ in- v+ v- out. railed: the output is limited to the supplies by a
    hyperbolic tangent, whose slope is one half-way between them; else the model is linear."""
    values = dict(part.values)
    missing = [name for name in ASSUMED if name not in values]
    given = {**ASSUMED, **values}
    gain, bandwidth = given["gain"], given["gain_bandwidth_hz"]
    lines = [
        f"* {part.name}{', its output limited to the supplies' if railed else ', linear'}: typical values of the",
        f"* {part.data_sheet}{' (from memory: check them against your copy)' if part.from_memory else ''}",
        *(f"* the {WORDS[name]} is not known and assumed: {ASSUMED[name]:g}" for name in missing),
        "* connections: non-inverting input, inverting input, positive supply, negative supply, output",
        f".subckt {part.name} inp inn vcc vee out",
        f"rid inp inn {given['input_resistance_ohm']:g}",
    ]
    if "input_capacitance_f" in values:
        lines.append(f"cid inp inn {values['input_capacitance_f']:g}")
    for key, letter in (("common_mode_resistance_ohm", "r"), ("common_mode_capacitance_f", "c")):
        if key in values:
            lines += [f"{letter}icp inp 0 {values[key]:g}", f"{letter}icn inn 0 {values[key]:g}"]
    lines += [
        "* gain and first pole",
        f"ga 0 a inp inn {FIRST_SIEMENS:g}",
        f"ra a 0 {gain / FIRST_SIEMENS:g}",
        f"ca a 0 {FIRST_SIEMENS / (2 * math.pi * bandwidth):.6g}",
    ]
    last = "a"
    pole = values.get("second_pole_hz")
    if pole is None and "phase_margin_deg" in values:
        pole = second_pole(bandwidth, values["phase_margin_deg"])
    if pole is not None and math.isfinite(pole):
        lines += [
            "* second pole", "eb b 0 a 0 1", f"rb b c {SECOND_OHM:g}",
            f"cb c 0 {1 / (2 * math.pi * pole * SECOND_OHM):.6g}",
        ]  # fmt: skip
        last = "c"
    lines.append("* output")
    if railed:
        middle, half = "(v(vcc)+v(vee))/2", "(v(vcc)-v(vee))/2"
        lines.append(f"bo o 0 v={middle}+{half}*tanh((v({last})-{middle})/({half}+1u))")
        lines.append("* what keeps the first stage from running far beyond the supplies")
        beyond = f"3*{half}"  # tanh(3) is 0.995
        lines.append(f"bx a 0 i=1m*(max(v(a)-{middle}-{beyond},0)+min(v(a)-{middle}+{beyond},0))")
    else:
        lines.append(f"eo o 0 {last} 0 1")
    lines += [f"ro o out {given['output_resistance_ohm']:g}", "rq vcc vee 1meg", f".ends {part.name}"]
    return "\n".join(lines) + "\n"
