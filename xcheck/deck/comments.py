"""Taking comments off a line, as ngspice 39 does."""

import re

from xcheck.deck.fields import BLANKS

_INLINE = re.compile(r";|//|(?<=[\s,])\$")
"""`;` and `//` anywhere, `$` after a blank or comma."""
_NET = re.compile(r"\$n_\d+", re.IGNORECASE)
_STRANGE = re.compile("[\u00a0\u2000-\u200b\u202f\u3000\ufeff]")
_REPLACED = '=[]?()&%$"!:,;\f'
"""A line that begins with one of these is a comment to ngspice."""


def content_of(line: str) -> tuple[str, int]:
    """The line without in-line comment and surrounding blanks, and the offset where it begins. A comment line
    comes back beginning with `*`, whatever it began with."""
    stripped = line.strip(BLANKS)
    start = len(line) - len(line.lstrip(BLANKS))
    if not stripped or stripped[0] == "*":
        return stripped, start
    if stripped[0] in _REPLACED or stripped.startswith("//"):
        return "*" + stripped[1:], start
    match = _INLINE.search(stripped)
    return (stripped[: match.start()].rstrip(BLANKS) if match else stripped), start


def net_taken_for_comment(line: str) -> tuple[int, int] | None:
    """Where a net's name such as `$N_0001` begins a comment, as half-open range of offsets."""
    content, _ = content_of(line)
    match = None if content.startswith("*") else _INLINE.search(line)
    name = _NET.match(line, match.start()) if match is not None else None
    return None if name is None else name.span()


def strange_blank(content: str) -> int:
    """The offset of a character that looks like a blank and is none to ngspice, -1 where there is none."""
    match = None if content.isascii() else _STRANGE.search(content)
    return -1 if match is None else match.start()
