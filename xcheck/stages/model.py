"""Linear amplifier models reduced exactly: small dense nodal equations of the amplifier's own elements.

With the signal pins p and n driven by voltages, the output pin o by a current and all other pins at AC ground,
three solutions give everything that a stage can see of the amplifier (an h-parameter description with two
voltage-driven ports and one current-driven port).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import GROUND, Controlled, Coupling, Device, Element, Passive, Source
from xcheck.stages.types import AmplifierResponse, OpenLoop, Quantity

NEGLIGIBLE = 1e-9
"""Relative size below which a path back, or a difference between two admittances, is rounding."""
LEAST_SIEMENS = 1e-16
"""An input conductance below this is rounding beside the currents of the model: no resistance at all."""
NEARLY_DC = 1e-6
"""Hz: low enough to stand for DC, and the equations of a model whose gain has a pole at zero stay solvable."""


@dataclass(frozen=True, slots=True)
class Bench:
    """An amplifier on the bench: A(s) = g + s c; the first rows are nodes, then branch currents.

    index: row of each node. Driven pins get voltage-source branches in the order given.
    """

    g: Real
    c: Real
    index: dict[str, int]
    branch_of_pin: dict[str, int]

    def solve(self, s: Complex, stimuli: Sequence[tuple[str, str, float]]) -> Complex:
        """Solutions, shape (F, rows, stimuli): each stimulus is ('v', pin, volt) or ('i', node, ampere)."""
        right = np.zeros((len(self.g), len(stimuli)), dtype=np.complex128)
        for column, (kind, pin, value) in enumerate(stimuli):
            right[self.branch_of_pin[pin] if kind == "v" else self.index[pin], column] = value
        matrix = self.g[None] + s[:, None, None] * self.c[None]
        solution: Complex = np.linalg.solve(matrix, np.broadcast_to(right, (len(s), *right.shape))).astype(
            np.complex128
        )
        return solution


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
    return Bench(g, c, index, pins)


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
        target, value = (c, element.value) if element.kind == "c" else (g, 1.0 / element.value)
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
            columns = [(branches[term.source], 1.0)]
        for r, sign_r in rows:
            for column, sign_c in columns:
                g[r, column] += sign_r * sign_c * term.gain


def _couple(element: Coupling, elements: Sequence[Element], c: Real, branches: dict[str, int]) -> None:
    values = {e.name: e.value for e in elements if isinstance(e, Passive) and e.kind == "l"}
    first, second = element.inductors
    mutual = element.factor * float(np.sqrt(values[first] * values[second]))
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

    def response(self, frequency: Real) -> AmplifierResponse:
        """See AmplifierModel."""
        return self._reduce(_s(frequency))[0]

    def _reduce(self, s: Complex) -> tuple[AmplifierResponse, float]:
        """The response and the largest sign of a path back from output to inputs, relative (0 for none)."""
        pins = [p for p in (self.plus, self.minus) if p != GROUND]
        stimuli = [("v", p, 1.0) for p in pins] + [("i", self.output, 1.0)]
        solution = self.bench.solve(s, stimuli)
        o = self.bench.index[self.output]
        none = np.zeros(len(s), dtype=np.complex128)
        gain = {p: solution[:, o, k] for k, p in enumerate(pins)}
        # the branch current flows out of the node into the pin's source, so into the pin is its negative
        into = {(p, q): -solution[:, self.bench.branch_of_pin[p], k] for p in pins for k, q in enumerate(pins)}
        back = max(
            (float(np.max(np.abs(solution[:, self.bench.branch_of_pin[p], len(pins)]))) for p in pins), default=0.0
        )
        across = none if len(pins) < 2 else -into[self.plus, self.minus]
        gain_minus = gain.get(self.minus, none)
        gain_plus = gain.get(self.plus, none)
        if self.minus == GROUND:
            gain_minus = -gain_plus
        if self.plus == GROUND:
            gain_plus = -gain_minus
        response = AmplifierResponse(
            gain_plus=gain_plus,
            gain_minus=gain_minus,
            y_differential=across,
            y_plus=into[self.plus, self.plus] - across if self.plus in gain else none,
            y_minus=into[self.minus, self.minus] - across if self.minus in gain else none,
            z_output=solution[:, o, len(pins)],
        )
        return response, back

    def has_path_back(self) -> bool:
        """Whether a current into the output moves the input pins' currents."""
        return self._reduce(_s(np.array([1.0, 1e3, 1e6])))[1] > NEGLIGIBLE

    def poles_and_zeros(self) -> tuple[Complex, Complex]:
        """Finite natural frequencies with the inputs held, and zeros of the gain, in rad/s; cancelling pairs
        are left out. Generalised eigenvalues of the pencil g + s c."""
        from scipy.linalg import eigvals

        pin = self.minus if self.minus != GROUND else self.plus
        size = len(self.bench.g)
        g, c = np.zeros((size + 1, size + 1)), np.zeros((size + 1, size + 1))
        g[:size, :size], c[:size, :size] = self.bench.g, self.bench.c
        g[self.bench.branch_of_pin[pin], size] = 1.0
        g[size, self.bench.index[self.output]] = 1.0
        poles = _finite(eigvals(-self.bench.g, self.bench.c))
        zeros = _finite(eigvals(-g, c))
        return _without_pairs(poles, zeros)


