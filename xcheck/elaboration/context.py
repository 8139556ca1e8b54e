"""Where an element is being made: names and nodes made flat, values evaluated, models looked up."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from xcheck.circuit.elements import GROUND
from xcheck.circuit.trees import Node
from xcheck.deck.cards import Card, Field
from xcheck.deck.numbers import read_number
from xcheck.elaboration.definitions import Body
from xcheck.elaboration.expressions import ExpressionError, parse
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.scopes import Scope
from xcheck.elaboration.words import braced


@dataclass(frozen=True)
class Context:
    """One instance's surroundings. bodies: the bodies whose definitions can be seen, innermost first; key: equal
    for instances whose elements have equal values; nominal: degrees Celsius that values and models hold at; many:
    how many there are of each element, by `m=` of an instance around it, in place of an `m=` of its own."""

    prefix: str
    path: tuple[str, ...]
    pins: Mapping[str, str]
    everywhere: frozenset[str]
    scope: Scope
    bodies: Sequence[Body]
    problems: Problems
    key: tuple[object, ...] = ()
    nominal: float = 27.0
    many: float | None = None

    def node(self, word: str) -> str:
        """A node's flat name; `word` in lower case."""
        word = word.strip('"')
        if word in ("0", "gnd"):
            return GROUND
        mapped = self.pins.get(word)
        if mapped is not None:
            return mapped
        return word if word in self.everywhere else self.prefix + word

    def source(self, word: str) -> str:
        """The flat name of an element whose current is read; `word` in lower case, `v1` or, through instances and
        with the element's letter before them, `v.x1.v1`."""
        if word[1:2] == "." and word.rpartition(".")[2].startswith(word[0]):
            word = word[2:]
        return self.prefix + word

    def name(self, card: Card) -> str:
        return self.prefix + card.fields[0].key

    def model(self, name: str) -> Card | None:
        """The card of a model that can be seen from here."""
        for body in self.bodies:
            card = body.models.get(name)
            if card is not None:
                return card
        return None

    def model_names(self) -> list[str]:
        return [name for body in self.bodies for name in body.models]


class Amount:
    """A value field of a card: a number as ngspice reads it, or an expression, parsed once."""

    __slots__ = ("card", "constant", "fault", "field", "tree")

    def __init__(self, card: Card, field: Field, *, expression: bool = False) -> None:
        """expression: the field is one even without braces, as behind `V=` of a B source."""
        self.card, self.field = card, field
        self.constant: float | None = None
        self.tree: Node | None = None
        self.fault: ExpressionError | None = None
        inside = braced(field.text)
        number = read_number(field.text) if inside is None and not expression else None
        if number is not None:
            self.constant = number.value
            return
        try:
            text = field.text if inside is None or expression else inside
            self.tree = parse(text, source=expression)
        except ExpressionError as fault:
            self.fault = fault

    def at(self, context: Context) -> float | None:
        """The value in a context; None where it has none, which is then a finding."""
        if self.constant is not None:
            return self.constant
        try:
            if self.fault is not None or self.tree is None:
                raise self.fault or ExpressionError("it is empty")
            return context.scope.evaluator().value(self.tree)
        except ExpressionError as error:
            context.problems.expression(error, self.card, self.field, context.scope.names())
            return None

    def quiet(self, context: Context) -> float | None:
        """The value in a context, None where it has none; without a finding."""
        if self.constant is not None or self.tree is None:
            return self.constant
        try:
            return context.scope.evaluator().value(self.tree)
        except ExpressionError:
            return None


def is_value(field: Field) -> bool:
    """Whether a field is a number or a wrapped expression rather than a name."""
    return braced(field.text) is not None or read_number(field.text) is not None
