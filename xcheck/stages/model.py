"""Linear amplifier models reduced exactly: small dense nodal equations of the amplifier's own elements.

With the signal pins p and n driven by voltages, the output pin o by a current and all other pins at AC ground,
three solutions give everything that a stage can see of the amplifier (an h-parameter description with two
voltage-driven ports and one current-driven port).
"""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import GROUND, Controlled, Coupling, Device, Element, Passive, Source
from xcheck.stages.influence import influence, reach, reversed_edges
from xcheck.stages.types import AmplifierResponse, OpenLoop, Quantity

NEGLIGIBLE = 1e-9
"""Relative size below which a path back, or a difference between two admittances, is rounding."""
LEAST_SIEMENS = 1e-16
"""An input conductance below this is rounding beside the currents of the model: no resistance at all."""
NEARLY_DC = 1e-6
"""Hz: low enough to stand for DC, and the equations of a model whose gain has a pole at zero stay solvable."""
ZERO_OHM = 1e-3
"""What a resistor written as 0 is to ngspice, in ohm (seen on version 39)."""
FASTEST = 1e15
"""rad/s: natural frequencies beyond are those of a capacitor held between sources, at infinity but for rounding."""


@dataclass(frozen=True, slots=True)
class Bench:
    """An amplifier on the bench: A(s) = g + s c; the first rows are nodes, then branch currents.

    index: row of each node; branch: row of each branch current by element name. Driven pins get
    voltage-source branches of their own.
    """

    elements: tuple[Element, ...]
    g: Real
    c: Real
    index: dict[str, int]
    branch: dict[str, int]
    branch_of_pin: dict[str, int]

    def solve(self, s: Complex, stimuli: Sequence[tuple[str, str, float]]) -> Complex:
        """Solutions, shape (F, rows, stimuli): each stimulus is ('v', pin, volt) or ('i', node, ampere)."""
        right = np.zeros((len(self.g), len(stimuli)), dtype=np.complex128)
        for column, (kind, pin, value) in enumerate(stimuli):
            right[self.branch_of_pin[pin] if kind == "v" else self.index[pin], column] = value
        matrix = self.g[None] + s[:, None, None] * self.c[None]
        repeated = np.broadcast_to(right, (len(s), *right.shape))
        return np.asarray(np.linalg.solve(matrix, repeated), dtype=np.complex128)

    def solve_dc(self, stimuli: Sequence[tuple[str, str, float]]) -> Complex:
        """Solutions at DC, shape (rows, stimuli). Where capacitors alone hold a node, near DC on the real axis of s,
        where an integrator's gain is real too."""
        near: Complex = self.solve(np.array([2 * np.pi * NEARLY_DC], dtype=np.complex128), stimuli)[0]
        try:
            at: Complex = self.solve(np.zeros(1, dtype=np.complex128), stimuli)[0]
        except np.linalg.LinAlgError:
            return near
        # where the equations have no solution at DC, rounding makes one that is far off
        return at if np.all(np.abs(at - near).max(axis=0) <= 1e-3 * np.abs(near).max(axis=0)) else near


def bench(elements: Sequence[Element], held: Sequence[str]) -> Bench:
    """The equations of some elements with the nodes `held` driven by voltage sources (0 V unless driven)."""
    nodes = dict.fromkeys(n for e in elements for n in (*e.nodes, *_sensed(e)) if n != GROUND)
    nodes.update(dict.fromkeys(n for n in held if n != GROUND))
    index = {node: k for k, node in enumerate(nodes)}
    branches: dict[str, int] = {}
    for element in elements:
        if _has_branch(element):
            branches[element.name] = len(index) + len(branches)
    pins = {pin: len(index) + len(branches) + k for k, pin in enumerate(n for n in held if n != GROUND)}
    size = len(index) + len(branches) + len(pins)
    g, c = np.zeros((size, size)), np.zeros((size, size))
    for element in elements:
        _stamp(element, g, c, index, branches)
    for pin, row in pins.items():
        g[row, index[pin]] = g[index[pin], row] = 1.0
    for element in elements:
        if isinstance(element, Coupling):
            _couple(element, elements, c, branches)
    return Bench(tuple(elements), g, c, index, branches, pins)


