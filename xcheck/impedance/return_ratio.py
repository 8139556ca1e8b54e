"""Impedance of every port by the return ratio of its stage's amplifier, in place and with all else alive.

Blackman, Effect of feedback on impedance, Bell Syst. Tech. J. 22 (1943):  Z = Z0 (1 + Tsc) / (1 + Toc).

By Cramer's rule a port's impedance is a ratio of two determinants, and so of two entries of the inverse Y of
the equations with the cut in place:

    input    1 V in series with the cut:      Z = Y[p, k] / Y[i, k]    k: the cut's voltage law
    output   1 A into the node at the cut:    Z = Y[p, o] / Y[i, o]    o: the current law outside the cut

with p the voltage on the stage's side and i the current into the stage. (1 A into the stage's side and
Z = V / (1 A - I(cut)) is the same: moving the ampere across the cut adds it to the cut's current.)
The numerator's determinant has the stage's side held at zero volt while the cut's current still flows
outside, the denominator's has the cut open. Each is affine in the gain of one controlled source, so

    1 + Tsc = numerator / numerator with the source dead       1 + Toc = the same of the denominator.

With y the source's output and r its equation, S = Y[y, r] = 1/(1 + T), and an entry N = Y[p, k] becomes
S N - Y[p, r] Y[y, k] once the source is dead (Jacobi's theorem on the minors of an inverse).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.equations import Equations, assemble
from xcheck.circuit.solution import inverse_by_part
from xcheck.errors import CallError
from xcheck.impedance.cuts import Cut, closed_sides, cut_apart, in_batches
from xcheck.impedance.linearity import obstacles
from xcheck.impedance.types import ReturnRatio
from xcheck.stages.types import Amplifier, Partition, Stage

INFINITE_OHM = 1e24
"""Above this nothing but rounding lets current in: a port on a gate that draws none."""

LARGEST_GAP = 1e-6
"""Between Blackman's product and the ratio itself, and of the part of a dead source's minor that rounding can
be. More means that the digits do not suffice to tell the source alive from dead."""


def return_ratios(partition: Partition, frequency: Real) -> dict[str, ReturnRatio | str]:
    """For the subject of every port its impedance by return ratio, or the reason why there is none.

    frequency: Hz, shape (F,); 0 is DC, with capacitors open and inductors short. Infinite impedances are
    numpy inf with no imaginary part.
    """
    still = frequency == 0
    if still.any() and not still.all():  # at DC other sides of the ports are open
        return _merged(return_ratios(partition, frequency[still]), return_ratios(partition, frequency[~still]), still)
    refused = obstacles(partition)
    answers: dict[str, ReturnRatio | str] = {
        port.subject: refused.get(stage.name, "") for stage in partition.stages for port in stage.ports
    }
    stages = [stage for stage in partition.stages if stage.name not in refused]
    amplifier = {port.subject: _amplifier_at(stage, port.node) for stage in stages for port in stage.ports}
    ports = [port for stage in stages for port in stage.ports]
    batches, uncut = in_batches(partition.circuit, ports)
    answers.update(uncut)
    for batch in batches:
        elements, cuts = cut_apart(partition.circuit, batch)
        gains = {amplifier[port.subject].gain_element for port in batch}
        try:
            equations = assemble(elements, [cut.branch for cut in cuts], gains)
            held = {c.port.subject for c in cuts if equations.node[c.inside] == equations.node[c.outside]}
            answers.update(dict.fromkeys(held, "a voltage source lies across the cut"))
            cuts = [cut for cut in cuts if cut.port.subject not in held]
            if held:
                equations = assemble(elements, [cut.branch for cut in cuts], gains)
        except CallError as error:
            answers.update({cut.port.subject: str(error) for cut in cuts})
            continue
        sources = [amplifier[cut.port.subject].gain_element for cut in cuts]
        answers.update(_answers(equations, cuts, sources, frequency))
    return answers


def loop_gains(partition: Partition, frequency: Real) -> dict[str, Complex]:
    """Return ratio T of every amplifier's gain element, all else alive and the ports closed, shape (F,), by
    amplifier name; inf where the loop integrates at DC. Negative feedback gives T > 0. Amplifiers that the
    linear equations cannot speak for are left out."""
    refused = obstacles(partition)
    amplifiers = [a for stage in partition.stages if stage.name not in refused for a in stage.amplifiers]
    sources = [a.gain_element for a in amplifiers]
    try:
        equations = assemble(partition.circuit.elements, explicit=set(sources))
    except CallError:
        return {}
    wanted = _Wanted()
    loops = [_Loop.of(equations, source, wanted) for source in sources]
    inverse, failures = wanted.entries(equations, frequency)
    return {
        amplifier.name: _ratio(-loop.returned(inverse), inverse[loop.sensitivity])
        for amplifier, loop in zip(amplifiers, loops, strict=True)
        if not failures.get(loop.sensitivity)
    }


def _merged(
    still: dict[str, ReturnRatio | str], moving: dict[str, ReturnRatio | str], where: NDArray[np.bool_]
) -> dict[str, ReturnRatio | str]:
    """The answers at DC and above it as one; where: (F,) DC."""
    merged: dict[str, ReturnRatio | str] = {}
    for subject, at_dc in still.items():
        above = moving[subject]
        if isinstance(at_dc, str) or isinstance(above, str):
            merged[subject] = at_dc if isinstance(at_dc, str) else above
            continue
        fields = []
        for name in ("z0", "t_short", "t_open", "impedance"):
            field = np.empty(len(where), dtype=np.complex128)
            field[where], field[~where] = getattr(at_dc, name), getattr(above, name)
            fields.append(field)
        merged[subject] = ReturnRatio(above.source, *fields)
    return merged


def _amplifier_at(stage: Stage, node: str) -> Amplifier:
    """The amplifier that a port's Blackman formula is written for: the one whose output or input it is."""
    by_output = [a for a in stage.amplifiers if a.output == node]
    by_input = [a for a in stage.amplifiers if node in (a.non_inverting, a.inverting)]
    return (by_output or by_input or list(stage.amplifiers))[0]


