"""Cards of elements that the linear equations do not hold: kept with their nodes, model and a reason."""

from collections.abc import Mapping

from xcheck.circuit.elements import Device, DeviceModel, Element, Origin
from xcheck.deck.cards import Card, Field
from xcheck.deck.fields import fields_of
from xcheck.elaboration.context import Amount, Context, is_value
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
        control = context.prefix + plain[2].key if card.kind == "w" else ""
        return Device(
            context.name(card), card.kind, inner, felt, name, reason, Origin(card, context.path),
            definition=_definition(name, context, models) if has_model else None,
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


def _definition(name: str, context: Context, models: dict[int, dict[str, Amount]]) -> DeviceModel | None:
    """The model that a name stands for, with its parameters evaluated where it is used; None where there is none.
    models: the parameters of model cards read before, by the card's identity."""
    card = context.model(name)
    if card is None or len(card.fields) < 3:
        return None
    if id(card) not in models:
        models[id(card)] = {key: Amount(card, value) for key, value in model_words(card).items()}
    values = ((key, amount.quiet(context)) for key, amount in models[id(card)].items())
    kind = card.fields[2].key.split("(")[0]
    return DeviceModel(name, kind, tuple((key, value) for key, value in values if value is not None), card)


def model_words(card: Card) -> dict[str, Field]:
    """The parameters of a model card by name; they may stand in parentheses."""
    opened = []
    for field in card.fields:
        head, parenthesis, _ = field.text.partition("(")
        start = field.start + len(head) + 1
        if parenthesis and field.text.endswith(")") and (not head or head.isalnum()):
            inner = fields_of(field.text[len(head) + 1 : -1])
            opened += [Field(f.text, f.start + start, f.end + start) for f in inner]
        else:
            opened.append(field)
    found: dict[str, Field] = {}
    for index, field in enumerate(opened[1:-1], 1):
        if field.text == "=":
            found[opened[index - 1].key] = opened[index + 1]
    return found


def _binned(name: str, context: Context) -> bool:
    """Whether models `name.1`, `name.2` ... stand for one name."""
    return any(known.startswith(name + ".") for known in context.model_names())


def code_model(card: Card, problems: Problems) -> Maker | None:
    """An XSPICE device: `A1 a [b c] model`."""
    plain = words_of(card).plain
    if len(plain) < 2:
        problems.say("syntax", "error", card, None, f"`{card.text[:60]}`: connections and a model are wanted")
        return None
    names = [w.strip("[]()~") for f in plain[:-1] for w in [f.key]]
    nodes = [n for n in names if n and not n.startswith("%") and n != "null"]

    def make(context: Context) -> Element | None:
        if context.model(plain[-1].key) is None:
            context.problems.unknown_model(card, plain[-1], context.model_names(), "model")
        flat = tuple(context.node(n) for n in nodes)
        origin = Origin(card, context.path)
        return Device(context.name(card), "a", flat, (), plain[-1].key, "code model", origin)

    return make
