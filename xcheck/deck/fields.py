"""A card's text to its fields."""

import re

from xcheck.deck.cards import Field

BLANKS = " \t\r\n\f\v"
"""What separates words; to ngspice a no-break space is part of one."""
_PLAIN = re.compile(r"[^ \t\r\n\f\v,]+")
_SPECIAL = re.compile(r"[=(){}'\"]")
_CLOSING = {"(": ")", "{": "}"}


class Unbalanced(Exception):
    """A brace, quote or parenthesis that is never closed: its offset in the text."""

    def __init__(self, character: str, offset: int) -> None:
        super().__init__(f"`{character}` is never closed")
        self.offset = offset


def fields_of(text: str) -> tuple[Field, ...]:
    """The words of a card as `Card.fields` describes them. Raises Unbalanced."""
    if _SPECIAL.search(text) is None:
        return tuple(Field(m.group(), m.start(), m.end()) for m in _PLAIN.finditer(text))
    fields: list[Field] = []
    start = -1
    position = 0
    while position < len(text):
        character = text[position]
        if character == "=" and start >= 0 and text[position - 1] in "<>!":
            position += 1
        elif character in BLANKS or character in ",=":
            if start >= 0:
                fields.append(Field(text[start:position], start, position))
                start = -1
            if character == "=":
                double = text[position : position + 2] == "=="
                fields.append(Field("==" if double else "=", position, position + 1 + double))
                position += double
            position += 1
        else:
            if start < 0:
                start = position
            position = _end_of_group(text, position) if character in "({'\"" else position + 1
    if start >= 0:
        fields.append(Field(text[start:], start, len(text)))
    return tuple(fields)


def _end_of_group(text: str, start: int) -> int:
    """The offset after the group that opens at `start`; a quote ends at the next one of its kind."""
    opening = text[start]
    if opening in "'\"":
        end = text.find(opening, start + 1)
        if end < 0:
            raise Unbalanced(opening, start)
        return end + 1
    depth = 0
    closing = _CLOSING[opening]
    for match in re.finditer(re.escape(opening) + "|" + re.escape(closing), text[start:]):
        depth += 1 if match.group() == opening else -1
        if depth == 0:
            return start + match.end()
    raise Unbalanced(opening, start)