class _Wanted:
    """The entries of the inverse to ask for, each once. Ground does not move: its entries are 0."""

    def __init__(self) -> None:
        self.places: dict[tuple[int, int], int] = {}

    def add(self, unknown: int, row: int) -> int:
        return self.places.setdefault((unknown, row), len(self.places))

    def entries(self, equations: Equations, frequency: Real) -> tuple[Complex, dict[int, str]]:
        """The entries, (W, F), and why some could not be had."""
        asked = np.array(list(self.places), dtype=np.int64).reshape(-1, 2)
        result = np.zeros((len(asked), len(frequency)), dtype=np.complex128)
        there = np.flatnonzero((asked >= 0).all(axis=1))
        result[there], failures = inverse_by_part(equations, frequency, asked[there, 0], asked[there, 1])
        return result, {int(there[index]): reason for index, reason in failures.items()}


@dataclass(frozen=True, slots=True)
class _Loop:
    """A controlled source's loop: where in the inverse its S stands, and the quantities that it reads, each
    with its gain."""

    unknown: int
    row: int
    sensitivity: int
    reads: tuple[tuple[float, int], ...]

    @classmethod
    def of(cls, equations: Equations, source: str, wanted: _Wanted) -> "_Loop":
        unknown, row = equations.output[source]
        start, end = np.searchsorted(equations.rows, [row, row + 1])
        reads = tuple(
            (-float(equations.conductance[e]), wanted.add(int(equations.columns[e]), row))
            for e in range(start, end)
            if equations.columns[e] != unknown
        )
        return cls(unknown, row, wanted.add(unknown, row), reads)

    def returned(self, inverse: Complex) -> Complex:
        """What a unit put on the source's output brings back to it, -T/(1 + T), without taking 1 from S."""
        total: Complex = np.zeros(inverse.shape[1], dtype=np.complex128)
        for gain, place in self.reads:
            total = total + gain * inverse[place]
        return total


def _ratio(numerator: Complex, denominator: Complex) -> Complex:
    """The quotient, with inf for what has no denominator and 0 for 0/0."""
    result = np.zeros(np.broadcast_shapes(numerator.shape, denominator.shape), dtype=np.complex128)
    with np.errstate(all="ignore"):
        np.divide(numerator, denominator, out=result, where=denominator != 0)
    result[(denominator == 0) & (numerator != 0)] = np.inf
    return result


