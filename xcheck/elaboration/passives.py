"""R, C, L and K cards to elements."""

from collections.abc import Callable
from typing import Literal

from xcheck.circuit.elements import Behaviour, Coupling, Device, Element, Origin, Passive
from xcheck.deck.cards import Card, Field
from xcheck.elaboration.affine import probes_in
from xcheck.elaboration.context import Amount, Context, is_value
from xcheck.elaboration.expressions import ExpressionError
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.resolution import resolved
from xcheck.elaboration.words import Words, words_of

Maker = Callable[[Context], Element | None]

MISSING_OHM = 1e-3
"""What ngspice 39 takes for a resistor without a value, or of zero ohm."""
UNIT = {"r": "ohm", "c": "farad", "l": "henry"}
NOMINAL_CELSIUS = 27.0


def passive(card: Card, problems: Problems) -> Maker | None:
    """A resistor, capacitor or inductor: `R1 a b 10k`, `R1 a b {x} tc1=1m m=2`, `R1 a b model w=..`."""
    words = words_of(card)
    kind: Literal["r", "c", "l"] = card.kind  # type: ignore[assignment]  # the caller chose by the letter
    if len(words.plain) < 2:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: two nodes are wanted")
        return None
    nodes = (words.plain[0].key, words.plain[1].key)
    rest = words.plain[2:]
    value = _value_field(kind, rest, words)
    amount = Amount(card, value) if value is not None else None
    pairs = {key: Amount(card, f) for key, f in words.pairs.items() if key in ("m", "tc1", "tc2", "temp")}

    def make(context: Context) -> Element | None:
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        origin = Origin(card, context.path)
        name = context.name(card)
        if amount is None or (value is not None and not is_value(value) and not context.scope.knows(value.key)):
            return _by_model(card, kind, rest, ends, context)
        if amount.tree is not None and (probes := probes_in(amount.tree)):
            sensing = tuple(context.node(n) for letter, ns in probes if letter == "v" for n in ns)
            return Device(name, kind, ends, sensing, "", "expression", origin, _behaviour(kind, amount, context))
        ohms = amount.at(context)
        if ohms is None:
            return Device(name, kind, ends, (), "", "value unknown", origin)
        ohms *= _temperature_factor(kind, pairs, context)
        times = pairs["m"].at(context) if "m" in pairs else None
        if times:
            ohms = ohms * times if kind == "c" else ohms / times
        if kind == "r" and ohms == 0:
            ohms = MISSING_OHM
        return Passive(name, kind, ends, ohms, origin)

    return make


def _behaviour(kind: str, amount: Amount, context: Context) -> Behaviour | None:
    """What a behavioural resistor or capacitor computes, None where its expression cannot be resolved."""
    try:
        if amount.tree is not None and kind in "rc":
            return Behaviour("r" if kind == "r" else "c", resolved(amount.tree, context))
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


def _by_model(
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
    if context.model(model.key) is None:
        known = context.model_names() + context.scope.names()
        context.problems.unknown_model(card, model, known, "model or parameter")
        return Device(name, kind, ends, (), model.key, "value unknown", origin)
    return Device(name, kind, ends, (), model.key, "geometry model", origin)


def _temperature_factor(kind: str, pairs: dict[str, Amount], context: Context) -> float:
    """1 + tc1 dT + tc2 dT^2 with dT from 27 degrees Celsius, as in the ngspice manual's resistor chapter."""
    if "tc1" not in pairs and "tc2" not in pairs:
        return 1.0
    celsius = pairs["temp"].at(context) if "temp" in pairs else context.scope.lookup("temper")
    delta = (celsius if celsius is not None else NOMINAL_CELSIUS) - NOMINAL_CELSIUS
    first = (pairs["tc1"].at(context) or 0.0) if "tc1" in pairs else 0.0
    second = (pairs["tc2"].at(context) or 0.0) if "tc2" in pairs else 0.0
    return 1.0 + first * delta + second * delta**2


def coupling(card: Card, problems: Problems) -> Maker | None:
    """`K1 L1 L2 0.99`."""
    words = words_of(card).plain
    if len(words) != 3:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: two inductors and a factor are wanted")
        return None
    amount = Amount(card, words[2])

    def make(context: Context) -> Element | None:
        factor = amount.at(context)
        pair = (context.prefix + words[0].key, context.prefix + words[1].key)
        return None if factor is None else Coupling(context.name(card), pair, factor, Origin(card, context.path))

    return make
