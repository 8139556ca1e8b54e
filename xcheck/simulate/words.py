"""What ngspice says, with its steps in between left out."""

import re
from collections.abc import Iterable

_STEPS = re.compile(
    r"trying gmin|note: (transient op|starting|one successful|no compatibility|codel model)|supplies reduced|"
    r"warning: (further gmin|last gmin)|doing analysis|no\. of data rows|reference value|circuit:|"
    r"reducing trtol|preparing expression|initial transient|last node voltages|-{6,}|node +(last )?voltage|----|"
    r"please check your input|error: ngspice\.dll cannot recover|dc solution failed -|ac operating point failed -",
    re.IGNORECASE,
)
_TABLE = re.compile(r"\S+\s+[-+\d.e]+\s+[-+\d.e]+( \*)?$")
"""A node with its last two voltages, which ngspice lists after a failed search."""
MOST_LINES = 12


def telling(lines: Iterable[str]) -> list[str]:
    """The lines that say what is wrong, each once."""
    found = [" ".join(line.split()) for line in lines]
    return list(dict.fromkeys(w for w in found if w and not _STEPS.match(w) and not _TABLE.match(w)))


def quoted(lines: Iterable[str], otherwise: str) -> str:
    """Lines as one text, parted by ` / `; other words where nothing was said."""
    said = telling(lines)
    if len(said) > MOST_LINES:
        said = [*said[: MOST_LINES - 1], said[-1]]
    return " / ".join(said) or otherwise


def refused(lines: Iterable[str]) -> bool:
    """Whether ngspice said that it did not carry out an analysis."""
    return any(re.search(r"aborted|analysis not run|no such device", line, re.IGNORECASE) for line in lines)


def by_transient(lines: Iterable[str]) -> bool:
    """Whether ngspice said that it found the operating point by a transient run."""
    return any("transient op finished" in line.lower() for line in lines)


def not_loaded(lines: Iterable[str]) -> bool:
    """Whether ngspice said that it has no circuit to work on."""
    return any("circuit not parsed" in line or "any circuits loaded" in line for line in lines)


def out_of_memory(lines: Iterable[str]) -> bool:
    """Whether ngspice said that it got no more memory."""
    return any(re.search(r"can't allocate|insufficient memory|out of memory", w, re.IGNORECASE) for w in lines)