def _sensed(element: Element) -> tuple[str, ...]:
    return element.sensing if isinstance(element, (Controlled, Device)) else ()


def _has_branch(element: Element) -> bool:
    if isinstance(element, Passive):
        return element.kind == "l"
    if isinstance(element, Controlled):
        return element.kind in "eh"
    return isinstance(element, Source) and element.kind == "v"


def _stamp(element: Element, g: Real, c: Real, index: dict[str, int], branches: dict[str, int]) -> None:
    if isinstance(element, Device):
        raise TypeError(f"{element.name} is not linear")
    if isinstance(element, Coupling) or (isinstance(element, Source) and element.kind == "i"):
        return
    ends = [(index[n], sign) for n, sign in zip(element.nodes, (1.0, -1.0), strict=True) if n != GROUND]
    row = branches.get(element.name)
    if row is not None:
        for node, sign in ends:
            g[node, row] += sign
            g[row, node] += sign
    if isinstance(element, Passive):
        if row is not None:
            c[row, row] -= element.value
            return
        target, value = (c, element.value) if element.kind == "c" else (g, 1.0 / (element.value or ZERO_OHM))
        for a, sign_a in ends:
            for b, sign_b in ends:
                target[a, b] += sign_a * sign_b * value
    elif isinstance(element, Controlled):
        _stamp_gains(element, g, [(row, -1.0)] if row is not None else ends, index, branches)


def _stamp_gains(
    element: Controlled, g: Real, rows: Sequence[tuple[int, float]], index: dict[str, int], branches: dict[str, int]
) -> None:
    for term in element.terms:
        columns = [(index[n], s) for n, s in ((term.positive, 1.0), (term.negative, -1.0)) if n != GROUND]
        if term.source:
            if term.source not in branches:
                raise np.linalg.LinAlgError(f"{element.name} reads the current of {term.source}, which is not here")
            columns = [(branches[term.source], 1.0)]
        for r, sign_r in rows:
            for column, sign_c in columns:
                g[r, column] += sign_r * sign_c * term.gain


def _couple(element: Coupling, elements: Sequence[Element], c: Real, branches: dict[str, int]) -> None:
    values = {e.name: e.value for e in elements if isinstance(e, Passive) and e.kind == "l"}
    if not set(element.inductors) <= values.keys():
        raise np.linalg.LinAlgError(f"{element.name} couples inductors that are not here")
    first, second = element.inductors
    mutual = element.factor * float(np.sqrt(abs(values[first] * values[second])))
    c[branches[first], branches[second]] -= mutual
    c[branches[second], branches[first]] -= mutual


