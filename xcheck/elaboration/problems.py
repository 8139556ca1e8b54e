"""Findings of elaboration: each once a card, however many instances share the card."""

from difflib import get_close_matches

from xcheck.deck.cards import Card, Field
from xcheck.elaboration.expressions import ExpressionError
from xcheck.finding import Finding, Level

MOST_OF_A_KIND = 200


class Problems:
    """Collects findings in order."""

    def __init__(self) -> None:
        self._found: dict[tuple[str, str, int, int, str], Finding] = {}
        self._left_out: dict[str, int] = {}
        self._unknown: set[tuple[str, str]] = set()

    def say(
        self, rule: str, level: Level, card: Card, field: Field | None, message: str, advice: str = "",
        subject: str = "",
    ) -> None:  # fmt: skip
        """One finding at a field of a card."""
        place = card.place(field)
        key = (rule, place.file, place.line, place.column, message)
        if key in self._found:
            return
        if sum(1 for k in self._found if k[0] == rule) >= MOST_OF_A_KIND:
            self._left_out[rule] = self._left_out.get(rule, 0) + 1
            return
        self._found[key] = Finding(rule, level, place, message, subject or card.name, advice=advice)

    def expression(self, error: ExpressionError, card: Card, field: Field, known: list[str]) -> None:
        """What is wrong with the expression in a field."""
        if error.unknown or error.function:
            near = get_close_matches(error.unknown, sorted(set(known)), n=2) if error.unknown else []
            advice = f"did you mean `{near[0]}`?" if near else "define it with `.param` or `.func`"
            self.say("undefined-parameter", "error", card, field, f"`{field.text}`: {error}", advice)
        else:
            self.say("syntax", "error", card, field, f"`{_short(field.text)}`: {error}")

    def unknown_model(self, card: Card, field: Field, known: list[str], what: str) -> None:
        """A name that is defined nowhere, with names like it; said once a name, at the first that uses it."""
        if (what, field.key) in self._unknown:
            return
        self._unknown.add((what, field.key))
        near = get_close_matches(field.key, sorted(set(known)), n=3)
        advice = f"did you mean {' or '.join(f'`{n}`' for n in near)}?" if near else "define it, or include its file"
        self.say("undefined-model", "error", card, field, f"no {what} `{field.text}` is defined", advice)

    def findings(self) -> tuple[Finding, ...]:
        """All of them; where a kind was cut short, its last one says so."""
        found = list(self._found.values())
        for rule, count in self._left_out.items():
            last = next(f for f in reversed(found) if f.rule == rule)
            found.append(Finding(rule, last.level, last.place, f"and {count} more of this kind, not listed"))
        return tuple(found)


def _short(text: str) -> str:
    return text if len(text) <= 60 else text[:57] + "..."
