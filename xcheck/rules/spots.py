"""Where numbers stand on a card: each with its place in the user's text, as ngspice would take it."""

import re
from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass

from xcheck.circuit.elements import Circuit, Passive
from xcheck.deck.cards import Card, Deck, Field
from xcheck.deck.numbers import Number, read_number
from xcheck.place import Place

KEYED = re.compile(r"(?P<key>[A-Za-z_]\w*)\s*=\s*(?P<open>[{']\s*)?(?P<word>[+-]?\.?\d[^\s,={}()'\"]*)(?P<end>.?)")
"""`key = number`, the number also alone in braces or quotes."""

WORD = re.compile(r"(?<![\w.+-])[+-]?\.?\d[^\s,={}()'\"]*")
REFERENCE = re.compile(r"[{']\s*([A-Za-z_]\w*)\s*[}']")
NAMES_A_THING = ("model", "type", "part", "name", "file", "device", "mfg")
"""Keys whose values are names although they may begin with a digit."""


@dataclass(frozen=True, slots=True)
class Spot:
    """A number on a card: the word as written, what it reads as, its half-open range of offsets in the card's
    text, the key before it ('' for a positional one), and whether it is the element's own value."""

    card: Card
    word: str
    number: Number
    start: int
    end: int
    key: str = ""
    own: bool = False

    @property
    def place(self) -> Place:
        return self.card.place_of(self.start, self.end)


def spots(card: Card) -> Iterator[Spot]:
    """All numbers on a card that stand where ngspice wants a number and nothing else can be meant."""
    own = value_field(card)
    if own is not None:
        yield from _spot(card, own.text, own.start, own=True)
    if card.kind in ("v", "i") and len(card.fields) > 3:
        start = card.fields[3].start
        if "file" not in card.text[start:].lower():
            for match in WORD.finditer(card.text, start):
                if match.group() and "=" not in card.text[max(match.start() - 1, 0) : match.start()]:
                    yield from _spot(card, match.group(), match.start())
    elif card.kind in (".ac", ".tran", ".dc", ".noise"):
        for field in card.fields[1:]:
            yield from _spot(card, field.text, field.start)
    if card.kind in "rclxdqmj" or card.kind in (".param", ".subckt", ".model"):
        yield from keyed_spots(card)


def keyed_spots(card: Card) -> Iterator[Spot]:
    """Numbers after `key =`."""
    for match in KEYED.finditer(card.text):
        key = match["key"].lower()
        closed = not match["open"] or match["end"] in ("}", "'", " ")
        if closed and key not in NAMES_A_THING:
            own = card.kind in "rcl" and key in (card.kind, "value")
            yield from _spot(card, match["word"], match.start("word"), key, own=own)


def _spot(card: Card, word: str, start: int, key: str = "", *, own: bool = False) -> Iterator[Spot]:
    number = read_number(word)
    if number is not None:
        yield Spot(card, word, number, start, start + len(word), key, own)


def value_field(card: Card) -> Field | None:
    """The field with the value of R, C, L, of a linear E, G, F, H or of a coupling K where it is
    positional, else None. It need not read as a number: it may be `{name}`."""
    fields = card.fields
    match card.kind:
        case "r" | "c" | "l":
            for field, after in zip(fields[3:5], (*fields[4:6], None), strict=False):
                if after is not None and after.text == "=":
                    return None
                if read_number(field.text) is not None or field.text[0] in "{'":
                    return field
            return None
        case "e" | "g":
            plain = len(fields) == 6 or (len(fields) > 6 and _comma_between(card, 5))
            return fields[5] if plain and all(f.text[0] != "(" for f in fields[1:5]) else None
        case "f" | "h":
            return fields[4] if len(fields) == 5 or (len(fields) > 5 and _comma_between(card, 4)) else None
        case "k":
            return fields[3] if len(fields) == 4 else None
        case _:
            return None


def _comma_between(card: Card, index: int) -> bool:
    """Whether nothing but a comma stands between two fields that both read as numbers."""
    fields = card.fields
    if index + 1 >= len(fields) or card.text[fields[index].end : fields[index + 1].start] != ",":
        return False
    return all(read_number(f.text) is not None for f in fields[index : index + 2])


def comma_pairs(card: Card) -> Iterator[tuple[Field, Field]]:
    """Two numbers with only a comma between them, where one number is wanted."""
    fields = card.fields
    own = value_field(card)
    for index, field in enumerate(fields[:-1]):
        if not _comma_between(card, index):
            continue
        before = fields[index - 1].key if index else ""
        after = fields[index + 2] if index + 2 < len(fields) else None
        single = (
            field is own
            or (card.kind in ("v", "i") and (index == 3 or before == "dc"))
            or (
                card.kind in ("r", "c", "l", "x", ".param", ".subckt")
                and before == "="
                and fields[index - 2].key != "tc"
            )
        )
        if single and (after is None or after.text != "="):
            yield field, fields[index + 1]


class Values:
    """The text behind each passive's value: on its own card, or of the parameter that the card names."""

    def __init__(self, deck: Deck, circuit: Circuit) -> None:
        self.deck = deck
        self.instances = {i.name: i.origin.card for i in circuit.instances}
        self.parameters: dict[str, list[Spot]] | None = None

    def of(self, element: Passive) -> Spot | None:
        """The number that an element's value is read from, None where it is calculated."""
        card = element.origin.card
        own = next((s for s in spots(card) if s.own), None)
        if own is not None:
            return own if own.number.value == element.value else None
        field = value_field(card)
        match = REFERENCE.fullmatch(field.text) if field is not None else None
        if match is None:
            return None
        named = [s for s in self._parameter(match[1].lower()) if s.number.value == element.value]
        on_instance = [
            s for s in named if element.origin.path and s.card is self.instances.get(element.origin.path[-1])
        ]
        return next(iter(on_instance or named), None)

    def _parameter(self, name: str) -> list[Spot]:
        if self.parameters is None:
            self.parameters = defaultdict(list)
            for card in self.deck.cards:
                if card.kind in (".param", ".subckt", "x"):
                    for spot in keyed_spots(card):
                        self.parameters[spot.key].append(spot)
        return self.parameters.get(name, [])


def upper_case_files(deck: Deck) -> set[str]:
    """Files whose element cards hold no lower-case letter, so that an `M` or `F` says nothing by its case."""
    files: dict[str, bool] = {}
    for card in deck.cards:
        if not card.kind.startswith("."):
            file = card.segments[0].file
            files[file] = files.get(file, True) and not re.search(r"[a-z]", card.text)
    return {file for file, upper in files.items() if upper}
