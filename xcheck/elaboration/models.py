"""`.model` cards as seen from the element that uses them: parameters evaluated there."""

import re

from xcheck.circuit.elements import DeviceModel
from xcheck.deck.cards import Card, Field
from xcheck.deck.fields import fields_of
from xcheck.elaboration.context import Amount, Context
from xcheck.elaboration.expressions import ExpressionError

_WRAPPED = re.compile(r"\{[^{}]*\}|'[^']*'")


def definition_of(name: str, context: Context, models: dict[int, dict[str, Amount]]) -> DeviceModel | None:
    """The model that a name stands for, with its parameters evaluated where it is used; None where there is none.
    models: the parameters of model cards read before, by the card's identity."""
    card = context.model(name)
    if card is None or len(card.fields) < 3:
        return None
    if id(card) not in models:
        models[id(card)] = {key: Amount(card, value) for key, value in model_words(card).items()}
    values = ((key, amount.quiet(context)) for key, amount in models[id(card)].items())
    kind = card.fields[2].key.split("(")[0]
    numbers = tuple((key, value) for key, value in values if value is not None)
    return DeviceModel(name, kind, numbers, card, _model_text(card, context))


def _model_text(card: Card, context: Context) -> str:
    """What stands behind the type of a model, expressions in braces or quotes evaluated; those without a value stay."""

    def number(match: re.Match[str]) -> str:
        try:
            return repr(context.scope.value(match.group()))
        except ExpressionError:
            return match.group()

    text = card.text[card.fields[2].start :]
    word = re.match(r"[^\s(]*", text)
    return _WRAPPED.sub(number, text[word.end() if word else 0 :]).strip()


def model_words(card: Card) -> dict[str, Field]:
    """The parameters of a model card by name; they may stand in parentheses."""
    opened = []
    for field in card.fields:
        head, parenthesis, _ = field.text.partition("(")
        start = field.start + len(head) + 1
        if parenthesis and field.text.endswith(")") and (not head or head.replace("_", "").isalnum()):
            inner = fields_of(field.text[len(head) + 1 : -1])
            opened += [Field(f.text, f.start + start, f.end + start) for f in inner]
        else:
            opened.append(field)
    found: dict[str, Field] = {}
    for index, field in enumerate(opened[1:-1], 1):
        if field.text == "=":
            found[opened[index - 1].key] = opened[index + 1]
    return found
