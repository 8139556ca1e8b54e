"""Bytes of a file to physical lines, from regular files only and within limits."""

import os
import stat
from dataclasses import dataclass
from pathlib import Path

MOST_BYTES = 64_000_000
"""Of all files of one deck; a deck beyond this is a mistake or an attack."""
MOST_LINES = 100_000
LONGEST_LINE = 100_000


@dataclass(frozen=True, slots=True)
class Text:
    """Physical lines of a file without their ends; remarks: what was odd, with 1-based line numbers; latin: whether
    it was read as Latin-1, being no UTF-8."""

    lines: tuple[str, ...]
    remarks: tuple[tuple[int, str], ...] = ()
    latin: bool = False


class Unreadable(Exception):
    """Why a file cannot be read, in words; for callers inside the reader alone."""


def read_lines(path: Path, most_bytes: int = MOST_BYTES) -> Text:
    """The lines of a regular file. Raises Unreadable (missing, no regular file, no permission, too large)."""
    return lines_of(_bytes_of(path, most_bytes))


def _bytes_of(path: Path, most_bytes: int) -> bytes:
    try:
        # non-blocking, so that a pipe without a writer does not hang the open
        descriptor = os.open(path, os.O_RDONLY | os.O_NONBLOCK | os.O_CLOEXEC)
    except OSError as error:
        raise Unreadable(error.strerror or str(error)) from error
    status = os.fstat(descriptor)
    if not stat.S_ISREG(status.st_mode):
        os.close(descriptor)
        raise Unreadable("it is no regular file")
    with os.fdopen(descriptor, "rb") as file:
        if status.st_size > most_bytes:
            raise Unreadable(f"it is larger than {most_bytes // 1_000_000} MB")
        return file.read(most_bytes + 1)[:most_bytes]


def lines_of(data: bytes) -> Text:
    """Decodes (UTF-8, UTF-16 with its mark, else Latin-1) and splits at line ends."""
    remarks: list[tuple[int, str]] = []
    text, latin = _decode(data, remarks)
    if "\r" in text and "\n" not in text and text.strip("\r"):
        remarks.append((1, "lines end with a carriage return alone: ngspice takes the whole file for one line"))
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    if lines and lines[-1] == "":
        lines.pop()
    if lines and lines[-1].strip("\x1a") == "" and lines[-1]:
        lines.pop()
    for number, line in enumerate(lines, 1):
        if "\x00" in line:
            remarks.append((number, "zero bytes, read as blanks"))
            lines[number - 1] = line.replace("\x00", " ")
        elif len(line) > LONGEST_LINE:
            remarks.append((number, f"a line of {len(line)} characters, read up to character {LONGEST_LINE}"))
            lines[number - 1] = line[:LONGEST_LINE]
    return Text(tuple(lines), tuple(remarks), latin)


def _decode(data: bytes, remarks: list[tuple[int, str]]) -> tuple[str, bool]:
    """The text, and whether it was read as Latin-1."""
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        remarks.append((1, "UTF-16 text, which ngspice does not read; save it as UTF-8"))
        return data.decode("utf-16", errors="replace"), False
    if data[:3] == b"\xef\xbb\xbf":
        data = data[3:]
    try:
        return data.decode("utf-8"), False
    except UnicodeDecodeError:
        return data.decode("latin-1"), True
