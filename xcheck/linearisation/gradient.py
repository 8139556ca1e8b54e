"""First derivatives of an expression at a point: each rule of differentiation beside its function.

What has a corner (abs, min, a choice) has there the slope of the branch that is taken, as ngspice does.
"""

import math
from bisect import bisect_right
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from itertools import pairwise

from xcheck.circuit.trees import Binary, Call, Choice, Constant, Name, Node, Unary

Probe = tuple[str, tuple[str, ...]]
"""('v', (node,)), ('v', (node, node)) or ('i', (source,))."""
LEAST_BASE = 1e-300


class NoSlope(Exception):
    """Why an expression has no derivative here."""


@dataclass(frozen=True)
class Slope:
    """A value and its derivative by each probe that it depends on."""

    value: float
    by: Mapping[Probe, float] = field(default_factory=dict)

    def through(self, value: float, factor: float) -> "Slope":
        """A function of this alone: its value, and its derivative by the value."""
        return Slope(value, {probe: factor * slope for probe, slope in self.by.items()})


Rule = Callable[[float], tuple[float, float]]
"""A function of one argument: its value and its derivative."""

ONE: Mapping[str, Rule] = {
    "sqrt": lambda x: (math.sqrt(x), 0.5 / math.sqrt(x) if x > 0 else 0.0),
    "abs": lambda x: (abs(x), math.copysign(1.0, x)),
    "exp": lambda x: (math.exp(x), math.exp(x)),
    "ln": lambda x: (math.log(x), 1 / x),
    "log": lambda x: (math.log(x), 1 / x),
    "log10": lambda x: (math.log10(x), 1 / (x * math.log(10))),
    "sin": lambda x: (math.sin(x), math.cos(x)),
    "cos": lambda x: (math.cos(x), -math.sin(x)),
    "tan": lambda x: (math.tan(x), 1 + math.tan(x) ** 2),
    "asin": lambda x: (math.asin(x), 1 / math.sqrt(1 - x * x)),
    "acos": lambda x: (math.acos(x), -1 / math.sqrt(1 - x * x)),
    "atan": lambda x: (math.atan(x), 1 / (1 + x * x)),
    "arctan": lambda x: (math.atan(x), 1 / (1 + x * x)),
    "sinh": lambda x: (math.sinh(x), math.cosh(x)),
    "cosh": lambda x: (math.cosh(x), math.sinh(x)),
    "tanh": lambda x: (math.tanh(x), 1 - math.tanh(x) ** 2),
    "asinh": lambda x: (math.asinh(x), 1 / math.sqrt(x * x + 1)),
    "acosh": lambda x: (math.acosh(x), 1 / math.sqrt(x * x - 1)),
    "atanh": lambda x: (math.atanh(x), 1 / (1 - x * x)),
    "sqr": lambda x: (x * x, 2 * x),
    "u": lambda x: (float(x > 0), 0.0),
    "u2": lambda x: (min(max(x, 0.0), 1.0), float(0 < x < 1)),
    "uramp": lambda x: (max(x, 0.0), float(x > 0)),
    "sgn": lambda x: (float((x > 0) - (x < 0)), 0.0),
    "int": lambda x: (float(math.trunc(x)), 0.0),
    "nint": lambda x: (float(round(x)), 0.0),
    "floor": lambda x: (float(math.floor(x)), 0.0),
    "ceil": lambda x: (float(math.ceil(x)), 0.0),
    "eq0": lambda x: (float(x == 0), 0.0),
    "ne0": lambda x: (float(x != 0), 0.0),
    "gt0": lambda x: (float(x > 0), 0.0),
    "lt0": lambda x: (float(x < 0), 0.0),
    "ge0": lambda x: (float(x >= 0), 0.0),
    "le0": lambda x: (float(x <= 0), 0.0),
}

COMPARED: Mapping[str, Callable[[float, float], bool]] = {
    "==": lambda a, b: a == b, "=": lambda a, b: a == b, "!=": lambda a, b: a != b, "<>": lambda a, b: a != b,
    "<": lambda a, b: a < b, ">": lambda a, b: a > b, "<=": lambda a, b: a <= b, ">=": lambda a, b: a >= b,
    "&&": lambda a, b: bool(a) and bool(b), "&": lambda a, b: bool(a) and bool(b),
    "||": lambda a, b: bool(a) or bool(b), "|": lambda a, b: bool(a) or bool(b),
}  # fmt: skip


def slope_of(tree: Node, probed: Callable[[Probe], float], *, all_branches: bool = False) -> Slope:
    """The value of a resolved expression and its derivatives, at DC (time 0). probed: volt or ampere of a probe.
    all_branches: where one of several branches would be taken, the mean of them all. Raises NoSlope."""
    try:
        found = _Slopes(probed, all_branches).of(tree)
    except (ValueError, OverflowError, ZeroDivisionError, TypeError) as error:
        raise NoSlope(f"it has no value at the operating point ({error})") from error
    except RecursionError:
        raise NoSlope("its expression is nested too deep") from None
    except KeyError as missing:
        raise NoSlope(f"nothing is known of {missing.args[0]} at the operating point") from None
    if not all(map(math.isfinite, (found.value, *found.by.values()))):
        raise NoSlope("it has no finite slope at the operating point")
    return found