@dataclass(frozen=True)
class LinearModel:
    """An amplifier's own elements with its signal pins; satisfies AmplifierModel. A pin that is ground, or that
    the amplifier does not have, is '0'."""

    bench: Bench
    plus: str
    minus: str
    output: str
    _last: dict[bytes, AmplifierResponse] = field(default_factory=dict, repr=False, compare=False)

    def response(self, frequency: Real) -> AmplifierResponse:
        """See AmplifierModel. Many amplifiers of a circuit share one model and ask on one grid: the last answer
        is kept."""
        key = frequency.tobytes()
        if key not in self._last:
            self._last.clear()
            self._last[key] = self.at(_s(frequency))
        return self._last[key]

    @property
    def pins(self) -> list[str]:
        """The driven signal pins."""
        return [p for p in (self.plus, self.minus) if p != GROUND]

    @property
    def stimuli(self) -> list[tuple[str, str, float]]:
        """A volt at each input pin in turn, then an ampere into the output."""
        return [*(("v", p, 1.0) for p in self.pins), ("i", self.output, 1.0)]

    def at(self, s: Complex) -> AmplifierResponse:
        """The response at complex frequencies in rad/s, shape (F,)."""
        return self._reduced(self.bench.solve(s, self.stimuli))

    def at_dc(self) -> AmplifierResponse:
        """The response at DC, shape (1,)."""
        return self._reduced(self.bench.solve_dc(self.stimuli)[None])

    def into_pins(self) -> dict[tuple[str, str], float]:
        """Siemens at DC: the current into an input ('plus', 'minus') by the voltage at one, the other held."""
        solution = self.bench.solve_dc(self.stimuli)
        names = [(side, pin) for side, pin in (("plus", self.plus), ("minus", self.minus)) if pin != GROUND]
        return {
            (a, b): -float(solution[self.bench.branch_of_pin[pin], k].real)
            for a, pin in names
            for k, (b, _) in enumerate(names)
        }

    def _reduced(self, solution: Complex) -> AmplifierResponse:
        """The response from the solutions for the three stimuli, shape (F, rows, stimuli)."""
        o = self.bench.index[self.output]
        none = np.zeros(len(solution), dtype=np.complex128)
        gain = {p: solution[:, o, k] for k, p in enumerate(self.pins)}
        # the branch current flows out of the node into the pin's source, so into the pin is its negative
        into = {
            (p, q): -solution[:, self.bench.branch_of_pin[p], k] for p in self.pins for k, q in enumerate(self.pins)
        }
        across = none if len(self.pins) < 2 else -into[self.plus, self.minus]
        gain_plus, gain_minus = gain.get(self.plus, none), gain.get(self.minus, none)
        return AmplifierResponse(
            gain_plus=-gain_minus if self.plus == GROUND else gain_plus,
            gain_minus=-gain_plus if self.minus == GROUND else gain_minus,
            y_differential=across,
            y_plus=into[self.plus, self.plus] - across if self.plus in gain else none,
            y_minus=into[self.minus, self.minus] - across if self.minus in gain else none,
            z_output=solution[:, o, len(self.pins)],
        )

    def beyond_three_pins(self) -> str:
        """What the three-pin description does not say of the elements, '' where it says all."""
        solution = self.bench.solve(_s(np.array([1.0, 1e3, 1e6])), self.stimuli)
        rows = [self.bench.branch_of_pin[p] for p in self.pins]
        if np.max(np.abs(solution[:, rows, len(self.pins)]), initial=0.0) > NEGLIGIBLE:
            return "its output acts back on its inputs"
        if len(rows) == 2:
            one, other = solution[:, rows[0], 1], solution[:, rows[1], 0]
            if np.any(np.abs(one - other) > NEGLIGIBLE * (np.abs(one) + np.abs(other)) + 1e-18):
                return "its output acts back on its inputs, or its input pair is not reciprocal"
        return ""

    def poles(self) -> Complex:
        """The finite natural frequencies of the gain, rad/s, by magnitude; see `natural_frequencies`."""
        bench = self.bench
        held = [*bench.branch_of_pin, GROUND]
        edges = influence(bench.elements, held)
        alive = reach(self.pins, edges) & {*reach([self.output], reversed_edges(edges)), self.output}
        swinging = [e for e in bench.elements if alive & set(e.nodes) or isinstance(e, Coupling)]
        return natural_frequencies(bench, swinging)


