"""What a rule is: a name, a level, what it catches, and the function that looks for it."""

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from itertools import groupby

from xcheck.finding import Finding, Level
from xcheck.reviewed import Evidence

Check = Callable[[Evidence], Iterable[Finding]]


@dataclass(frozen=True, slots=True)
class Rule:
    """level: the usual one; also: others that it gives in cases that its function names; catches: one line
    for a list of rules; check None: the parts that read the deck and find its amplifiers make these
    findings."""

    name: str
    level: Level
    catches: str
    check: Check | None = None
    also: tuple[Level, ...] = ()


def place_order(finding: Finding) -> tuple[str, int, int, str, str]:
    """Sorts findings by place, then by rule and subject."""
    place = finding.place
    return place.file, place.line, place.column, finding.rule, finding.subject


def one_a_card(findings: Iterable[Finding]) -> tuple[Finding, ...]:
    """One finding a rule and place: a card in a subcircuit speaks once for all instances, and names them."""
    ordered = sorted(dict.fromkeys(findings), key=place_order)
    merged = []
    for _, group in groupby(ordered, key=lambda f: place_order(f)[:4]):
        first, *others = group
        subjects = [s for s in dict.fromkeys(f.subject for f in others) if s and s != first.subject]
        if subjects:
            named = ", ".join(subjects[:3]) + (f" and {len(subjects) - 3} more" if len(subjects) > 3 else "")
            first = replace(first, message=f"{first.message} (likewise {named})")
        merged.append(first)
    return tuple(merged)
