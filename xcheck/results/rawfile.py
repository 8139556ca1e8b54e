"""An ngspice raw file as plain data: binary and ASCII, real and complex, several plots in one file.

PySpice's own reader takes what the simulator prints in server mode, binary and with one plot; a file on disk has
another header, so the few lines of the format are read here. The file is untrusted: sizes are held against the
bytes that are really there before anything is allocated.
"""

from dataclasses import dataclass
from pathlib import Path
from stat import S_ISREG

import numpy as np
from numpy.typing import NDArray

from xcheck.errors import CallError

MOST_BYTES = 1 << 31
"""A raw file larger than this is refused: a sweep of impedances is never as large."""
LONGEST_LINE = 1 << 16
"""No header line is as long; without an end, a file of noise would be searched for one."""

COUNTS = {"no. variables": "variables", "no. points": "points"}


@dataclass(frozen=True, slots=True)
class Variable:
    """A saved vector: its name in lower case (`v(out)`, `i(v1)`) and its type ('voltage', 'frequency', ...)."""

    name: str
    kind: str


@dataclass(frozen=True)
class Plot:
    """One plot: data has shape (variables, points), complex128 where is_complex, else float64; SI units."""

    title: str
    date: str
    name: str
    is_complex: bool
    variables: tuple[Variable, ...]
    data: NDArray[np.complex128] | NDArray[np.float64]


def read_raw(path: Path) -> tuple[Plot, ...]:
    """All plots of a raw file, in its order.

    Raises CallError where the file cannot be read, is too large, is cut short or is no raw file; the text says
    at which line or byte and what was read there.
    """
    try:
        status = path.stat()
        if not S_ISREG(status.st_mode):
            raise CallError(f"{path}: not a regular file; give the raw file that ngspice wrote")
        if status.st_size > MOST_BYTES:
            raise CallError(f"{path}: {status.st_size} bytes; no more than {MOST_BYTES} are read, save fewer vectors")
        content = path.read_bytes()
    except (OSError, ValueError) as error:
        raise CallError(f"{path} cannot be read: {getattr(error, 'strerror', None) or error}") from error
    return parse_raw(content, str(path))


def parse_raw(content: bytes, name: str = "raw file") -> tuple[Plot, ...]:
    """The plots in the bytes of a raw file; name stands in messages. Raises CallError as `read_raw` does."""
    reader = _Reader(content, name)
    plots = []
    while reader.more():
        plots.append(_plot(reader))
    if not plots:
        raise CallError(f"{name}: the file is empty; give the raw file that ngspice wrote")
    return tuple(plots)


class _Reader:
    """Bytes and how far they are read."""

    def __init__(self, content: bytes, name: str) -> None:
        self.content, self.name, self.at = content, name, 0

    def more(self) -> bool:
        """Whether anything but blanks is left; steps over the blanks."""
        while self.at < len(self.content) and self.content[self.at] in b" \t\r\n":
            self.at += 1
        return self.at < len(self.content)

    def line(self) -> str:
        if self.at >= len(self.content):
            raise self.wrong("the file ends within a plot: it is cut short; write it again")
        end = self.content.find(b"\n", self.at, self.at + LONGEST_LINE)
        if end < 0:
            end = min(len(self.content), self.at + LONGEST_LINE)
        raw = self.content[self.at : end]
        self.at = end + 1
        try:
            return raw.decode("utf-8").rstrip("\r")
        except UnicodeDecodeError:
            return raw.decode("latin-1").rstrip("\r")

    def wrong(self, what: str) -> CallError:
        return CallError(f"{self.name}: byte {min(self.at, len(self.content))}: {what}")