def natural_frequencies(bench: Bench, elements: Sequence[Element]) -> Complex:
    """The s, by magnitude, at which the bench swings by itself with the capacitors and inductors among some
    elements alive, the other capacitors open and inductors short.

    With c = B D B' and one column of B a reactive element, det(g + s c) = det(g) det(1 + s D B' g^-1 B), so the
    natural frequencies are -1 over the eigenvalues of a matrix no larger than the number of reactive elements,
    and those at infinity are its zero eigenvalues.
    """
    columns, sizes = [], []
    for element in elements:
        if isinstance(element, Passive) and element.kind in "cl":
            column = np.zeros(len(bench.g))
            if element.kind == "l":
                column[bench.branch[element.name]] = 1.0
            else:
                for node, sign in zip(element.nodes, (1.0, -1.0), strict=True):
                    if node != GROUND:
                        column[bench.index[node]] += sign
            columns.append(column)
            sizes.append(element.value if element.kind == "c" else -element.value)
    if not columns:
        return np.zeros(0, dtype=np.complex128)
    b, d = np.array(columns).T, np.diag(sizes)
    coils = {e.name: k for k, e in enumerate(e for e in elements if isinstance(e, Passive) and e.kind in "cl")}
    for element in elements:
        if isinstance(element, Coupling) and set(element.inductors) <= coils.keys():
            i, j = (coils[name] for name in element.inductors)
            d[i, j] = d[j, i] = -element.factor * float(np.sqrt(abs(d[i, i] * d[j, j])))
    shift = 0.0
    try:
        answer = np.linalg.solve(bench.g, b)
    except np.linalg.LinAlgError:  # a pole at zero: count from a frequency at which there is none
        shift = 1.0
        answer = np.linalg.solve(bench.g + shift * bench.c, b)
    times = np.linalg.eigvals(d @ b.T @ answer).astype(np.complex128)
    times = times[np.abs(times) > 1 / FASTEST]
    s = shift - 1 / times
    s[np.abs(s) < 1e-9 * shift] = 0.0
    return s[np.argsort(np.abs(s), kind="stable")]


def _s(frequency: Real) -> Complex:
    """Complex frequency in rad/s."""
    return (2j * np.pi * frequency).astype(np.complex128)


def open_loop(model: LinearModel) -> OpenLoop:
    """The model's values by name, all read from the deck's own elements. Raises LinAlgError where the elements
    alone have no solution."""
    dc, one = model.at_dc(), model.at(_s(np.array([1.0])))
    sides = [side for side in ("plus", "minus") if getattr(model, side) != GROUND]
    hertz = tuple(float(abs(p)) / (2 * np.pi) for p in model.poles())
    gain = float(abs(dc.gain_plus[0] - dc.gain_minus[0])) / 2
    infinite = bool(hertz) and hertz[0] == 0
    to_ground = sum(complex(getattr(dc, f"y_{side}")[0]) for side in sides) / len(sides)
    at_one_hertz = sum(complex(getattr(one, f"y_{side}")[0]) for side in sides) / len(sides)
    values = {
        "gain": None if infinite else gain,
        "poles_hz": hertz,
        "gain_bandwidth_hz": gain * NEARLY_DC if infinite else gain * hertz[0] if hertz else None,
        "input_resistance_ohm": _ohm(complex(dc.y_differential[0])),
        "input_capacitance_f": float(one.y_differential[0].imag) / (2 * np.pi),
        "common_mode_resistance_ohm": _ohm(to_ground),
        "common_mode_capacitance_f": at_one_hertz.imag / (2 * np.pi),
        "output_resistance_ohm": float(dc.z_output[0].real),
    }
    reason = model.beyond_three_pins()
    quantities = {name: Quantity(value, "deck") for name, value in values.items()}
    return OpenLoop(quantities, model, exact=not reason, reason=reason)


def _ohm(admittance: complex) -> float | None:
    """Resistance of an admittance, None (infinite) below LEAST_SIEMENS."""
    return 1.0 / admittance.real if abs(admittance.real) > LEAST_SIEMENS else None


def measured(loop: OpenLoop) -> OpenLoop:
    """The same values, said to come from a simulator's operating point rather than from the deck's own elements."""
    return replace(loop, values={name: Quantity(q.value, "measured") for name, q in loop.values.items()})