def _s(frequency: Real) -> Complex:
    """Complex frequency in rad/s."""
    return (2j * np.pi * frequency).astype(np.complex128)


def _finite(values: NDArray[Any]) -> Complex:
    """Eigenvalues below 1e15 rad/s: a singular c puts the others at infinity, in rounding somewhere beyond."""
    good: Complex = values[np.isfinite(values) & (np.abs(values) < 1e15)].astype(np.complex128)
    return good[np.argsort(np.abs(good), kind="stable")]


def _without_pairs(poles: Complex, zeros: Complex) -> tuple[Complex, Complex]:
    left = list(zeros)
    kept = []
    for pole in poles:
        near = [k for k, zero in enumerate(left) if abs(zero - pole) <= 1e-6 * max(abs(pole), 1e-3)]
        if near:
            left.pop(near[0])
        else:
            kept.append(pole)
    return np.array(kept, dtype=np.complex128), np.array(left, dtype=np.complex128)


def open_loop(model: LinearModel) -> OpenLoop:
    """The model's values by name, all read from the deck's own elements."""
    at = model.response(np.array([NEARLY_DC, 1.0]))
    low = {name: complex(getattr(at, name)[0]) for name in AmplifierResponse.__slots__}
    one = {name: complex(getattr(at, name)[1]) for name in AmplifierResponse.__slots__}
    poles, _ = model.poles_and_zeros()
    hertz = tuple(float(abs(p)) / (2 * np.pi) for p in poles)
    integrates = bool(hertz) and hertz[0] < NEARLY_DC
    gain = None if integrates else abs(low["gain_minus"])
    symmetric = _symmetric(model)
    values = {
        "gain": gain,
        "poles_hz": hertz,
        "gain_bandwidth_hz": abs(one["gain_minus"]) if gain is None else gain * hertz[0] if hertz else None,
        "input_resistance_ohm": _ohm(low["y_differential"]),
        "input_capacitance_f": one["y_differential"].imag / (2 * np.pi),
        "common_mode_resistance_ohm": _ohm((low["y_plus"] + low["y_minus"]) / 2),
        "common_mode_capacitance_f": (one["y_plus"] + one["y_minus"]).imag / (4 * np.pi),
        "output_resistance_ohm": low["z_output"].real,
    }
    back = model.has_path_back()
    reason = "its output acts back on its inputs" if back else "" if symmetric else "its input pair is not reciprocal"
    quantities = {name: Quantity(value, "deck") for name, value in values.items()}
    return OpenLoop(quantities, model, exact=not back and symmetric, reason=reason)


def _symmetric(model: LinearModel) -> bool:
    """Whether the admittance between the inputs is the same seen from both."""
    if GROUND in (model.plus, model.minus):
        return True
    s = _s(np.array([1.0, 1e5]))
    solution = model.bench.solve(s, [("v", model.plus, 1.0), ("v", model.minus, 1.0)])
    one = solution[:, model.bench.branch_of_pin[model.plus], 1]
    other = solution[:, model.bench.branch_of_pin[model.minus], 0]
    return bool(np.all(np.abs(one - other) <= NEGLIGIBLE * (np.abs(one) + np.abs(other)) + 1e-18))


def _ohm(admittance: complex) -> float | None:
    """Resistance of an admittance, None (infinite) below LEAST_SIEMENS."""
    return 1.0 / admittance.real if abs(admittance.real) > LEAST_SIEMENS else None