def _plot(reader: _Reader) -> Plot:
    header: dict[str, str] = {}
    variables: tuple[Variable, ...] = ()
    while True:
        line = reader.line()
        key, colon, value = line.partition(":")
        key = key.strip().lower()
        if not colon:
            if line.strip():
                raise reader.wrong(f"`{_shown(line)}` is no header line; this is no ngspice raw file")
            continue
        if key in ("binary", "values"):
            break
        if key == "variables":
            variables = _variables(reader, _count(reader, header, "no. variables"), value)
        else:
            header.setdefault(key, value.strip())
    if not variables:
        raise reader.wrong("a plot without variables")
    points = _count(reader, header, "no. points")
    flags = header.get("flags", "").lower().split()
    is_complex = "complex" in flags
    if is_complex == ("real" in flags):
        raise reader.wrong(f"`Flags: {_shown(header.get('flags', ''))}`: neither real nor complex")
    read = _binary if key == "binary" else _ascii
    data = read(reader, len(variables), points, is_complex)
    return Plot(
        header.get("title", ""), header.get("date", ""), header.get("plotname", ""), is_complex, variables, data
    )


def _count(reader: _Reader, header: dict[str, str], key: str) -> int:
    text = header.get(key, "")
    if not (text.isascii() and text.isdigit() and len(text) < 12):
        raise reader.wrong(f"`{key}: {_shown(text)}` is no count of {COUNTS[key]}")
    return int(text)


def _variables(reader: _Reader, count: int, rest: str) -> tuple[Variable, ...]:
    found: list[Variable] = []
    while len(found) < count:
        line = rest if rest.strip() else reader.line()
        rest = ""
        words = line.split()
        if len(words) < 3 or words[0] != str(len(found)):
            raise reader.wrong(f"`{_shown(line)}`: variable {len(found)} of {count} was expected here")
        if any(word.lower().startswith("dims=") for word in words[3:]):
            raise reader.wrong(f"`{_shown(line)}`: vectors of several lengths are not read; save without them")
        found.append(Variable(words[1].lower(), words[2].lower()))
    return tuple(found)


def _binary(
    reader: _Reader, variables: int, points: int, is_complex: bool
) -> NDArray[np.complex128] | NDArray[np.float64]:
    size = variables * points * (16 if is_complex else 8)
    left = len(reader.content) - reader.at
    if size > left:
        raise reader.wrong(f"{size} bytes of data were announced, {max(left, 0)} are there: the file is cut short")
    # the simulator writes numbers as its machine has them; all machines that it is built for today are little-endian
    kind = np.dtype("<c16" if is_complex else "<f8")
    table = np.frombuffer(reader.content, kind, variables * points, reader.at if size else 0)
    reader.at += size
    return table.reshape(points, variables).T


def _ascii(
    reader: _Reader, variables: int, points: int, is_complex: bool
) -> NDArray[np.complex128] | NDArray[np.float64]:
    if variables * points * 2 > len(reader.content) - reader.at + 1:
        raise reader.wrong(f"{points} points of {variables} variables were announced: the file is cut short")
    shape = (points, variables)
    data: NDArray[np.complex128] | NDArray[np.float64]
    data = np.empty(shape, np.complex128) if is_complex else np.empty(shape, np.float64)
    for point in range(points):
        for variable in range(variables):
            line = reader.line()
            while not line.strip():
                line = reader.line()
            words = line.split()
            if variable == 0 and (len(words) != 2 or words[0] != str(point)):
                raise reader.wrong(f"`{_shown(line)}`: point {point} of {points} was expected here")
            data[point, variable] = _value(reader, words[-1], line, is_complex)
    return data.T


def _value(reader: _Reader, word: str, line: str, is_complex: bool) -> complex | float:
    parts = word.split(",")
    try:
        numbers = [float(p) for p in parts]
    except ValueError:
        numbers = []
    if len(numbers) != (2 if is_complex else 1):
        raise reader.wrong(f"`{_shown(line)}`: no {'complex' if is_complex else 'real'} value")
    return complex(*numbers) if is_complex else numbers[0]


def _shown(text: str) -> str:
    """At most forty characters, none of which moves a terminal's cursor."""
    return "".join(c if c.isprintable() else "?" for c in text.strip()[:40])
