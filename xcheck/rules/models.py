"""What the amplifiers' models leave out, where a reported port needs it.

An ideal part is no fault in itself: R1 is a good answer for an inverting input whatever the amplifier. It
is one where the number that is reported would be another with any real amplifier:

    output resistance   zero, and the port is the output: its impedance is zero whatever the loop gain input
    resistance    infinite, and nothing else at the port draws current: its impedance is infinite bandwidth
    none, and the port's impedance would move by more than 10 % within the frequencies compared if the gain
    fell as that of an ordinary amplifier does (1 MHz gain-bandwidth, from data sheets of general purpose
    parts since the uA741; from memory). By Blackman's formula, Z = Z0 (1 + Tsc/k) / (1 + Toc/k) with k the
    factor by which the gain has fallen.
"""

from collections.abc import Iterator

import numpy as np

from xcheck.finding import Finding
from xcheck.impedance.types import PortAnswer, ReturnRatio
from xcheck.notation import engineering
from xcheck.reviewed import Evidence
from xcheck.stages.types import Amplifier, Stage

OPEN_OHM = 1e15
"""Above this at its lowest, a port draws no current that a board would notice: 1 fA at 1 V."""

ORDINARY_GAIN_BANDWIDTH = 1e6
"""Hz; see the head of this module."""

MOVES_BY = 0.1
"""Relative change of a port's impedance that counts as depending on the bandwidth."""


def amplifier_ideal(evidence: Evidence) -> Iterator[Finding]:
    """One finding an amplifier: which of the three its model lacks, and at which ports that matters."""
    for stage in evidence.partition.stages:
        answers = [evidence.by_subject[p.subject] for p in stage.ports if p.subject in evidence.by_subject]
        for amplifier in stage.amplifiers:
            lacking = _lacking(evidence, stage, amplifier, answers)
            if lacking:
                yield _finding(amplifier, lacking)


def _finding(amplifier: Amplifier, lacking: list[tuple[str, str, list[str]]]) -> Finding:
    said = "; ".join(f"no {what}, so {effect} at {' and '.join(ports)}" for what, effect, ports in lacking)
    what = f"the model `{amplifier.subckt}` of {amplifier.name}" if amplifier.subckt else amplifier.name
    return Finding(
        "amplifier-ideal",
        "warning",
        amplifier.place,
        f"{what} is ideal where it matters: it has {said}",
        subject=amplifier.name,
        advice="take the missing values from the part's data sheet and add them to the model",
    )


def _lacking(
    evidence: Evidence, stage: Stage, amplifier: Amplifier, answers: list[PortAnswer]
) -> list[tuple[str, str, list[str]]]:
    """What is missing, what it does, and the ports where it does."""
    values = amplifier.open_loop.values
    lacking = []
    if "output_resistance_ohm" in values and values["output_resistance_ohm"].value == 0:
        ports = [a.port.subject for a in answers if a.port.node == amplifier.output]
        lacking.append(("output resistance", "the impedance is zero whatever the loop gain", ports))
    if "input_resistance_ohm" in values and _infinite(amplifier):
        inputs = {amplifier.non_inverting, amplifier.inverting}
        alone = len(stage.amplifiers) == 1
        ports = [a.port.subject for a in answers if (alone or a.port.node in inputs) and _is_open(a)]
        lacking.append(("input resistance", "the impedance is infinite", ports))
    if _without_pole(amplifier):
        ports = [a.port.subject for a in answers if _needs_bandwidth(evidence, amplifier, a)]
        limit = engineering(float(evidence.frequency[-1]), "Hz") if evidence.frequency.size else ""
        lacking.append(("bandwidth", f"the impedance does not change up to {limit} as a real one does", ports))
    return [entry for entry in lacking if entry[2]]


def _infinite(amplifier: Amplifier) -> bool:
    """Neither between the inputs nor from one of them to ground does any resistance stand in the model."""
    values = amplifier.open_loop.values
    names = ("input_resistance_ohm", "common_mode_resistance_ohm")
    return all(values[name].value is None for name in names if name in values)


def _without_pole(amplifier: Amplifier) -> bool:
    values = amplifier.open_loop.values
    poles = values.get("poles_hz")
    return poles is not None and not poles.value


def _is_open(answer: PortAnswer) -> bool:
    if answer.port.side != "input" or answer.analytic is None:
        return False
    size = np.abs(answer.analytic)
    return bool(size.size) and not bool((size < OPEN_OHM).any())


def _needs_bandwidth(evidence: Evidence, amplifier: Amplifier, answer: PortAnswer) -> bool:
    ratio: ReturnRatio | None = answer.return_ratio
    if ratio is None or ratio.source != amplifier.gain_element:
        return False
    gain = amplifier.open_loop.values.get("gain")
    if gain is None or not isinstance(gain.value, float) or gain.value <= 0:
        return False
    fallen = np.maximum(1.0, gain.value * answer.frequency / ORDINARY_GAIN_BANDWIDTH)
    with np.errstate(all="ignore"):
        slower = ratio.z0 * (1 + ratio.t_short / fallen) / (1 + ratio.t_open / fallen)
        moved = np.abs(slower - ratio.impedance) > MOVES_BY * np.abs(ratio.impedance)
    known = np.isfinite(slower) & np.isfinite(ratio.impedance)
    return bool((moved & known).any())
