"""Words and numbers of a project file."""

from typing import Any

from xcheck.deck.numbers import read_number

ROLES = ("in+", "in-", "out", "v+", "v-")
KINDS = ("voltage-feedback", "current-feedback", "transconductance", "comparator")


def number_of(value: Any) -> Any:
    """A number, or a text as in a deck, as a float. Raises ValueError."""
    if isinstance(value, bool) or not isinstance(value, (int, float, str)):
        raise ValueError("a number is wanted")
    if isinstance(value, str):
        number = read_number(value)
        if number is None or any(c.isdigit() for c in number.rest):
            raise ValueError(f"`{value}` is no number; write it as 1e6 or as in a deck, `1meg`")
        return number.value
    return float(value)
