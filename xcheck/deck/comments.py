"""Taking comments off a line, as ngspice 39 does."""

import re

_INLINE = re.compile(r";|//|(?<=[\s,])\$")
"""`;` and `//` anywhere, `$` after a blank or comma."""
_REPLACED = '=[]?()&%$"!:,;\f'
"""A line that begins with one of these is a comment to ngspice."""


def content_of(line: str) -> tuple[str, int]:
    """The line without in-line comment and surrounding blanks, and the offset where it begins. A comment line
    comes back beginning with `*`, whatever it began with."""
    stripped = line.strip()
    start = len(line) - len(line.lstrip())
    if not stripped or stripped[0] == "*":
        return stripped, start
    if stripped[0] in _REPLACED or stripped.startswith("//"):
        return "*" + stripped[1:], start
    match = _INLINE.search(stripped)
    return (stripped[: match.start()].rstrip() if match else stripped), start
