"""Cards of elements that the linear equations do not hold: kept with their nodes, model and a reason."""

import re
from collections.abc import Mapping

from xcheck.circuit.elements import Device, Element, Origin
from xcheck.deck.cards import Card, Field
from xcheck.elaboration.context import Amount, Context, is_value
from xcheck.elaboration.models import definition_of
from xcheck.elaboration.passives import Maker
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.words import words_of

KINDS: Mapping[str, tuple[int, int, int, bool, str]] = {
    # letter: fewest nodes, most nodes, of these sensing ones at the end, has a model, reason
    "d": (2, 3, 0, True, "diode"),
    "q": (3, 5, 0, True, "bipolar transistor"),
    "m": (3, 7, 0, True, "MOS transistor"),
    "j": (3, 3, 0, True, "junction field-effect transistor"),
    "z": (3, 3, 0, True, "MESFET"),
    "s": (4, 4, 2, True, "switch"),
    "w": (2, 2, 0, True, "switch"),
    "t": (4, 4, 0, False, "transmission line"),
    "o": (4, 4, 0, True, "transmission line"),
    "u": (3, 3, 0, True, "RC line"),
    "y": (4, 4, 0, True, "transmission line"),
    "p": (4, 40, 0, True, "coupled lines"),
}

_CONNECTION = re.compile(r"%\s*[a-z]+|[\[\]~]|[^\s=(),\[\]~%]+")
"""Words of an XSPICE device: parentheses, commas and equal signs are blanks there."""


def device(card: Card, problems: Problems) -> Maker | None:
    """A semiconductor, switch or line."""
    fewest, most, sensing, has_model, reason = KINDS[card.kind]
    plain = words_of(card).plain
    if len(plain) < fewest + has_model:
        wanted = f"{fewest} nodes" + (" and a model" if has_model else "")
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: {wanted} are wanted")
        return None

    pairs = {key: Amount(card, value) for key, value in words_of(card).pairs.items()}
    models: dict[int, dict[str, Amount]] = {}

    def make(context: Context) -> Element | None:
        words, model = _nodes_and_model(card, plain, fewest, most, has_model, context)
        nodes = tuple(context.node(f.key) for f in words)
        inner = nodes[: len(nodes) - sensing] if sensing else nodes
        name = model.key if model is not None else ""
        felt = nodes[len(nodes) - sensing :] if sensing else ()
        own = [(key, amount.at(context)) for key, amount in pairs.items() if key != "ic"]
        behind = plain[len(words) + (card.kind == "w") + 1 :]
        if card.kind in "dqjz" and behind and is_value(behind[0]):  # the area, without a key
            own.insert(0, ("area", Amount(card, behind[0]).at(context)))
        if context.many is not None and card.kind in "dqmjz":
            own = [*((key, value) for key, value in own if key != "m"), ("m", context.many)]
        control = context.source(plain[2].key) if card.kind == "w" else ""
        return Device(
            context.name(card), card.kind, inner, felt, name, reason, Origin(card, context.path),
            definition=definition_of(name, context, models) if has_model else None,
            parameters=tuple((key, value) for key, value in own if value is not None), control=control,
        )  # fmt: skip

    return make


def _nodes_and_model(
    card: Card, plain: tuple[Field, ...], fewest: int, most: int, has_model: bool, context: Context
) -> tuple[tuple[Field, ...], Field | None]:
    """The node fields and the model field: the first field after the fewest nodes that names a model."""
    if not has_model:
        return plain[:most], None
    extra = 1 if card.kind == "w" else 0  # the controlling source stands between nodes and model
    for position in range(fewest + extra, min(len(plain), most + extra + 1)):
        if context.model(plain[position].key) is not None or _binned(plain[position].key, context):
            return plain[: position - extra], plain[position]
    field = plain[fewest + extra] if len(plain) > fewest + extra else plain[-1]
    context.problems.unknown_model(card, field, context.model_names(), "model")
    return plain[:fewest], field


def _binned(name: str, context: Context) -> bool:
    """Whether models `name.1`, `name.2` ... stand for one name."""
    return any(known.startswith(name + ".") for known in context.model_names())


def code_model(card: Card, problems: Problems) -> Maker | None:
    """An XSPICE device: `A1 a [b c] %vd(p n) null model`."""
    words = list(_CONNECTION.finditer(card.text.lower(), card.fields[0].end))
    if len(words) < 2:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: connections and a model are wanted")
        return None
    *words, model = words
    named = Field(card.text[model.start() : model.end()], model.start(), model.end())
    kinds = _kinds([word.group() for word in words])
    models: dict[int, dict[str, Amount]] = {}

    def make(context: Context) -> Element | None:
        if context.model(named.key) is None:
            context.problems.unknown_model(card, named, context.model_names(), "model")
        flat = tuple(
            (context.node(word) if kind == "node" else context.source(word) if kind == "source" else word, kind)
            for word, kind in kinds
        )
        return Device(
            context.name(card), "a", tuple(word for word, kind in flat if kind == "node"), (), named.key, "code model",
            Origin(card, context.path), definition=definition_of(named.key, context, models), connections=flat,
        )  # fmt: skip

    return make


def node_words(card: Card) -> list[tuple[str, int, int]]:
    """The nodes on an XSPICE device's card, in the order of `Device.nodes`: lower case, with ranges of offsets."""
    words = list(_CONNECTION.finditer(card.text.lower(), card.fields[0].end))[:-1]
    kinds = _kinds([word.group() for word in words])
    return [(w.group(), w.start(), w.end()) for w, (_, kind) in zip(words, kinds, strict=True) if kind == "node"]


def _kinds(words: list[str]) -> list[tuple[str, str]]:
    """Each word of an XSPICE device's connections with its kind, see `Device.connections`."""
    found: list[tuple[str, str]] = []
    mark, inside = "", False
    for word in words:
        if word[0] == "%":
            mark = word[1:].strip()
            found.append(("%" + mark, "mark"))
            continue
        if word in ("[", "]", "~", "null"):
            found.append((word, "mark"))
            inside = word == "[" or (inside and word != "]")
        else:
            found.append((word, "source" if mark == "vnam" else "node"))
        if not inside:  # a mark holds for one connection, or for all within brackets
            mark = ""
    return found
