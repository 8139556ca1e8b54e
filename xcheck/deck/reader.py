"""Reading a deck: files to cards, with includes and library sections written in place.

The order of things is ngspice's: the first line of the top file is the title; comments are taken off; a
line that begins with `+` continues the last card; `.include` and `.lib FILE SECTION` are replaced by what
they name.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from difflib import get_close_matches
from pathlib import Path

from xcheck.deck.cards import Card, Comment, Deck, Directive, Segment
from xcheck.deck.comments import content_of, net_taken_for_comment, strange_blank
from xcheck.deck.fields import BLANKS, Unbalanced, fields_of
from xcheck.deck.folders import AllowedFolders
from xcheck.deck.sections import section_lines, section_names
from xcheck.deck.source import MOST_BYTES, MOST_LINES, Text, Unreadable, lines_of, read_lines
from xcheck.errors import DeckUnreadable
from xcheck.finding import Finding, Level
from xcheck.place import Place

DEEPEST_INCLUDE = 64
NOT_EXECUTED = (".control", ".endc", ".exec")
INCLUDES = (".include", ".inc", ".incl", ".lib")
NO_TITLE = (".param", ".csparam", ".subckt", ".ends", ".if")
"""First words of a title with which ngspice 39 refuses a deck; those of INCLUDES it carries out there."""


def read_deck(path: str | Path, include_dirs: Sequence[Path] = ()) -> Deck:
    """The deck in a file. Raises DeckUnreadable; all that is wrong inside the deck is in `Deck.findings`."""
    path = Path(path)
    try:
        text = read_lines(path)
    except Unreadable as why:
        raise DeckUnreadable(f"{path} cannot be read: {why}") from why
    reading = _Reading(AllowedFolders(path, include_dirs))
    return reading.deck(str(path), text)


def read_text(text: str | bytes, path: str = "deck.cir") -> Deck:
    """A deck given as text; includes are looked for beside `path`."""
    data = text.encode("utf-8", "surrogatepass") if isinstance(text, str) else text
    return _Reading(AllowedFolders(Path(path), ())).deck(path, lines_of(data))


@dataclass
class _Pending:
    """A card being collected: pieces of its text and where each stands."""

    pieces: list[str] = field(default_factory=list)
    segments: list[Segment] = field(default_factory=list)
    length: int = 0

    def add(self, piece: str, file: str, line: int, column: int) -> None:
        self.segments.append(Segment(self.length, file, line, column))
        self.pieces.append(piece)
        self.length += len(piece) + 1


class _Reading:
    """The state of one reading."""

    def __init__(self, folders: AllowedFolders) -> None:
        self.folders = folders
        self.cards: list[Card] = []
        self.comments: list[Comment] = []
        self.directives: list[Directive] = []
        self.findings: list[Finding] = []
        self.files: list[str] = []
        self.open: list[tuple[Path, str]] = []
        self.pending = _Pending()
        self.end: int | None = None
        self.in_title = True
        self.joined = False
        self.nets_lost = False
        self.control = False
        self.lines = 0
        self.bytes = 0
        self.full = False

    def deck(self, path: str, text: Text) -> Deck:
        title = text.lines[0] if text.lines else ""
        words = title.lower().split(maxsplit=1) or [""]
        self.open.append((Path(path).resolve(), ""))
        if words[0] in NO_TITLE:
            self._say(
                "syntax", "error", Place(path, 1, 1, 1 + len(title)),
                f"the first line is the title, and ngspice refuses a deck whose title begins with `{words[0]}`",
                "write a title above it",
            )  # fmt: skip
        carried_out = words[0] in INCLUDES
        self._file(path, text, first=0 if carried_out else 1)
        self._flush()
        if self.end is not None and self.end < len(self.cards):
            self._say(
                "text-after-end", "warning", self.cards[self.end].place(),
                f"{len(self.cards) - self.end} card(s) after `.end`: ngspice reads them as part of the circuit, "
                "and so does the review", "move `.end` to the last line, or delete what stands after it",
            )  # fmt: skip
        return Deck(
            path=path, title="" if carried_out else title.strip(), cards=tuple(self.cards),
            comments=tuple(self.comments), directives=tuple(self.directives),
            findings=tuple(self.findings), files=tuple(self.files), text_lines=self.lines,
        )  # fmt: skip

    def _say(self, rule: str, level: Level, place: Place, message: str, advice: str = "") -> None:
        self.findings.append(Finding(rule, level, place, message, advice=advice))

    def _file(self, name: str, text: Text, first: int = 0) -> None:
        """The lines of one file from index `first` on."""
        self.files.append(name)
        latin = text.latin
        for number, remark in text.remarks:
            self._say("syntax", "error", Place(name, number, 1, 1), remark)
        for number, line in enumerate(text.lines[first:], first + 1):
            if self.lines >= MOST_LINES:
                if not self.full:
                    self._say(
                        "syntax", "error", Place(name, number, 1, 1),
                        f"more than {MOST_LINES} lines; the rest is not read",
                        "review the blocks of the design one by one",
                    )  # fmt: skip
                self.full = True
                return
            self.lines += 1
            if not line.isascii() or "$" in line:
                latin = self._odd(name, number, line, latin=latin)
            self._line(name, number, line)

    def _odd(self, name: str, number: int, line: str, *, latin: bool) -> bool:
        """Says what of a line ngspice reads otherwise than it looks. latin: whether bytes that are no UTF-8 are
        still to be told; returned so."""
        content, start = content_of(line)
        if content.startswith("*") or self.control:
            return latin
        lost = net_taken_for_comment(line)
        if lost is not None and not self.nets_lost:
            self.nets_lost = True
            self._say(
                "syntax", "error", Place(name, number, lost[0] + 1, lost[1] + 1),
                f"`{line[lost[0] : lost[1]]}` and what follows is lost, here and wherever it stands: `$` after a blank "
                "begins a comment", "rename such nets, for instance with `n` before the `$`",
            )  # fmt: skip
        strange = strange_blank(content)
        if strange >= 0:
            column = start + strange + 1
            self._say(
                "syntax", "error", Place(name, number, column, column + 1),
                f"character U+{ord(content[strange]):04X} looks like a blank, but is part of a word to ngspice",
                "write an ordinary blank",
            )  # fmt: skip
        if latin and not content.replace("\u00b5", "u").isascii():
            self._say(
                "syntax", "warning", Place(name, number, start + 1, start + 1 + len(content)),
                "bytes that are no UTF-8 outside a comment, which ngspice refuses; read as Latin-1",
                "save the file as UTF-8",
            )  # fmt: skip
            return False
        return latin

    def _line(self, name: str, number: int, line: str) -> None:
        content, start = content_of(line)
        low = content[:9].lower()
        if self.control:
            self.control = not low.startswith(".endc")
        elif self.joined:
            self._continue(line.strip(BLANKS), name, number, len(line) - len(line.lstrip(BLANKS)) + 1)
        elif not content:
            pass
        elif content.startswith("*"):
            self._comment(content, Place(name, number, start + 1, start + 1 + len(content)))
        elif content.startswith("+"):
            body = content[1:].lstrip(BLANKS)
            self._continue(body, name, number, start + 1 + len(content) - len(body))
        else:
            self._flush()
            self.in_title = False
            if low.startswith(".control"):
                self.control = True
                self._say(
                    "command-ignored", "note", Place(name, number, start + 1, start + 1 + len(content)),
                    "a `.control` block: its commands are not executed",
                )  # fmt: skip
            else:
                self._add(content, name, number, start + 1)
                if low.startswith((".inc", ".lib")):
                    # written in place at once, so that comments behind it count the cards that it brings
                    self._flush()

    def _add(self, content: str, name: str, number: int, column: int) -> None:
        """Characters of the pending card. A micro sign is a `u`; two backslashes join the next line as it stands."""
        self.joined = content.endswith("\\\\")
        content = content.removesuffix("\\\\").rstrip(BLANKS) if self.joined else content
        self.pending.add(content.replace("\u00b5", "u"), name, number, column)

    def _continue(self, body: str, name: str, number: int, column: int) -> None:
        if self.pending.pieces:
            self.joined = False
            if body:
                self._add(body, name, number, column)
        elif not self.in_title:
            place = Place(name, number, column, column + len(body))
            self._say("syntax", "error", place, "a continuation line with no card before it")

    def _comment(self, content: str, place: Place) -> None:
        if content.startswith("*#"):
            self._say("command-ignored", "note", place, "a `*#` line is a command to ngspice: not executed")
            return
        body = content[1:].strip()
        before = len(self.cards) + bool(self.pending.pieces)
        if body.lower().startswith("xcheck:"):
            self.directives.append(Directive(tuple(body[7:].split()), place, before))
        self.comments.append(Comment(content[1:], place, before))

    def _flush(self) -> None:
        """Closes the pending card."""
        if not self.pending.pieces:
            return
        text, segments = " ".join(self.pending.pieces), tuple(self.pending.segments)
        self.pending, self.joined = _Pending(), False
        try:
            fields = fields_of(text)
        except Unbalanced as fault:
            place = Card(text, "", (), segments).place_of(fault.offset, fault.offset + 1)
            self._say("syntax", "error", place, f"{fault}: `{_short(text)}`", "close it; the line is not read")
            return
        if not fields:
            return
        key = fields[0].key
        card = Card(text, key if key.startswith(".") else key[0], fields, segments)
        if key == ".end":
            if len(self.open) == 1 and self.end is None:
                self.end = len(self.cards)
        elif key in (".include", ".inc", ".incl"):
            self._include(card)
        elif key == ".lib":
            self._library(card)
        elif key == ".endl":
            pass
        elif key in NOT_EXECUTED:
            self._say("command-ignored", "note", card.place(), f"`{key}` is not executed")
        elif not (key[0].isalpha() or key.startswith(".")):
            self._say(
                "syntax", "error", card.place(card.fields[0]), f"`{_short(text)}` is no card",
                "a line begins with an element's letter, a dot card, `*` or `+`",
            )  # fmt: skip
        else:
            self.cards.append(card)

    def _include(self, card: Card) -> None:
        rest = card.text[card.fields[0].end :].strip(BLANKS)
        if not rest:
            self._say("syntax", "error", card.place(), "an include without a file name")
            return
        wanted = rest[1 : rest.find(rest[0], 1)] if rest[0] in "\"'" else card.fields[1].text
        if " " in rest and rest[0] not in "\"'" and not self._there(wanted):
            self._blank_in_name(card, rest)
            wanted = rest
        self._whole(card, wanted)

    def _whole(self, card: Card, wanted: str) -> None:
        """A file in place of the card that asks for it."""
        text = self._open_include(card, wanted)
        if text is not None:
            name, lines = text
            self._file(name, lines)
            self._flush()
            self.open.pop()

    def _there(self, wanted: str) -> bool:
        found, _ = self.folders.find(_path(wanted), self.open[-1][0].parent)
        return found is not None

    def _blank_in_name(self, card: Card, wanted: str) -> None:
        if self._there(wanted):
            place = card.place_of(card.fields[1].start, len(card.text))
            if card.name == ".lib":
                advice = "give the file and its folders names without blanks"
            else:
                advice = "put the name in quotes"
            self._say(
                "file-missing", "warning", place,
                f"`{wanted}` is there and is read, but ngspice ends its name at the first blank", advice,
            )  # fmt: skip

    def _library(self, card: Card) -> None:
        if len(card.fields) == 2 and self._there(card.fields[1].text):
            self._say(
                "syntax", "error", card.place(),
                "a `.lib` card with a file alone, which ngspice refuses; the whole file is read",
                f"write `.include {card.fields[1].text}`",
            )  # fmt: skip
            self._whole(card, card.fields[1].text)
            return
        if len(card.fields) < 3:
            self._say("syntax", "error", card.place(), "a `.lib` card wants a file and a section")
            return
        wanted, section = card.fields[1].text, card.fields[2]
        if len(card.fields) > 3 and not self._there(wanted):
            section = card.fields[-1]
            wanted = card.text[card.fields[0].end : section.start].strip(BLANKS)
        if any(blank in wanted for blank in BLANKS):
            self._blank_in_name(card, wanted)
        key = section.key.strip("\"'")
        text = self._open_include(card, wanted, key)
        if text is None:
            return
        name, lines = text
        inside = section_lines(lines.lines, key)
        if inside is None:
            known = section_names(lines.lines)
            near = get_close_matches(key, known, n=1) or known[:5]
            self._say(
                "file-missing", "error", card.place(section),
                f"{name} has no section `{key}`",
                f"sections there: {', '.join(near)}" if near else "it has no `.lib` sections",
            )  # fmt: skip
        else:
            first, last = inside
            self._file(name, replace(lines, lines=lines.lines[:last]), first)
            self._flush()
        self.open.pop()

    def _open_include(self, card: Card, wanted: str, section: str = "") -> tuple[str, Text] | None:
        """The file that a card asks for, now on the stack of open files; None where a finding was made."""
        wanted = _path(wanted)
        place = card.place_of(card.fields[1].start, len(card.text))
        found, shown = self.folders.find(wanted, self.open[-1][0].parent)
        if found is None:
            near = self.folders.near(wanted, self.open[-1][0].parent)
            advice = f"did you mean {', '.join(near)}?" if near else "check the path, or use --include-dir"
            self._say("file-missing", "error", place, f"there is no file `{wanted}`", advice)
            return None
        if not self.folders.allows(found):
            self._say(
                "include-outside", "error", place,
                f"`{wanted}` lies outside the folders of this deck and is not read",
                "move it beside the deck, or allow its folder with --include-dir",
            )  # fmt: skip
            return None
        if (found, section) in self.open:
            self._say("syntax", "error", place, f"`{wanted}` includes itself; not read again")
            return None
        if len(self.open) > DEEPEST_INCLUDE:
            self._say("syntax", "error", place, f"includes nested deeper than {DEEPEST_INCLUDE}; not read")
            return None
        try:
            text = read_lines(found, MOST_BYTES - self.bytes)
        except Unreadable as why:
            self._say("file-missing", "error", place, f"`{wanted}` cannot be read: {why}")
            return None
        self.bytes += sum(len(line) for line in text.lines)
        self.open.append((found, section))
        return shown, text


def _path(written: str) -> str:
    """A file's name as written on a card: quotes taken off, backslashes as on other systems."""
    return written.strip("\"'").replace("\\", "/")


def _short(text: str) -> str:
    return text if len(text) <= 60 else text[:57] + "..."
