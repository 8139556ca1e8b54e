"""Open-loop values of every amplifier side by side: as the data sheet gives them, as modelled, as measured."""

from collections.abc import Sequence

from xcheck.notation import engineering, percent
from xcheck.reviewed import Evidence
from xcheck.stages.types import Amplifier, Quantity

ROWS = {
    "gain": ("gain", ""), "gain_bandwidth_hz": ("gain-bandwidth", "Hz"), "poles_hz": ("poles", "Hz"),
    "second_pole_hz": ("second pole", "Hz"), "phase_margin_deg": ("phase margin at unity gain", "deg"),
    "unity_gain_hz": ("unity gain at", "Hz"),
    "input_resistance_ohm": ("differential input resistance", "Ohm"),
    "input_capacitance_f": ("differential input capacitance", "F"),
    "common_mode_resistance_ohm": ("common-mode input resistance", "Ohm"),
    "common_mode_capacitance_f": ("common-mode input capacitance", "F"),
    "output_resistance_ohm": ("output resistance", "Ohm"),
    "slew_rate_v_per_s": ("slew rate", "V/s"), "output_current_a": ("output current", "A"),
    "bias_current_a": ("input bias current", "A"), "offset_current_a": ("input offset current", "A"),
    "supply_min_v": ("least total supply", "V"), "supply_max_v": ("greatest total supply", "V"),
    "common_mode_below_positive_v": ("input range ends below v+ by", "V"),
    "common_mode_above_negative_v": ("input range begins above v- by", "V"),
}  # fmt: skip
FITS = {
    "gain_fit_error": "gain as A0/((1 + s/p1)(1 + s/p2))", "input_fit_error": "Zid as R || C",
    "output_fit_error": "Zo as R",
}  # fmt: skip
COLUMNS = (("data sheet", 20), ("model", 20), ("measured", 20))
NAME = 33
ROUNDING = 1e-9
"""A fit nearer than this is exact but for rounding."""


def amplifiers(evidence: Evidence) -> str:
    """The table of every amplifier; where a value comes from a project file or is assumed, it says so."""
    lines = [f"{evidence.deck.path}: {evidence.deck.title}"]
    for amplifier in evidence.partition.amplifiers:
        lines += _amplifier(amplifier)
    if not evidence.partition.amplifiers:
        lines.append("no amplifier was found")
    return "\n".join(lines) + "\n"


def _amplifier(amplifier: Amplifier) -> Sequence[str]:
    part, values = amplifier.part, amplifier.open_loop.values
    sheet = dict(part.values) if part is not None else {}
    whose = ""
    if part is not None:
        whose = f"; {part.data_sheet}{', typical values from memory' if part.from_memory else ''}"
    lines = [f"amplifier {amplifier.name} ({amplifier.subckt or 'bare source'}){whose}"]
    lines.append("  " + " " * NAME + "".join(f"{head:<{width}}" for head, width in COLUMNS).rstrip())
    for key, (words, unit) in ROWS.items():
        quantity = values.get(key)
        cells = [_number(sheet[key], unit) if key in sheet else "-", "-", "-"]
        if quantity is not None and quantity.origin != "data sheet":
            cells[2 if quantity.origin == "measured" else 1] = _told(quantity, unit)
        if cells != ["-", "-", "-"]:
            row = "".join(f"{cell:<{width}}" for cell, (_, width) in zip(cells, COLUMNS, strict=True))
            lines.append(f"  {words:<{NAME}}{row}".rstrip())
    fits = [
        f"{words} within {percent(value if value > ROUNDING else 0.0)}"
        for key, words in FITS.items()
        if (quantity := values.get(key)) is not None and isinstance(value := quantity.value, float)
    ]
    if fits:
        lines.append(f"  fits from 1 Hz to unity gain: {'; '.join(fits)}")
    if amplifier.open_loop.model is None:
        lines.append(f"  not known: {amplifier.open_loop.reason}")
    return lines


def _told(quantity: Quantity, unit: str) -> str:
    """A value, with where it comes from unless the column says it."""
    value = quantity.value
    if value is None:
        text = "infinite"
    elif isinstance(value, tuple):
        text = ", ".join(_number(v, unit) for v in value) or "none"
    else:
        text = _number(value, unit)
    return text if quantity.origin in ("deck", "measured") else f"{text} ({quantity.origin})"


def _number(value: float, unit: str) -> str:
    return engineering(value, unit)
