"""E, F, G, H and B cards to linear controlled sources, or to devices where they are not linear."""

import re
from typing import Literal

from xcheck.circuit.elements import GROUND, Behaviour, Controlled, Device, Element, Origin, Term
from xcheck.circuit.trees import Binary, Call, Constant, Node
from xcheck.deck.cards import Card, Field
from xcheck.elaboration.affine import Linear, Probe, depends_on_time, linear_form, probes_in
from xcheck.elaboration.context import Amount, Context, is_value
from xcheck.elaboration.expressions import Evaluator, ExpressionError
from xcheck.elaboration.geometry import factor
from xcheck.elaboration.passives import Maker
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.resolution import polynomial, resolved
from xcheck.elaboration.tables import table
from xcheck.elaboration.words import opened, words_of

_POLY = re.compile(r"poly\s*(?:\(\s*(\d+)\s*\))?$")
_NONE: dict[str, float] = {}
_WITHOUT_NAMES = Evaluator(_NONE.__getitem__, {}, source=True)
FACTORS = ("m", "tc1", "tc2", "temp", "dtemp")
"""What multiplies an expression's value."""
Kind = Literal["e", "f", "g", "h"]


def controlled(card: Card, problems: Problems) -> Maker | None:
    """`E1 o 0 p n 1e5`, `E1 o 0 POLY(2) a 0 b 0 0 1 1`, `E1 o 0 VALUE={...}`, `F1 o 0 V1 2`, ..."""
    kind: Kind = card.kind  # type: ignore[assignment]  # the caller chose by the letter
    words = words_of(card)
    fields = opened(card.fields[1:])
    if len(fields) < 3:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: nodes and a gain are wanted")
        return None
    for key in ("value", "vol", "cur"):
        if key in words.pairs:
            return _expression(card, words.pairs[key], "e" if key == "vol" or kind in "eh" else "g")
    head = fields[2].key.split("{")[0].split("(")[0]
    if head == "value" and len(fields) > 3:
        return _expression(card, fields[3], kind)
    if head == "table":
        return table(card, fields, problems)
    if head in ("laplace", "freq", "chebyshev"):
        problems.say(
            "syntax", "warning", card, fields[2],
            f"`{head.upper()}` is not in ngspice's own dialect, which refuses the deck; the source is not modelled",
            "write the transfer function as an XSPICE device with an s_xfer model",
        )  # fmt: skip
        return _device(card, "frequency-dependent expression")
    if (poly := _POLY.match(fields[2].key)) or fields[2].key == "poly":
        return _poly(card, kind, fields, poly.group(1) if poly else None, problems)
    wanted = 2 if kind in "eg" else 1
    controls, gains = fields[2 : 2 + wanted], fields[2 + wanted :]
    if len(controls) < wanted or not gains:
        problems.say(
            "value-missing",
            "error",
            card,
            None,
            f"`{card.text[:60]}` has no gain",
            "write the gain as last field",
        )
        return None
    gain = Amount(card, gains[0])
    nodes = (fields[0].key, fields[1].key)
    many = Amount(card, words.pairs["m"]) if "m" in words.pairs and kind in "fg" else None

    def make(context: Context) -> Element | None:
        value = gain.at(context)
        if value is not None and kind in "fg":
            value *= context.many or (many.at(context) if many is not None else None) or 1.0
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        if value is None:
            return Device(context.name(card), kind, ends, (), "", "value unknown", Origin(card, context.path))
        term = _term(value, controls, context)
        return Controlled(context.name(card), kind, ends, (term,), 0.0, Origin(card, context.path))

    return make


def _term(gain: float, controls: tuple[Field, ...], context: Context) -> Term:
    if len(controls) == 1:
        return Term(gain, source=context.source(controls[0].key))
    return Term(gain, context.node(controls[0].key), context.node(controls[1].key))


def _poly(card: Card, kind: Kind, fields: tuple[Field, ...], dimension: str | None, problems: Problems) -> Maker | None:
    start = 3
    if dimension is None:
        dimension, start = fields[3].text.strip("()"), 4
    if not dimension.isdigit() or not 0 < int(dimension) <= 1000:
        problems.say("syntax", "error", card, fields[2], f"POLY wants a number of inputs, read `{dimension}`")
        return None
    count = int(dimension)
    width = 2 if kind in "eg" else 1
    controls = fields[start : start + width * count]
    coefficients = [Amount(card, f) for f in fields[start + width * count :] if f.text != "="]
    if len(controls) < width * count or not coefficients:
        problems.say("syntax", "error", card, fields[2], f"POLY({count}) wants {width * count} inputs and values")
        return None
    nodes = (fields[0].key, fields[1].key)

    def make(context: Context) -> Element | None:
        name, origin = context.name(card), Origin(card, context.path)
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        sensing = tuple(context.node(f.key) for f in controls) if width == 2 else ()
        values = [c.at(context) for c in coefficients]
        if any(v is None for v in values):
            return Device(name, kind, ends, sensing, "", "value unknown", origin)
        numbers = [v for v in values if v is not None]
        if any(numbers[count + 1 :]):
            inputs = [_probe(controls[width * k : width * (k + 1)], context) for k in range(count)]
            tree = polynomial(numbers, inputs)
            behaviour = Behaviour("v" if kind in "eh" else "i", tree) if tree is not None else None
            return Device(name, kind, ends, sensing, "", "polynomial of higher degree", origin, behaviour)
        gains = numbers[1 : count + 1]
        terms = [_term(gain, controls[width * k : width * (k + 1)], context) for k, gain in enumerate(gains) if gain]
        return Controlled(name, kind, ends, tuple(terms), numbers[0], origin)

    return make


