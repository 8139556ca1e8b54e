"""What the operating point asks of an amplifier beyond what its data sheet gives."""

from collections.abc import Iterator, Mapping

from xcheck.circuit.elements import GROUND, Controlled, Coupling, Device, Passive, Source
from xcheck.finding import Finding
from xcheck.notation import engineering
from xcheck.parts.catalogue import Part
from xcheck.reviewed import Evidence
from xcheck.rules.operating_point import OPERATING_POINT
from xcheck.rules.pins import place_on
from xcheck.stages.types import Amplifier

AT_SUPPLY_VOLT = 1e-3
"""An input this near to a supply, or beyond it, is at it: where no data sheet is known, none works there for sure."""


def volts_of(evidence: Evidence) -> Mapping[str, float]:
    """Volt by flat node at the operating point, {} where there is none."""
    simulation = evidence.simulation
    if simulation is None or simulation.failed_step == OPERATING_POINT or not simulation.operating_point:
        return {}
    return {GROUND: 0.0, **simulation.operating_point}


def input_outside_common_mode(evidence: Evidence) -> Iterator[Finding]:
    """An input outside the data sheet's common-mode range, or, where that is not known, at or beyond a supply.

    Of an amplifier whose model is linear without its supplies nothing is said unless the part is known: its
    supplies may not be drawn as they will be."""
    volts = volts_of(evidence)
    for amplifier in evidence.partition.amplifiers:
        positive, negative = amplifier.positive_supply, amplifier.negative_supply
        if positive not in volts or negative not in volts or positive is None or negative is None:
            continue
        high, low = volts[positive], volts[negative]
        if not high > low:
            continue
        part = amplifier.part
        for what, node in (("non-inverting", amplifier.non_inverting), ("inverting", amplifier.inverting)):
            if node not in volts:
                continue
            against = _beyond(volts[node], high, low, part)
            if against:
                yield Finding(
                    "input-outside-common-mode", "warning", place_on(evidence, amplifier, node),
                    f"the {what} input of {amplifier.name}, node `{node}`, is at {engineering(volts[node], 'V')} "
                    f"(operating point), {against}",
                    subject=amplifier.name,
                    advice="bias the input between the limits, or take a part whose range reaches there",
                )  # fmt: skip
                break  # both inputs are at one voltage where the loop is closed


def _beyond(volt: float, high: float, low: float, part: Part | None) -> str:
    """How a voltage leaves the range, '' where it does not."""
    values = part.values if part is not None else {}
    top, bottom = values.get("common_mode_below_positive_v"), values.get("common_mode_above_negative_v")
    whose = f"the common-mode range of the {part.data_sheet}" if part is not None else ""
    if top is not None and volt > high - top:
        return f"above {engineering(high - top, 'V')}, where {whose} ends"
    if bottom is not None and volt < low + bottom:
        return f"below {engineering(low + bottom, 'V')}, where {whose} begins"
    if top is None and volt > high - AT_SUPPLY_VOLT:
        return f"at or beyond its positive supply of {engineering(high, 'V')}"
    if bottom is None and volt < low - AT_SUPPLY_VOLT:
        return f"beyond its negative supply of {engineering(low, 'V')}"
    return ""


def output_current_exceeded(evidence: Evidence) -> Iterator[Finding]:
    """An output current at the operating point beyond the data sheet's."""
    volts = volts_of(evidence)
    for amplifier in evidence.partition.amplifiers if volts else ():
        part = amplifier.part
        most = part.values.get("output_current_a") if part is not None else None
        if part is None or most is None:
            continue
        drawn = _drawn(evidence, amplifier, volts)
        if drawn is not None and abs(drawn) > most:
            yield Finding(
                "output-current-exceeded", "warning", place_on(evidence, amplifier, amplifier.output),
                f"the output of {amplifier.name} carries {engineering(abs(drawn), 'A')} at the operating point, "
                f"{part.name} gives {engineering(most, 'A')} ({part.data_sheet})",
                subject=amplifier.name, advice="raise the load's resistance, or take a part or a buffer that drives it",
            )  # fmt: skip


def _drawn(evidence: Evidence, amplifier: Amplifier, volts: Mapping[str, float]) -> float | None:
    """Ampere that flows out of an output into resistors and voltage sources, None where something else is there."""
    own = set(amplifier.elements)
    simulation = evidence.simulation
    currents = simulation.currents if simulation is not None else {}
    total = 0.0
    for element in evidence.circuit.at.get(amplifier.output, ()):
        if element.name in own or element.name.startswith(f"{amplifier.name}.") or isinstance(element, Coupling):
            continue
        if amplifier.output not in element.nodes:
            continue
        match element:
            case Passive(kind="r"):
                a, b = element.nodes
                if a not in volts or b not in volts or not element.value:
                    return None
                sign = 1.0 if a == amplifier.output else -1.0
                total += sign * (volts[a] - volts[b]) / element.value
            case Passive(kind="c"):
                continue
            case Source(kind="v") | Controlled(kind="e" | "h") | Passive(kind="l"):
                if element.name not in currents:
                    return None
                total += currents[element.name] * (1.0 if element.nodes[0] == amplifier.output else -1.0)
            case Source(kind="i"):
                total += element.dc * (1.0 if element.nodes[0] == amplifier.output else -1.0)
            case Device() | Controlled():
                return None
    return total
