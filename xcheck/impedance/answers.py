"""One answer a port from the four methods: difference, verdict, and how far the rule of thumb reaches."""

from collections.abc import Collection, Mapping

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.impedance.closed_form import Forms
from xcheck.impedance.types import ClosedForm, PortAnswer, ReturnRatio, Verdict
from xcheck.impedance.validity import holds_to
from xcheck.stages.types import Partition, Port

LEAST_OHM = 1e-9
"""Below this an impedance is numerical noise of the simulator beside kiloohms in double precision (1e-9 of
1e4 is 1e-13 of the circuit's own size), so differences are not measured against less."""


def difference(simulated: Complex, analytic: Complex) -> Real:
    """|Zsim - Zan| / |Zan|, shape (F,); where |Zan| is below LEAST_OHM, against that."""
    gap: Real = np.abs(simulated - analytic) / np.maximum(np.abs(analytic), LEAST_OHM)
    return gap


def verdict_of(gap: Real | None, tolerance: float) -> Verdict:
    """A port agrees when it is within the tolerance at every frequency compared."""
    if gap is None or not np.all(np.isfinite(gap)):
        return "unchecked"
    return "agrees" if bool(np.all(gap <= tolerance)) else "disagrees"


def answer_ports(
    partition: Partition,
    topologies: Mapping[str, str],
    frequency: Real,
    roads: Mapping[str, ReturnRatio | str],
    forms: Forms,
    simulated: Mapping[str, Complex],
    unmeasured: Mapping[str, str],
    *,
    tolerance: float,
    data_sheet: Mapping[str, Complex] | None = None,
    stood_in: Collection[str] = (),
) -> tuple[PortAnswer, ...]:
    """Answers of all ports in stage and port order. topologies: by stage name; simulated and unmeasured: ohm, shape
    (F,), and reasons by port subject; data_sheet: ohm, shape (F,), by port subject; stood_in: stages whose amplifiers
    have not their own model's values, so that nothing simulated can be held against them."""
    answers = []
    for stage in partition.stages:
        for port in stage.ports:
            subject = port.subject
            road = roads.get(subject, "no return ratio")
            form = forms.by_subject.get(subject, "no closed form")
            measured = simulated.get(subject)
            if stage.name in stood_in and measured is not None:
                unmeasured = {**unmeasured, subject: "the amplifier's values are a data sheet's or assumed"}
                measured = None
            answers.append(
                _answer(
                    port, topologies.get(stage.name, "unclassified"), frequency, road, form, measured,
                    unmeasured.get(subject, ""), forms.neighbours.get(subject), tolerance,
                    (data_sheet or {}).get(subject),
                )
            )  # fmt: skip
    return tuple(answers)


def _answer(  # noqa: PLR0917  # ten facts of one port, named at the one call
    port: Port, topology: str, frequency: Real, road: ReturnRatio | str, form: ClosedForm | str,
    measured: Complex | None, unmeasured: str, neighbour: Complex | None, tolerance: float, sheet: Complex | None,
) -> PortAnswer:  # fmt: skip
    ratio = road if isinstance(road, ReturnRatio) else None
    closed = form if isinstance(form, ClosedForm) else None
    analytic = ratio.impedance if ratio is not None else closed.value if closed is not None else None
    notes = [text for text in (road, form) if isinstance(text, str)]
    if closed is not None and not closed.exact:
        notes.append("closed form not exact: " + "; ".join(closed.assumptions))
    gap = None if analytic is None or measured is None else difference(measured, analytic)
    verdict = verdict_of(gap, tolerance)
    because = ""
    if verdict == "unchecked":
        because = _why_unchecked(road, analytic, unmeasured)
    rule = closed.rule_of_thumb if closed is not None else None
    holds: Mapping[str, float | None] = {"1%": None, "10%": None}
    if rule is not None and analytic is not None:
        holds = holds_to(frequency, rule, analytic, neighbour)
    return PortAnswer(
        port=port, topology=topology, frequency=frequency, closed_form=closed, return_ratio=ratio,
        simulated=measured, difference=gap, holds_to_hz=holds, verdict=verdict, unchecked_because=because,
        data_sheet=sheet, notes=tuple(dict.fromkeys(notes)),
    )  # fmt: skip


def _why_unchecked(road: ReturnRatio | str, analytic: Complex | None, unmeasured: str) -> str:
    if analytic is None:
        return road if isinstance(road, str) else "no analytic value"
    if unmeasured:
        return unmeasured
    if not np.all(np.isfinite(analytic)):
        return "the port draws no current: its impedance is infinite"
    return "not simulated"
