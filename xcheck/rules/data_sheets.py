"""Models against the data sheets of the parts that they are named after."""

from collections.abc import Iterator

from xcheck.finding import Finding
from xcheck.notation import engineering
from xcheck.parts.catalogue import Part
from xcheck.reviewed import Evidence
from xcheck.rules.operating_point import rail_of
from xcheck.stages.types import Amplifier

FACTOR = 3.0
"""Data sheets give typical values; a model is wrong only beyond this (the project's own rule)."""
COMPARED = {
    "gain": ("open-loop gain", ""), "gain_bandwidth_hz": ("gain-bandwidth", "Hz"),
    "input_resistance_ohm": ("differential input resistance", "Ohm"),
    "output_resistance_ohm": ("open-loop output resistance", "Ohm"),
}  # fmt: skip
IDEAL_OHM = 1e12
"""From here on an input resistance is as good as none: a data sheet's 1 TOhm and a model's infinity are alike."""


def model_differs_from_data_sheet(evidence: Evidence) -> Iterator[Finding]:
    """Open-loop gain, gain-bandwidth, Rid or Ro of a model off the data sheet by more than a factor. What the model
    lacks altogether is `amplifier-ideal`'s affair."""
    said: set[tuple[str, str]] = set()
    for amplifier in evidence.partition.amplifiers:
        part = amplifier.part
        if part is None or part.kind != "voltage-feedback" or rail_of(evidence, amplifier):
            continue  # at its limit a model has lost its gain, which `output-at-rail` says
        apart = list(_apart(amplifier, part))
        if not apart or (amplifier.subckt, apart[0]) in said:
            continue
        said.add((amplifier.subckt, apart[0]))
        yield Finding(
            "model-differs-from-data-sheet", "warning", amplifier.place,
            f"the model `{amplifier.subckt}` of {amplifier.name} differs from the {part.data_sheet} by more than a "
            f"factor of {FACTOR:g}: {'; '.join(apart)}",
            subject=amplifier.name,
            advice="take a model with the part's values, or name this one after another part",
        )  # fmt: skip


def _apart(amplifier: Amplifier, part: Part) -> Iterator[str]:
    for key, (words, unit) in COMPARED.items():
        quantity, typical = amplifier.open_loop.values.get(key), part.values.get(key)
        if quantity is None or typical is None or quantity.origin not in ("deck", "measured"):
            continue
        value = quantity.value
        if not isinstance(value, float) or value <= 0:
            continue  # infinite, none, or zero: the model leaves it out
        if key == "input_resistance_ohm" and min(value, typical) >= IDEAL_OHM:
            continue
        if max(value / typical, typical / value) > FACTOR:
            yield f"{words} {engineering(value, unit)} for {engineering(typical, unit)}"
