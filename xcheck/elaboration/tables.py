"""`E1 a b TABLE {x} = (x0,y0) (x1,y1) ...` to a behaviour whose tree is `table(x, x0, y0, x1, y1, ...)`."""

import re

from xcheck.circuit.elements import Behaviour, Device, Element, Origin
from xcheck.circuit.trees import Call, Constant
from xcheck.deck.cards import Card, Field
from xcheck.elaboration.affine import probes_in
from xcheck.elaboration.context import Amount, Context
from xcheck.elaboration.expressions import ExpressionError
from xcheck.elaboration.passives import Maker
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.resolution import resolved

_INPUT = re.compile(r"\s*=?\s*(\{[^{}]*\}|'[^']*')")
_WORD = re.compile(r"\{[^{}]*\}|'[^']*'|[^\s(),=]+")


def table(card: Card, fields: tuple[Field, ...], problems: Problems) -> Maker | None:
    """A source whose value is looked up in straight lines between points, and stays at the last one beyond them.
    fields: its nodes and what follows, parentheses opened."""
    nodes = (fields[0].key, fields[1].key)
    after = fields[2].start + len("table")
    wanted = _INPUT.match(card.text, after)
    if wanted is None:
        problems.say("syntax", "error", card, fields[2], "TABLE wants an expression in braces and pairs of numbers")
        return None
    words = [Field(m.group(), m.start(), m.end()) for m in _WORD.finditer(card.text, wanted.end())]
    if len(words) < 4 or len(words) % 2:
        problems.say("syntax", "error", card, fields[2], f"TABLE wants pairs of numbers, read {len(words)} of them")
        return None
    amount = Amount(card, Field(wanted.group(1), wanted.start(1), wanted.end(1)), expression=True)
    numbers = [Amount(card, word) for word in words]

    def make(context: Context) -> Element | None:
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        name, origin = context.name(card), Origin(card, context.path)
        points = [number.at(context) for number in numbers]
        sensing: tuple[str, ...] = ()
        try:
            if amount.tree is None or None in points:
                raise amount.fault or ExpressionError("it is empty")
            named = [word for letter, words in probes_in(amount.tree) if letter == "v" for word in words]
            sensing = tuple(dict.fromkeys(context.node(word) for word in named))
            arguments = (resolved(amount.tree, context), *(Constant(p) for p in points if p is not None))
        except ExpressionError as error:
            context.problems.expression(error, card, amount.field, context.scope.names())
            return Device(name, card.kind, ends, sensing, "", "value unknown", origin)
        tree = Call("table", arguments, (), wanted.start(1), wanted.end(1))
        behaviour = Behaviour("v" if card.kind == "e" else "i", tree)
        return Device(name, card.kind, ends, sensing, "", "table", origin, behaviour)

    return make
