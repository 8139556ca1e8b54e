"""R, C, L and K cards to elements."""

import re
from collections.abc import Callable, Mapping
from typing import Literal

from xcheck.circuit.elements import Behaviour, Coupling, Device, Element, Origin, Passive
from xcheck.circuit.trees import Binary, Constant
from xcheck.deck.cards import Card, Field
from xcheck.elaboration.affine import probes_in
from xcheck.elaboration.context import Amount, Context, is_value
from xcheck.elaboration.expressions import ExpressionError
from xcheck.elaboration.geometry import MISSING_OHM, factor, value_by_model
from xcheck.elaboration.models import definition_of
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.resolution import resolved
from xcheck.elaboration.words import Words, opened, words_of

Maker = Callable[[Context], Element | None]

UNIT = {"r": "ohm", "c": "farad", "l": "henry"}
PARAMETERS = ("m", "tc1", "tc2", "tce", "temp", "dtemp", "scale", "w", "l", "ac")


def passive(card: Card, problems: Problems) -> Maker | None:
    """A resistor, capacitor or inductor: `R1 a b 10k`, `R1 a b {x} tc1=1m m=2`, `R1 a b model w=..`."""
    words = words_of(card)
    kind: Literal["r", "c", "l"] = card.kind  # type: ignore[assignment]  # the caller chose by the letter
    plain = opened(words.plain[:1]) + words.plain[1:]
    if len(plain) < 2:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: two nodes are wanted")
        return None
    nodes = (plain[0].key, plain[1].key)
    rest = plain[2:]
    value = _value_field(kind, rest, words)
    amount = Amount(card, value) if value is not None else None
    own = _own_parameters(card, words)
    cards: dict[int, dict[str, Amount]] = {}
    probes = probes_in(amount.tree) if amount is not None and amount.tree is not None else []
    alone = amount if value is not None and is_value(value) and len(rest) < 2 and not own and not probes else None

    def make(context: Context) -> Element | None:
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        origin = Origin(card, context.path)
        name = context.name(card)
        if alone is not None and context.many is None:  # nearly all of them
            only = alone.at(context)
            if only is not None:
                return Passive(name, kind, ends, only if only or kind != "r" else MISSING_OHM, origin)
        written = {key: parameter.at(context) for key, parameter in own.items()}
        if context.many is not None:
            written["m"] = context.many
        _strange_words(card, rest, value, context)
        model = next((f for f in rest if not is_value(f) and context.model(f.key) is not None), None)
        definition = definition_of(model.key, context, cards) if model is not None else None
        number: float | None
        if amount is None or (value is not None and not is_value(value) and not context.scope.knows(value.key)):
            if definition is None:
                return _without_value(card, kind, rest, ends, context)
            number = value_by_model(kind, written.get, definition)
            if number is None:
                own_values = tuple((key, value) for key, value in written.items() if value is not None)
                return Device(
                    name, kind, ends, (), definition.name, "geometry model", origin, None, definition, own_values
                )
        elif probes:
            sensing = tuple(context.node(n) for letter, ns in probes if letter == "v" for n in ns)
            behaviour = _behaviour(kind, amount, context, written)
            return Device(name, kind, ends, sensing, "", "expression", origin, behaviour)
        else:
            number = amount.at(context)
        if number is None:
            return Device(name, kind, ends, (), "", "value unknown", origin)
        if kind == "r" and number == 0:
            number = MISSING_OHM
        times = factor(kind, written.get, definition, context.scope.lookup("temper"), context.nominal)
        if kind == "r" and written.get("ac") is not None:
            both = (("r", number * times), ("ac", (written["ac"] or 0.0) * times))
            return Device(name, kind, ends, (), "", "resistance of its own at AC", origin, parameters=both)
        return Passive(name, kind, ends, number * times, origin)

    return make


def _strange_words(card: Card, rest: tuple[Field, ...], value: Field | None, context: Context) -> None:
    """Says which words ngspice refuses: those that are no value, model or parameter, as in `r1 a b 10 ohm`."""
    for field in rest if len(rest) > 1 else ():
        known = context.model(field.key) is not None or context.scope.knows(field.key)
        if field is not value and not is_value(field) and not known:
            context.problems.say(
                "syntax", "error", card, field, f"`{field.text}` is no value and no model, so ngspice refuses the deck",
                "delete it, or join it to the number before it",
            )  # fmt: skip
            return


def _own_parameters(card: Card, words: Words) -> dict[str, Amount]:
    """The element's parameters beside its value; `tc=1m 2u` are two of them."""
    own = {key: Amount(card, field) for key, field in words.pairs.items() if key in PARAMETERS}
    if "tc" in words.pairs:
        field = words.pairs["tc"]
        for key, part in zip(("tc1", "tc2"), re.finditer(r"[^\s,]+", field.text), strict=False):
            own[key] = Amount(card, Field(part.group(), field.start + part.start(), field.start + part.end()))
    return own


def _behaviour(kind: str, amount: Amount, context: Context, written: Mapping[str, float | None]) -> Behaviour | None:
    """What a behavioural resistor or capacitor computes, None where its expression cannot be resolved. ngspice
    heeds the deck's temperature there, not the element's own (seen on version 39)."""
    known = {key: value for key, value in written.items() if key in ("m", "tc1", "tc2")}
    times = factor(kind, known.get, None, context.scope.lookup("temper"), context.nominal)
    try:
        if amount.tree is not None and kind in "rc":
            tree = resolved(amount.tree, context)
            if times != 1:
                tree = Binary("*", Constant(times), tree)
            return Behaviour("r" if kind == "r" else "c", tree)
    except ExpressionError as error:
        context.problems.expression(error, amount.card, amount.field, context.scope.names())
    return None


def _value_field(kind: str, rest: tuple[Field, ...], words: Words) -> Field | None:
    """The field that holds the value: the last plain number, as ngspice takes it, or `r=`, `c=`, `l=`."""
    if kind in words.pairs:
        return words.pairs[kind]
    values = [f for f in rest if is_value(f)]
    if values:
        return values[-1]
    return rest[0] if rest else None


def _without_value(
    card: Card, kind: Literal["r", "c", "l"], rest: tuple[Field, ...], ends: tuple[str, str], context: Context
) -> Element:
    name, origin = context.name(card), Origin(card, context.path)
    if not rest:
        taken = "1 milliohm" if kind == "r" else "zero"
        context.problems.say(
            "value-missing", "error", card, None,
            f"`{card.text[:60]}` has no value in {UNIT[kind]}; ngspice takes {taken}", "write the value",
        )  # fmt: skip
        return Passive(name, kind, ends, MISSING_OHM if kind == "r" else 0.0, origin)
    model = rest[0]
    known = context.model_names() + context.scope.names()
    context.problems.unknown_model(card, model, known, "model or parameter")
    return Device(name, kind, ends, (), model.key, "value unknown", origin)


def coupling(card: Card, problems: Problems) -> Maker | None:
    """`K1 L1 L2 0.99` or `K1 L1 L2 k=0.99`."""
    words = words_of(card)
    given = [words.pairs[key] for key in ("k", "coeff") if key in words.pairs]
    fields = (*words.plain, *given)
    if len(fields) != 3:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: two inductors and a factor are wanted")
        return None
    amount = Amount(card, fields[2])

    def make(context: Context) -> Element | None:
        factor = amount.at(context)
        pair = (context.prefix + fields[0].key, context.prefix + fields[1].key)
        return None if factor is None else Coupling(context.name(card), pair, factor, Origin(card, context.path))

    return make
