"""Answers about ports: the four numbers over frequency and what they mean together."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from xcheck.circuit.arrays import Complex, Real
from xcheck.stages.types import Port

Verdict = Literal["agrees", "disagrees", "unchecked"]


@dataclass(frozen=True)
class ClosedForm:
    """The closed form of one port of a recognised topology.

    formula: readable, ASCII, in places (`Z1 + 1/(1/Zic + ...)`); numbers: the same with values put in at
    DC or mid band, in engineering notation; value: ohm, shape (F,); rule_of_thumb: ohm, shape (F,), numpy
    inf where infinite; rule_text: 'R1', 'infinite', 'zero'; exact: no premise was dropped, so it must equal
    the return ratio; assumptions: the premises dropped, in words.
    """

    formula: str
    numbers: str
    value: Complex
    rule_of_thumb: Complex
    rule_text: str
    exact: bool = True
    assumptions: tuple[str, ...] = ()


@dataclass(frozen=True)
class ReturnRatio:
    """Blackman's quantities of one port for one controlled source, all else alive; shape (F,) each.

    z0: ohm, the port's impedance with the source dead; t_short, t_open: return ratios with the port shorted
    and open; impedance: z0 (1 + t_short) / (1 + t_open), ohm.
    """

    source: str
    z0: Complex
    t_short: Complex
    t_open: Complex
    impedance: Complex


@dataclass(frozen=True)
class PortAnswer:
    """All that is known of a port on one frequency grid (Hz, shape (F,)). None: not to be had, and
    `unchecked_because` or `notes` say why. difference: |Zsim - Zan|/|Zan|, shape (F,), on `frequency`;
    holds_to_hz: {'1%': Hz, '10%': Hz}, None where the rule of thumb holds over the whole grid or cannot be
    judged; data_sheet: the return ratio's value with the amplifiers' data sheets in place of their models."""

    port: Port
    topology: str
    frequency: Real
    closed_form: ClosedForm | None
    return_ratio: ReturnRatio | None
    simulated: Complex | None
    difference: Real | None
    holds_to_hz: Mapping[str, float | None]
    verdict: Verdict
    unchecked_because: str = ""
    data_sheet: Complex | None = None
    notes: tuple[str, ...] = ()

    @property
    def analytic(self) -> Complex | None:
        """The analytic value that the simulation is held against: the return ratio, which every linear
        stage has and which is in place; else the closed form."""
        if self.return_ratio is not None:
            return self.return_ratio.impedance
        return None if self.closed_form is None else self.closed_form.value
