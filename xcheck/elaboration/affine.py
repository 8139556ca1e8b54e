"""Linear forms of behavioural expressions: constant + sum of gain times V(a, b) or I(source)."""

from dataclasses import dataclass, field

from xcheck.circuit.trees import Binary, Call, Name, Node, Unary
from xcheck.elaboration.expressions import Evaluator, ExpressionError

Probe = tuple[str, tuple[str, ...]]
"""('v', (node,)), ('v', (node, node)) or ('i', (source,))."""


@dataclass
class Linear:
    """constant + sum of gains times probes."""

    constant: float = 0.0
    gains: dict[Probe, float] = field(default_factory=dict)

    def scaled(self, factor: float) -> "Linear":
        return Linear(self.constant * factor, {p: g * factor for p, g in self.gains.items()})

    def plus(self, other: "Linear", sign: float = 1.0) -> "Linear":
        gains = dict(self.gains)
        for probe, gain in other.gains.items():
            gains[probe] = gains.get(probe, 0.0) + sign * gain
        return Linear(self.constant + sign * other.constant, gains)


def probes_in(tree: Node) -> list[Probe]:
    """All probes of an expression in order of mention, each once."""
    found: dict[Probe, None] = {}
    waiting: list[object] = [tree]
    while waiting:
        node = waiting.pop(0)
        if isinstance(node, Call):
            if node.words:
                found.setdefault((node.function, node.words))
            waiting += node.arguments
        elif hasattr(node, "__dataclass_fields__"):
            waiting += [getattr(node, name) for name in node.__dataclass_fields__]
    return list(found)


def linear_form(tree: Node, evaluator: Evaluator) -> Linear | None:
    """The linear form of an expression, None where it is not linear. Raises ExpressionError."""
    if not probes_in(tree):
        return Linear(evaluator.value(tree))
    if isinstance(tree, Call):
        return Linear(0.0, {(tree.function, tree.words): 1.0}) if tree.words else None
    if isinstance(tree, Unary):
        inner = linear_form(tree.operand, evaluator) if tree.operator == "-" else None
        return inner.scaled(-1.0) if inner is not None else None
    if not isinstance(tree, Binary) or tree.operator not in "+-*/":
        return None
    left, right = linear_form(tree.left, evaluator), linear_form(tree.right, evaluator)
    if left is None or right is None:
        return None
    if tree.operator in "+-":
        return left.plus(right, 1.0 if tree.operator == "+" else -1.0)
    if tree.operator == "*":
        if left.gains and right.gains:
            return None
        return right.scaled(left.constant) if not left.gains else left.scaled(right.constant)
    if right.gains:
        return None
    if right.constant == 0:
        raise ExpressionError("it divides by zero")
    return left.scaled(1.0 / right.constant)


def depends_on_time(tree: Node) -> bool:
    """Whether an expression names time or frequency."""
    waiting: list[object] = [tree]
    while waiting:
        node = waiting.pop()
        if isinstance(node, Name) and node.name in ("time", "hertz", "temper"):
            return True
        if isinstance(node, tuple):
            waiting += node
        elif hasattr(node, "__dataclass_fields__"):
            waiting += [getattr(node, name) for name in node.__dataclass_fields__]
    return False
