"""A card's fields told apart: words in order, and `key = value` pairs."""

from collections.abc import Mapping
from dataclasses import dataclass

from xcheck.deck.cards import Card, Field


@dataclass(frozen=True, slots=True)
class Words:
    """plain: fields before the first `key = value` pair, the element's own name left out; pairs: value fields
    (a run of text from the value's first word to the next key) by lower-case key, in order."""

    plain: tuple[Field, ...]
    pairs: Mapping[str, Field]


def words_of(card: Card, first: int = 1) -> Words:
    """The words of a card from field `first` on."""
    fields = card.fields[first:]
    signs = [k for k, field in enumerate(fields) if field.text == "="]
    if not signs:
        return Words(fields, {})
    plain = fields[: max(signs[0] - 1, 0)]
    pairs: dict[str, Field] = {}
    for number, sign in enumerate(signs):
        last = signs[number + 1] - 1 if number + 1 < len(signs) else len(fields)
        value = fields[sign + 1 : last]
        if sign == 0:
            continue
        key = fields[sign - 1].key
        start, end = (value[0].start, value[-1].end) if value else (fields[sign].end, fields[sign].end)
        pairs[key] = Field(card.text[start:end], start, end)
    return Words(plain, pairs)


def opened(fields: tuple[Field, ...]) -> tuple[Field, ...]:
    """Fields with parenthesised groups, such as `(a,b)`, opened into their words."""
    found: list[Field] = []
    for field in fields:
        if not (field.text.startswith("(") and field.text.endswith(")")):
            found.append(field)
            continue
        start = -1
        for position, character in enumerate(field.text + " "):
            if character in "(), \t":
                if start >= 0:
                    found.append(Field(field.text[start:position], field.start + start, field.start + position))
                start = -1
            elif start < 0:
                start = position
    return tuple(found)


def braced(text: str) -> str | None:
    """What stands inside braces or quotes, None where the text is not wrapped."""
    stripped = text.strip()
    if len(stripped) >= 2 and (stripped[0], stripped[-1]) in (("{", "}"), ("'", "'"), ('"', '"')):
        return stripped[1:-1]
    return None
