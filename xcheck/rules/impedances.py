"""What the four numbers of a port say of each other."""

from collections.abc import Iterator

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.finding import Finding
from xcheck.impedance.types import ClosedForm, PortAnswer
from xcheck.notation import engineering, percent, polar
from xcheck.options import DEFAULT_TOLERANCE
from xcheck.reviewed import Evidence
from xcheck.rules.operating_point import rail_of

METHODS_TOLERANCE = 1e-4
"""Relative, between two exact methods: far above rounding, far below anything an engineer would see."""

LEAST_OHM, GREATEST_OHM = 1e-9, 1e14
"""Two exact methods are compared no further than this: 1e-9 Ohm is what feedback leaves of a stage's kiloohms by
a cancellation of twelve digits, and 1e-14 S beside 1 mS is 1e-11 of its nodal equation; double precision
(2e-16) knows both to about 1e-4."""

RULE_OFF_BY = 0.1
"""Relative deviation of the rule of thumb that is worth a note."""


def impedance_disagrees(evidence: Evidence) -> Iterator[Finding]:
    """Simulated against analytic, beyond the tolerance somewhere on the grid."""
    amplifiers = {stage.name: stage.amplifiers for stage in evidence.partition.stages}
    tolerance = evidence.options.tolerance or DEFAULT_TOLERANCE
    for answer in evidence.answers:
        gap, worst = answer.difference, _worst(answer.difference)
        if answer.verdict != "disagrees" or gap is None or worst is None:
            continue
        if answer.simulated is None or answer.analytic is None:
            continue
        at_rail = [a.name for a in amplifiers.get(answer.port.stage, ()) if rail_of(evidence, a)]
        advice = "linear model and deck part here; look at the operating point and the amplifier's model"
        if at_rail:
            advice = f"the output of {at_rail[0]} is at its rail at the operating point: mend that first"
        doubts = evidence.simulation.doubts if evidence.simulation is not None else ()
        cause = "output-at-rail" if at_rail else "unknown"
        if doubts and evidence.simulation is not None and not at_rail:
            cause = "result-from-another-deck"
            advice = f"{evidence.simulation.taken_from} seems to be of another deck: {'; '.join(doubts)}"
        method = "return ratio" if answer.return_ratio is not None else "closed form"
        yield Finding(
            "impedance-disagrees",
            "error",
            answer.port.place,
            f"{_port(answer)} is {_value(answer.simulated, worst)} as simulated, "
            f"{_value(answer.analytic, worst)} by {method}, at {_hertz(answer, worst)}: "
            f"they differ by {percent(float(gap[worst]))}, tolerance {percent(tolerance)}",
            subject=answer.port.subject,
            cause=cause,
            advice=advice,
        )


def methods_disagree(evidence: Evidence) -> Iterator[Finding]:
    """An exact closed form against the return ratio: both are xcheck's own, and one of them is wrong."""
    for answer in evidence.answers:
        form, ratio = answer.closed_form, answer.return_ratio
        if form is None or ratio is None or not form.exact:
            continue
        gap = _gap(form.value, ratio.impedance)
        worst = _worst(gap)
        if worst is None or not gap[worst] > METHODS_TOLERANCE:
            continue
        yield Finding(
            "methods-disagree",
            "error",
            answer.port.place,
            f"a fault of xcheck itself: {_port(answer)} is {_value(form.value, worst)} by the closed form of "
            f"`{answer.topology}` and {_value(ratio.impedance, worst)} by return ratio, at "
            f"{_hertz(answer, worst)}; both claim to be exact",
            subject=answer.port.subject,
            advice="trust neither of the two at this port, and please report the deck",
        )


def rule_of_thumb_fails(evidence: Evidence) -> Iterator[Finding]:
    """The ideal value is off by more than 10 % inside the band. An ideal value of zero or infinity is a
    limit, not a number to be off from."""
    low, high = evidence.band
    for answer in evidence.answers:
        exact, form = answer.analytic, answer.closed_form
        if exact is None or form is None:
            continue
        ideal = form.rule_of_thumb
        inside = (answer.frequency >= low * (1 - 1e-9)) & (answer.frequency <= high * (1 + 1e-9))
        usable = inside & np.isfinite(ideal) & (ideal != 0) & np.isfinite(exact) & (exact != 0)
        off = np.zeros(len(ideal))
        with np.errstate(over="ignore"):
            off[usable] = np.abs(ideal[usable] - exact[usable]) / np.abs(exact[usable])
        if bool((off > RULE_OFF_BY).any()):
            yield _rule_fails(evidence, answer, form, exact, off)


def _rule_fails(evidence: Evidence, answer: PortAnswer, form: ClosedForm, exact: Complex, off: Real) -> Finding:
    failing = np.flatnonzero(off > RULE_OFF_BY)
    first, last, worst = int(failing[0]), int(failing[-1]), int(np.argmax(off))
    reach = f"at {_hertz(answer, first)}"
    if first != last:
        reach = f"from {_hertz(answer, first)} to {_hertz(answer, last)}"
    band = "declared band" if evidence.band_declared else "band looked at (none is declared)"
    return Finding(
        "rule-of-thumb-fails",
        "note",
        answer.port.place,
        f"{_port(answer)}: the rule of thumb, {form.rule_text}, is off by more than 10 % {reach}, within the "
        f"{band}; at {_hertz(answer, worst)} it says {_value(form.rule_of_thumb, worst)} where "
        f"{_value(exact, worst)} is right",
        subject=answer.port.subject,
        advice="calculate with the exact value there",
    )


def _port(answer: PortAnswer) -> str:
    return f"the {answer.port.side} impedance at `{answer.port.name}`"


def _value(values: Complex, index: int) -> str:
    return polar(complex(values[index]), "Ohm")


def _hertz(answer: PortAnswer, index: int) -> str:
    return engineering(float(answer.frequency[index]), "Hz")


def _gap(one: Complex, other: Complex) -> Real:
    """|one - other| / |other|, shape (F,); 0 where both are below the least or above the greatest value."""
    sizes = np.abs(one), np.abs(other)
    tiny = (sizes[0] < LEAST_OHM) & (sizes[1] < LEAST_OHM)
    huge = (sizes[0] > GREATEST_OHM) & (sizes[1] > GREATEST_OHM)
    with np.errstate(all="ignore"):
        gap: Real = np.abs(one - other) / np.maximum(sizes[1], LEAST_OHM)
    gap[tiny | huge] = 0.0
    return gap


def _worst(gap: Real | None) -> int | None:
    """Where a difference is greatest; infinite beats finite, what is no number is left out."""
    if gap is None or not gap.size or bool(np.isnan(gap).all()):
        return None
    return int(np.nanargmax(gap))
