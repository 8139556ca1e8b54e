"""What was found in a deck, without impedances: stages with their evidence, and amplifiers' open-loop values."""

from xcheck.notation import engineering
from xcheck.reviewed import Evidence
from xcheck.stages.types import Quantity

UNITS = {
    "gain": ("gain", ""), "gain_bandwidth_hz": ("gain-bandwidth", "Hz"), "poles_hz": ("poles", "Hz"),
    "input_resistance_ohm": ("differential input resistance", "Ohm"),
    "input_capacitance_f": ("differential input capacitance", "F"),
    "common_mode_resistance_ohm": ("common-mode input resistance", "Ohm"),
    "common_mode_capacitance_f": ("common-mode input capacitance", "F"),
    "output_resistance_ohm": ("output resistance", "Ohm"),
}  # fmt: skip


def stages(evidence: Evidence) -> str:
    """Stages, their ports, and the evidence for their amplifiers."""
    lines = [f"{evidence.deck.path}: {evidence.deck.title}"]
    for stage in evidence.partition.stages:
        recognised = evidence.recognised[stage.name]
        lines.append(f"stage {stage.name}: {recognised.topology}")
        lines.append(f"  seen: {recognised.seen}")
        for port in stage.ports:
            drive = ", driven by a current or open" if port.current_driven else ""
            lines.append(f"  {port.side} {port.name} ({port.kind}{drive})")
        for amplifier in stage.amplifiers:
            lines.append(
                f"  amplifier {amplifier.name} ({amplifier.subckt or 'bare source'}): in+ {amplifier.non_inverting}, "
                f"in- {amplifier.inverting}, out {amplifier.output}, v+ {amplifier.positive_supply or '-'}, "
                f"v- {amplifier.negative_supply or '-'}"
            )
            lines += [f"    {evidence_line}" for evidence_line in amplifier.evidence]
    if not evidence.partition.stages:
        lines.append("no amplifier stage was found")
    if evidence.partition.references:
        lines.append(f"taken as still nodes for splitting: {', '.join(evidence.partition.references)}")
    return "\n".join(lines) + "\n"


def amplifiers(evidence: Evidence) -> str:
    """Open-loop values of every amplifier, with where each came from."""
    lines = [f"{evidence.deck.path}: {evidence.deck.title}"]
    for amplifier in evidence.partition.amplifiers:
        lines.append(f"amplifier {amplifier.name} ({amplifier.subckt or 'bare source'})")
        for name, (words, unit) in UNITS.items():
            quantity = amplifier.open_loop.values.get(name)
            if quantity is not None:
                lines.append(f"  {words:<32}{_written(quantity, unit):<24}{quantity.origin}")
        if amplifier.open_loop.model is None:
            lines.append(f"  not known: {amplifier.open_loop.reason}")
    if not evidence.partition.amplifiers:
        lines.append("no amplifier was found")
    return "\n".join(lines) + "\n"


def _written(quantity: Quantity, unit: str) -> str:
    value = quantity.value
    if value is None:
        return "infinite"
    if isinstance(value, tuple):
        return ", ".join(engineering(v, unit) for v in value) or "none"
    return engineering(value, unit)