@dataclass(frozen=True)
class _Slopes:
    probed: Callable[[Probe], float]
    all_branches: bool

    def of(self, tree: Node) -> Slope:
        match tree:
            case Constant(value):
                return Slope(value)
            case Name(name):
                if name == "time":
                    return Slope(0.0)
                raise NoSlope(f"it depends on {name}")
            case Unary(operator, operand):
                inner = self.of(operand)
                return inner.through(-inner.value, -1.0) if operator == "-" else Slope(float(not inner.value))
            case Choice(condition, yes, no):
                return self.one_of(self.of(yes), self.of(no), lambda: bool(self.of(condition).value))
            case Binary(operator, left, right):
                return _binary(operator, self.of(left), self.of(right))
            case Call(function, _, words) if words:
                probe = (function, words)
                return Slope(self.probed(probe), {probe: 1.0})
            case Call(function, arguments):
                return self.call(function, [self.of(argument) for argument in arguments])
        raise NoSlope("it is no expression")

    def one_of(self, a: Slope, b: Slope, first: Callable[[], bool]) -> Slope:
        """The branch that is taken, or the mean of both."""
        if self.all_branches:
            return _sum(0.5 * (a.value + b.value), (0.5, a), (0.5, b))
        return a if first() else b

    def call(self, function: str, given: list[Slope]) -> Slope:
        """A function of slopes."""
        if function in ONE and len(given) == 1:
            return given[0].through(*ONE[function](given[0].value))
        match function, given:
            case "min", [a, b]:
                return self.one_of(a, b, lambda: a.value <= b.value)
            case "max", [a, b]:
                return self.one_of(a, b, lambda: a.value >= b.value)
            case "pow", [a, b]:
                return _power(a, b)
            case "pwr", [a, b]:
                size = _power(Slope(abs(a.value), a.through(0.0, math.copysign(1.0, a.value)).by), b)
                return size if a.value >= 0 else size.through(-size.value, -1.0)
            case "ternary_fcn", [condition, yes, no]:
                return self.one_of(yes, no, lambda: bool(condition.value))
            case "pwl", [x, *points]:
                return _between(x, [p.value for p in points], one_line=self.all_branches)
            case "table", [x, *points]:
                numbers = [p.value for p in points]
                return _between(x, numbers, one_line=True) if self.all_branches else _looked_up(x, numbers)
        raise NoSlope(f"the slope of `{function}` is not known")


def _sum(value: float, *parts: tuple[float, Slope]) -> Slope:
    by: dict[Probe, float] = {}
    for factor, part in parts:
        for probe, slope in part.by.items():
            by[probe] = by.get(probe, 0.0) + factor * slope
    return Slope(value, by)


def _binary(operator: str, a: Slope, b: Slope) -> Slope:
    if operator in "+-":
        sign = 1.0 if operator == "+" else -1.0
        return _sum(a.value + sign * b.value, (1.0, a), (sign, b))
    if operator == "*":
        return _sum(a.value * b.value, (b.value, a), (a.value, b))
    if operator == "/":
        quotient = a.value / b.value
        return _sum(quotient, (1 / b.value, a), (-quotient / b.value, b))
    if operator in ("**", "^"):
        return _power(a, b)
    if operator == "%":
        return a.through(math.fmod(a.value, b.value), 1.0)
    return Slope(float(COMPARED[operator](a.value, b.value)))


def _power(a: Slope, b: Slope) -> Slope:
    value = abs(a.value) ** b.value  # of the base's size whatever its sign, as ngspice 39 has it
    by_base = b.value * (value / a.value if a.value else float(b.value == 1))
    by_exponent = value * math.log(abs(a.value)) if abs(a.value) > LEAST_BASE and b.by else 0.0
    return _sum(value, (by_base, a), (by_exponent, b))


def _between(x: Slope, points: list[float], *, one_line: bool) -> Slope:
    """Straight lines between (x, y) pairs, the outermost going on beyond the ends as ngspice 39 has it; or one line
    from end to end."""
    xs, ys = _in_order(points)
    if one_line:
        rise = (ys[-1] - ys[0]) / (xs[-1] - xs[0])
        return x.through(ys[0] + rise * (x.value - xs[0]), rise)
    k = min(max(bisect_right(xs, x.value) - 1, 0), len(xs) - 2)
    rise = (ys[k + 1] - ys[k]) / (xs[k + 1] - xs[k])
    return x.through(ys[k] + rise * (x.value - xs[k]), rise)


def _looked_up(x: Slope, points: list[float]) -> Slope:
    """A TABLE source: straight lines between points, level beyond them, and each corner rounded by a parabola over a
    tenth of the shorter line to its either side, as ngspice 39 has it."""
    xs, ys = _in_order(points)
    lengths = [math.inf, *(b - a for a, b in pairwise(xs)), math.inf]
    rises = [0.0, *((d - c) / (b - a) for (a, b), (c, d) in zip(pairwise(xs), pairwise(ys), strict=True)), 0.0]
    for k, (corner, level) in enumerate(zip(xs, ys, strict=True)):
        reach = 0.1 * min(lengths[k], lengths[k + 1])
        if abs(x.value - corner) < reach:
            into = x.value - corner + reach
            bend = (rises[k + 1] - rises[k]) / (2 * reach)
            value = level - rises[k] * reach + rises[k] * into + 0.5 * bend * into**2
            return x.through(value, rises[k] + bend * into)
    k = bisect_right(xs, x.value)
    at = max(k - 1, 0)
    return x.through(ys[at] + rises[k] * (x.value - xs[at]), rises[k])


def _in_order(points: list[float]) -> tuple[list[float], list[float]]:
    xs, ys = points[0::2], points[1::2]
    if len(xs) != len(ys) or len(xs) < 2 or any(b <= a for a, b in pairwise(xs)):
        raise NoSlope("its table is not in order")
    return xs, ys
