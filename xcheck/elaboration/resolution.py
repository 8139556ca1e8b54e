"""Expressions of behavioural sources with all that an instance knows put in: parameters, functions, flat names."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from itertools import combinations_with_replacement, islice

from xcheck.circuit.trees import Binary, Call, Choice, Constant, Name, Node, Unary
from xcheck.elaboration.context import Context
from xcheck.elaboration.expressions import NOT_EVALUATED, RANDOM, SOURCE_FUNCTIONS, ExpressionError

LARGEST_TREE = 5000
"""Nodes of one resolved expression; functions that call functions can grow without bound."""
FREE = ("time", "hertz")
"""Names that stay: they have no value before the simulation."""


def resolved(tree: Node, context: Context) -> Node:
    """The tree with numbers for parameters, bodies for user functions, and flat names in its probes. Raises
    ExpressionError (unknown name, too large)."""
    return _Resolution(context).node(tree, {})


class _Resolution:
    def __init__(self, context: Context) -> None:
        self.context = context
        self.functions = context.scope.functions
        self.size = 0
        self.depth = 0

    def node(self, tree: Node, arguments: Mapping[str, Node]) -> Node:
        self.size += 1
        self.depth += 1
        if self.size > LARGEST_TREE or self.depth > 400:
            raise ExpressionError("it is too large, or a function that calls itself")
        try:
            return self._node(tree, arguments)
        finally:
            self.depth -= 1

    def _node(self, tree: Node, arguments: Mapping[str, Node]) -> Node:
        match tree:
            case Name(name):
                return self._name(tree, name, arguments)
            case Unary(operator, operand):
                return Unary(operator, self.node(operand, arguments))
            case Binary(operator, left, right):
                return Binary(operator, self.node(left, arguments), self.node(right, arguments))
            case Choice(condition, yes, no):
                return Choice(*(self.node(part, arguments) for part in (condition, yes, no)))
            case Call():
                return self._call(tree, arguments)
        return tree

    def _name(self, tree: Name, name: str, arguments: Mapping[str, Node]) -> Node:
        if name in arguments:
            return arguments[name]
        if name in FREE:
            return tree
        return Constant(self.context.scope.evaluator().value(tree))

    def _call(self, tree: Call, arguments: Mapping[str, Node]) -> Node:
        if tree.words:
            flat = (
                tuple(self.context.node(word) for word in tree.words)
                if tree.function == "v"
                else tuple(self.context.source(word) for word in tree.words)
            )
            return replace(tree, words=flat)
        given = tuple(self.node(argument, arguments) for argument in tree.arguments)
        function = self.functions.get(tree.function)
        if function is None:
            if tree.function not in SOURCE_FUNCTIONS and tree.function not in (*RANDOM, *NOT_EVALUATED):
                raise ExpressionError(
                    f"`{tree.function}` is no function of sources", tree.start, tree.end, function=tree.function
                )
            return replace(tree, arguments=given)
        if len(given) != len(function.parameters):
            wanted = len(function.parameters)
            raise ExpressionError(f"`{tree.function}` takes {wanted} arguments, given {len(given)}")
        return self.node(function.body, dict(zip(function.parameters, given, strict=True)))


def polynomial(coefficients: Sequence[float], inputs: Sequence[Node]) -> Node | None:
    """A POLY source's tree: the constant, then each product of inputs in the order of SPICE, by rising degree
    (x, y, xx, xy, yy, xxx, ...). None where it would be larger than any model's."""
    products: list[tuple[int, ...]] = [()]
    degree = size = 0
    while len(products) < len(coefficients):
        degree += 1
        fresh = list(islice(combinations_with_replacement(range(len(inputs)), degree), len(coefficients)))
        products += fresh
        size += degree * len(fresh)
        if size > LARGEST_TREE:
            return None
    total: Node = Constant(coefficients[0] if coefficients else 0.0)
    for value, product in zip(coefficients[1:], products[1:], strict=False):
        if value:
            term: Node = Constant(value)
            for index in product:
                term = Binary("*", term, inputs[index])
            total = Binary("+", total, term)
    return total