def _probe(words: tuple[Field, ...], context: Context) -> Node:
    """A voltage between two nodes, or the current through a source, as part of a tree."""
    if len(words) == 1:
        return Call("i", (), (context.source(words[0].key),), words[0].start, words[0].end)
    return Call("v", (), tuple(context.node(w.key) for w in words), words[0].start, words[-1].end)


def behavioural(card: Card, problems: Problems) -> Maker | None:
    """`B1 a b V={...}` or `I={...}`."""
    pairs = words_of(card).pairs
    if len(opened(card.fields[1:])) < 2:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: two nodes are wanted")
        return None
    if "v" in pairs:
        return _expression(card, pairs["v"], "e")
    if "i" in pairs:
        return _expression(card, pairs["i"], "g")
    problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: `V=` or `I=` is wanted")
    return None


def _expression(card: Card, field: Field, kind: Kind) -> Maker:
    ends_of = opened(card.fields[1:])
    nodes = (ends_of[0].key, ends_of[1].key)
    amount = Amount(card, field, expression=True)
    pairs = {k: Amount(card, f) for k, f in words_of(card).pairs.items() if k in FACTORS}

    def make(context: Context) -> Element | None:
        name, origin = context.name(card), Origin(card, context.path)
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        if amount.tree is None:
            level = amount.at(context)
            if level is None:
                return Device(name, card.kind, ends, (), "", "value unknown", origin)
            return Controlled(name, kind, ends, (), level, origin)
        own = {key: parameter.at(context) for key, parameter in pairs.items()}
        if context.many is not None and card.kind in "fg":
            own["m"] = context.many
        times = factor("c", own.get, None, context.scope.lookup("temper"), context.nominal)
        named = [word for letter, words in probes_in(amount.tree) if letter == "v" for word in words]
        sensing = tuple(dict.fromkeys(context.node(word) for word in named))
        try:
            tree = resolved(amount.tree, context)
        except ExpressionError as error:
            if error.unknown or error.function:
                context.problems.expression(error, card, field, context.scope.names())
                return Device(name, card.kind, ends, sensing, "", "value unknown", origin)
            return Device(name, card.kind, ends, sensing, "", "expression", origin)
        sensing = tuple(dict.fromkeys(n for letter, ns in probes_in(tree) if letter == "v" for n in ns))
        form = _linear(tree)
        if form is not None:
            return _from_form(name, kind, ends, form.scaled(times), origin)
        whole = tree if times == 1 else Binary("*", Constant(times), tree)
        behaviour = Behaviour("v" if kind in "eh" else "i", whole)
        return Device(name, card.kind, ends, sensing, "", "expression", origin, behaviour)

    return make


def _linear(tree: Node) -> Linear | None:
    """The linear form of a resolved tree, None where it has none, or no value."""
    try:
        return None if depends_on_time(tree) else linear_form(tree, _WITHOUT_NAMES)
    except ExpressionError:
        return None


def _from_form(name: str, kind: Kind, ends: tuple[str, str], form: Linear, origin: Origin) -> Controlled:
    terms = tuple(_probe_term(gain, probe) for probe, gain in form.gains.items() if gain)
    return Controlled(name, kind, ends, terms, form.constant, origin)


def _probe_term(gain: float, probe: Probe) -> Term:
    letter, words = probe
    if letter == "i":
        return Term(gain, source=words[0])
    return Term(gain, words[0], words[1] if len(words) > 1 else GROUND)


def _device(card: Card, reason: str) -> Maker:
    ends_of = opened(card.fields[1:])
    nodes = (ends_of[0].key, ends_of[1].key)
    inside = [f.key for f in opened(card.fields[4:]) if not is_value(f) and re.fullmatch(r"[\w.+\-/]+", f.text)]
    probes = re.findall(r"v\s*\(([^()]*)\)", card.text.lower())
    named = [w for p in probes for w in re.split(r"[\s,]+", p.strip())] or inside

    def make(context: Context) -> Element | None:
        ends = (context.node(nodes[0]), context.node(nodes[1]))
        sensing = tuple(dict.fromkeys(context.node(w) for w in named))
        return Device(context.name(card), card.kind, ends, sensing, "", reason, Origin(card, context.path))

    return make
