"""Analysis cards, and the temperature of the deck."""

from collections.abc import Iterable

from xcheck.circuit.elements import Analysis
from xcheck.deck.cards import Card, Field
from xcheck.deck.numbers import read_number
from xcheck.elaboration.expressions import ExpressionError
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.scopes import Scope
from xcheck.elaboration.words import braced, words_of

KINDS = (
    ".ac", ".op", ".dc", ".tran", ".noise", ".tf", ".four", ".sens", ".pz", ".disto", ".meas", ".measure",
    ".save", ".print", ".plot", ".probe", ".hb", ".sp", ".step", ".ic", ".nodeset", ".options", ".option", ".opt",
)  # fmt: skip


def is_analysis(card: Card) -> bool:
    """Whether a card asks for an analysis, its results or its conditions."""
    return card.kind in KINDS


def analysis_of(card: Card, scope: Scope) -> Analysis:
    """The card with its numbers and expressions evaluated; what has no value stays text."""
    arguments = tuple(_argument(field, scope) for field in card.fields[1:])
    return Analysis(card.kind.removeprefix("."), arguments, card)


def _argument(field: Field, scope: Scope) -> str | float:
    if braced(field.text) is not None or scope.knows(field.key):
        try:
            return scope.value(field.text)
        except ExpressionError:
            return field.text
    number = read_number(field.text)
    return field.text if number is None else number.value


def temperature_of(cards: Iterable[Card], scope: Scope, problems: Problems) -> float:
    """Degrees Celsius by the last `.temp` card or `.options temp=`; 27 without either."""
    return _celsius(cards, "temp", scope, problems)


def nominal_of(cards: Iterable[Card], scope: Scope, problems: Problems) -> float:
    """Degrees Celsius that values and models hold at, by `.options tnom=`; 27 without."""
    return _celsius(cards, "tnom", scope, problems)


def _celsius(cards: Iterable[Card], key: str, scope: Scope, problems: Problems) -> float:
    celsius = 27.0
    for card in cards:
        field: Field | None = None
        if card.kind == ".temp" and key == "temp" and len(card.fields) > 1:
            field = card.fields[1]
        elif card.kind in (".options", ".option", ".opt"):
            field = words_of(card).pairs.get(key)
        if field is None:
            continue
        number = read_number(field.text)
        if number is not None:
            celsius = number.value
        else:
            problems.say("syntax", "error", card, field, f"`{field.text}` is no temperature")
    return celsius
