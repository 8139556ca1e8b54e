"""Parameters: names to values, evaluated when first asked for, so that their order does not matter.

A name that a subcircuit does not know is looked for where the subcircuit was called from, as ngspice does.
"""

from collections.abc import Mapping

from xcheck.circuit.trees import Node
from xcheck.deck.cards import Card, Field
from xcheck.elaboration.expressions import Evaluator, ExpressionError, Function, parse
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.words import braced

DEEPEST_CHAIN = 40
"""Parameters defined by parameters; order of definition makes longer chains unnecessary."""


class Scope:
    """The parameters of one subcircuit instance, or of the deck."""

    def __init__(self, parent: "Scope | None", functions: Mapping[str, Function], problems: Problems) -> None:
        self.parent = parent
        self.functions = functions
        self.problems = problems
        self._values: dict[str, float] = {}
        self._waiting: dict[str, tuple[Card, Field, Scope]] = {}
        self._busy: list[str] = []
        self._failed: set[str] = set()

    def define(self, name: str, card: Card, value: Field, scope: "Scope | None" = None) -> None:
        """A parameter by its value's text, evaluated in `scope` (default: this one) when first needed."""
        self._values.pop(name, None)
        self._waiting[name] = (card, value, scope or self)

    def set(self, name: str, value: float) -> None:
        """A parameter with a known value."""
        self._waiting.pop(name, None)
        self._values[name] = value

    def knows(self, name: str) -> bool:
        """Whether a name is a parameter here or where this was called from."""
        scope: Scope | None = self
        while scope is not None:
            if name in scope._values or name in scope._waiting or name in scope._failed:
                return True
            scope = scope.parent
        return name == "temper"

    def names(self) -> list[str]:
        """All names that can be seen from here."""
        own = [*self._values, *self._waiting]
        return own + (self.parent.names() if self.parent is not None else [])

    def values(self) -> tuple[tuple[str, float], ...]:
        """Names and values of this scope alone, once settled."""
        return tuple(self._values.items())

    def lookup(self, name: str) -> float:
        """The value of a parameter. Raises KeyError, or ExpressionError where it has none."""
        if name in self._values:
            return self._values[name]
        if name in self._failed:
            raise ExpressionError(f"parameter `{name}` has no value")
        if name in self._waiting:
            return self._evaluate(name)
        if self.parent is not None:
            return self.parent.lookup(name)
        raise KeyError(name)

    def quiet(self, name: str) -> float | None:
        """The value of a parameter, None where it has none."""
        try:
            return self.lookup(name)
        except (KeyError, ExpressionError):
            return None

    def settle(self) -> None:
        """Evaluates all that waits, so that a fault is said even where nothing uses the parameter."""
        for name in list(self._waiting):
            if name in self._waiting:
                try:
                    self._evaluate(name)
                except ExpressionError:
                    continue

    def _evaluate(self, name: str) -> float:
        card, field, scope = self._waiting[name]
        if name in self._busy or len(self._busy) > DEEPEST_CHAIN:
            self._failed.add(name)
            raise ExpressionError(f"parameter `{name}` is defined by itself or by too long a chain")
        self._busy.append(name)
        try:
            value = scope.value(field.text)
        except ExpressionError as error:
            self._failed.add(name)
            self._waiting.pop(name, None)
            self.problems.expression(error, card, field, scope.names())
            raise ExpressionError(f"parameter `{name}` has no value") from error
        finally:
            self._busy.pop()
        self._waiting.pop(name, None)
        self._values[name] = value
        return value

    def tree(self, text: str) -> Node:
        """The tree of a value's text, with or without braces or quotes."""
        inside = braced(text)
        return parse(text if inside is None else inside)

    def value(self, text: str) -> float:
        """The value of a text. Raises ExpressionError."""
        return self.evaluator().value(self.tree(text))

    def evaluator(self) -> Evaluator:
        """Evaluates trees with the parameters seen from here."""
        return Evaluator(self.lookup, self.functions)