def _answers(
    equations: Equations, cuts: Sequence[Cut], sources: Sequence[str], frequency: Real
) -> dict[str, ReturnRatio | str]:
    """The answers of the ports of one set of equations, by subject."""
    wanted = _Wanted()
    loops = {source: _Loop.of(equations, source, wanted) for source in dict.fromkeys(sources)}
    answers: dict[str, ReturnRatio | str] = {}
    places: list[tuple[Cut, str, bool, tuple[int, ...]]] = []
    inside, outside = closed_sides(equations, cuts, dc=not frequency.any())
    for cut, source, closed, alone in zip(cuts, sources, inside, outside, strict=True):
        voltage, current = equations.node[cut.inside], equations.branch[cut.branch.name]
        loop = loops[source]
        by_current = cut.port.side == "output" or cut.port.current_driven or alone
        test = equations.node[cut.outside] if by_current else current
        if test < 0:
            answers[cut.port.subject] = "its node is held by a voltage source, so no test current can move it"
            continue
        pairs = [(voltage, test), (current, test), (voltage, loop.row), (current, loop.row)]
        pairs.append((loop.unknown, test))
        places.append((cut, source, closed, tuple(wanted.add(*pair) for pair in pairs)))
    inverse, failures = wanted.entries(equations, frequency)
    for cut, source, closed, own in places:
        loop = loops[source]
        failed = [failures[place] for place in (loop.sensitivity, *own) if place in failures]
        answers[cut.port.subject] = failed[0] if failed else _blackman(inverse, source, loop, own, closed)
    return answers


def _blackman(
    inverse: Complex, source: str, loop: _Loop, places: tuple[int, ...], no_current: bool
) -> ReturnRatio | str:
    """Blackman's quantities of one port from the entries (V, test), (I, test), (V, r), (I, r), (y, test);
    no_current: the stage's side lets none in."""
    voltage, current, voltage_by_source, current_by_source, output = (inverse[place] for place in places)
    sensitivity, returned = inverse[loop.sensitivity], loop.returned(inverse)
    in_place = _ratio(-returned, sensitivity)
    closed = (np.abs(current) * INFINITE_OHM <= np.abs(voltage)) | no_current
    current = np.where(closed, 0, current)
    short, lost_short = _dead(sensitivity, voltage, voltage_by_source, output)
    opened, lost_open = _dead(sensitivity, current, current_by_source, output)
    opened = np.where(closed, 0, opened)
    t_short = _ratio(output * voltage_by_source - returned * voltage, short)
    t_open = _ratio(output * current_by_source - returned * current, opened)
    t_open = np.where(closed, in_place, t_open)
    direct, z0 = _ratio(voltage, current), _ratio(short, opened)
    with np.errstate(all="ignore"):
        impedance = z0 * (1 + t_short) / (1 + t_open)
    impedance = np.where(np.isfinite(impedance), impedance, direct)
    lost = max(float(lost_short.max(initial=0.0)), float(np.where(closed, 0, lost_open).max(initial=0.0)))
    gap = np.abs(np.subtract(impedance, direct, where=~closed, out=np.zeros_like(direct)))
    if lost > LARGEST_GAP or (gap > LARGEST_GAP * np.abs(direct))[~closed].any():
        return f"double precision does not suffice to tell {source} alive from dead"
    return ReturnRatio(source, z0, t_short, t_open, impedance)


def _dead(sensitivity: Complex, entry: Complex, by_source: Complex, output: Complex) -> tuple[Complex, Real]:
    """S times an entry of the inverse with the source dead, and how much of it may be rounding."""
    kept, taken = sensitivity * entry, by_source * output
    rest = kept - taken
    size = np.abs(kept) + np.abs(taken)
    rounding = np.finfo(np.float64).eps * size
    lost = np.divide(rounding, np.abs(rest), out=np.zeros(len(rest)), where=np.abs(rest) > 4 * rounding)
    return np.where(np.abs(rest) > 4 * rounding, rest, 0), lost
