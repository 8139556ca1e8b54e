"""Cards: the logical lines of a deck, each knowing where its characters stand in the user's text."""

from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass

from xcheck.finding import Finding
from xcheck.place import Place


@dataclass(frozen=True, slots=True)
class Segment:
    """Characters of a card's text from `start` on stand in `file` at `line`, from `column` (1-based) on."""

    start: int
    file: str
    line: int
    column: int


@dataclass(frozen=True, slots=True)
class Field:
    """One word of a card: its text as written and its half-open range of offsets in the card's text."""

    text: str
    start: int
    end: int

    @property
    def key(self) -> str:
        """The word as ngspice compares it: lower case."""
        return self.text.lower()


@dataclass(frozen=True, slots=True)
class Card:
    """One logical line: continuations joined by one blank, comments taken off, case as written.

    kind: the lower-case first letter of an element ('r', 'x', ...) or the dot word ('.subckt').
    fields: words split at blanks, with braces, quotes and parentheses kept whole; '=' is a word of its own
    (`w = 5u`, `w=5u` both give 'w', '=', '5u'); commas separate like blanks outside braces, quotes and
    parentheses.
    segments: where the characters come from, in order of offset; at least one.
    """

    text: str
    kind: str
    fields: tuple[Field, ...]
    segments: tuple[Segment, ...]

    def place(self, field: Field | None = None) -> Place:
        """The place of a field of this card, or of the card's first line where none is given."""
        start, end = (0, len(self.text)) if field is None else (field.start, field.end)
        return self.place_of(start, end)

    def place_of(self, start: int, end: int) -> Place:
        """The place of the characters from offset start to end, cut at the end of their line."""
        index = bisect_right([s.start for s in self.segments], start) - 1
        segment = self.segments[max(index, 0)]
        limit = self.segments[index + 1].start - 1 if index + 1 < len(self.segments) else len(self.text)
        column = segment.column + start - segment.start
        return Place(segment.file, segment.line, column, column + max(min(end, limit) - start, 0))

    @property
    def name(self) -> str:
        """The element's or dot card's first word, lower case."""
        return self.fields[0].key if self.fields else ""


@dataclass(frozen=True, slots=True)
class Comment:
    """A comment line: its text after the star, its place, and how many cards stand before it."""

    text: str
    place: Place
    cards_before: int


@dataclass(frozen=True, slots=True)
class Directive:
    """A comment line `* xcheck: WORD ARGUMENT...`; words keep their case.

    cards_before: how many cards of the deck stand before it, which tells the scope it is written in.
    """

    words: tuple[str, ...]
    place: Place
    cards_before: int


@dataclass(frozen=True, slots=True)
class Deck:
    """A deck as read: includes and library sections written in place, parameters not yet evaluated.

    path: as the user gave it; title: the first line; cards: in the order in which ngspice reads them, those
    after `.end` among them; text_lines: number of physical lines read, over all files.
    """

    path: str
    title: str
    cards: tuple[Card, ...]
    comments: tuple[Comment, ...] = ()
    directives: tuple[Directive, ...] = ()
    findings: tuple[Finding, ...] = ()
    files: tuple[str, ...] = ()
    text_lines: int = 0


def words(fields: Sequence[Field]) -> list[str]:
    """The texts of some fields, lower case."""
    return [field.key for field in fields]
