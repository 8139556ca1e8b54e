"""The decks in `cases/`: one file a rule, each deck with a caret under every place that a finding must point at.

    --- fires: why it must            (or `silent:` why it must not, or `notes:` a note and nothing more)
    Title
    r2 n out 1M
    *        ^ milli-for-mega error

The caret stands under the column of the line above it; `*^` is column 1. A deck's findings are exactly its carets;
notes of other rules than the file's own are let pass. `.include` finds the files in `cases/`.
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

CASES = Path(__file__).parent / "cases"
HEAD = re.compile(r"--- (fires|silent|notes): (\S.*)")
CARET = re.compile(r"\*( *)\^ ([a-z-]+) (note|warning|error)")

Expected = tuple[str, str, int, int]
"""rule, level, line, column"""


@dataclass(frozen=True)
class Case:
    rule: str
    kind: str
    title: str
    text: str
    expected: tuple[Expected, ...]

    @property
    def path(self) -> str:
        return str(CASES / f"{self.rule}.cir")

    def __str__(self) -> str:
        return f"{self.rule}: {self.title}"


def load(path: Path) -> Iterator[Case]:
    """The cases of one file. A line that is no head, before the first head, is refused."""
    kind, title, lines = "", "", list[str]()
    for line in [*path.read_text().splitlines(), ""]:
        head = HEAD.fullmatch(line)
        if head and kind:
            yield case(path.stem, kind, title, lines)
        if head:
            kind, title = head.groups()
            lines = []
        else:
            if not kind and line:
                raise ValueError(f"{path.name}: `{line}` stands before the first case")
            lines.append(line)
    yield case(path.stem, kind, title, lines)


def case(rule: str, kind: str, title: str, lines: list[str]) -> Case:
    expected = []
    above = 0
    for number, line in enumerate(lines, 1):
        caret = CARET.fullmatch(line)
        if caret:
            column = len(caret[1]) + 2 if caret[1] else 1
            expected.append((caret[2], caret[3], above, column))
        elif "^" in line:
            raise ValueError(f"{rule}, {title}: cannot read `{line}`")
        else:
            above = number
    own = [e for e in expected if e[0] == rule]
    fits = {
        "fires": bool(own) and any(level != "note" for _, level, _, _ in own),
        "silent": not own,
        "notes": bool(own) and all(level == "note" for _, level, _, _ in own),
    }
    if not fits[kind]:
        raise ValueError(f"{rule}, {title}: the carets do not fit `{kind}`")
    return Case(rule, kind, title, "\n".join(lines) + "\n", tuple(expected))


def all_cases() -> list[Case]:
    return [case for path in sorted(CASES.glob("*.txt")) for case in load(path)]
