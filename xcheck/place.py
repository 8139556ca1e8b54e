"""Places in the user's text. Everything that came from text keeps one."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Place:
    """A run of characters on one line of a file the user wrote.

    file: path as the user would type it; line, column: 1-based; end_column: exclusive.
    """

    file: str
    line: int
    column: int
    end_column: int

    def __str__(self) -> str:
        return f"{self.file}:{self.line}:{self.column}"
