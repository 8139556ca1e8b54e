"""Sections of a library file: `.lib NAME` ... `.endl`."""

from collections.abc import Sequence


def _words(line: str) -> list[str]:
    low = line.lstrip()[:200].lower()
    return [word.strip("\"'") for word in low.split()] if low.startswith((".lib", ".endl")) else []


def section_names(lines: Sequence[str]) -> list[str]:
    """The names of all sections, lower case, in order."""
    return [w[1] for w in map(_words, lines) if len(w) == 2 and w[0] == ".lib"]


def section_lines(lines: Sequence[str], name: str) -> tuple[int, int] | None:
    """Half-open range of line indices inside the section of that name; None without such a section."""
    first = -1
    for index, line in enumerate(lines):
        words = _words(line)
        if first < 0 and words[:1] == [".lib"] and words[1:] == [name]:
            first = index + 1
        elif first >= 0 and words[:1] == [".endl"]:
            return first, index
    return (first, len(lines)) if first >= 0 else None
