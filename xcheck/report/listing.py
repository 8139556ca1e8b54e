"""What was found in a deck, without impedances: stages with their evidence."""

from xcheck.reviewed import Evidence
from xcheck.stages.types import Amplifier


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
            what = f"{amplifier.subckt or 'bare source'}{_kind(amplifier)}"
            lines.append(
                f"  amplifier {amplifier.name} ({what}): in+ {amplifier.non_inverting}, in- {amplifier.inverting}, "
                f"out {amplifier.output}, v+ {amplifier.positive_supply or '-'}, v- {amplifier.negative_supply or '-'}"
            )
            lines += [f"    {evidence_line}" for evidence_line in amplifier.evidence]
    if not evidence.partition.stages:
        lines.append("no amplifier stage was found")
    if evidence.partition.references:
        lines.append(f"taken as still nodes for splitting: {', '.join(evidence.partition.references)}")
    return "\n".join(lines) + "\n"


def _kind(amplifier: Amplifier) -> str:
    return "" if amplifier.kind == "voltage-feedback" else f", {amplifier.kind}"
