"""ngspice's shared library through PySpice, judged by what it says and by whether results are there.

PySpice takes every line on standard error that does not begin with `Warning:` for a failure, where newer versions
print harmless ones, and splits a deck at characters that are no line ends to ngspice. So lines are handed over one
by one here, commands are sent without that judgement, and the caller looks at words and vectors.
"""

import re
from typing import Any

from PySpice.Spice.NgSpice.Shared import NgSpiceShared, ffi

from xcheck.circuit.arrays import Complex

_COMMAND = re.compile(r"[A-Za-z0-9_.#=+\- ]+")
"""What a command may hold. ngspice reads commands as a shell does: `;`, backquotes, `$`, `>` and `!` have powers."""


class NoCommand(Exception):
    """A command that would hold characters with powers."""


class Ngspice:
    """The library. PySpice allows one in a process."""

    def __init__(self) -> None:
        self._shared: Any = NgSpiceShared.new_instance()
        self._library: Any = self._shared._ngspice_shared

    @property
    def version(self) -> str:
        """As it says, '' where it does not."""
        return str(self._shared.ngspice_version or "")

    def load(self, lines: list[str]) -> tuple[bool, list[str]]:
        """Loads a circuit: whether ngspice took it, and what it said."""
        texts = [ffi.new("char[]", line.encode("utf-8", "replace")) for line in [*lines, ""]]
        self._shared.clear_output()
        status = self._library.ngSpice_Circ(ffi.new("char *[]", [*texts, ffi.NULL]))
        said = self._said()
        return status == 0 and not any("no circuit loaded" in line.lower() for line in said), said

    def command(self, text: str) -> list[str]:
        """Runs a command and returns what ngspice said. Raises NoCommand."""
        if not _COMMAND.fullmatch(text):
            raise NoCommand(f"`{text}` holds characters that ngspice's commands do not take")
        self._shared.clear_output()
        self._library.ngSpice_Command(text.encode("ascii"))
        return self._said()

    def _said(self) -> list[str]:
        """Lines on standard error, and those on standard output that speak of an error or of a transient run."""
        told = [line for line in self._shared._stdout if re.search("error|warning|transient op", line, re.IGNORECASE)]
        return [str(line).strip() for line in (*told, *self._shared._stderr) if str(line).strip()]

    def vectors(self, kind: str) -> dict[str, Complex]:
        """The vectors of the newest plot of a kind ('op', 'ac') by lower-case name, {} where there is none."""
        try:
            plots = [name for name in self._shared.plot_names if name.startswith(kind)]
        except RuntimeError:  # no plot at all: a null pointer where the list should be
            return {}
        if not plots:
            return {}
        return {_node(str(name).lower()): vector._data for name, vector in self._shared.plot(None, plots[0]).items()}

    def value(self, name: str) -> float | None:
        """A quantity of a device by ngspice's name for it (`@q.x1.q2[gm]`), None where there is none."""
        self._shared.clear_output()
        info = self._library.ngGet_Vec_Info(name.encode("utf-8", "replace"))
        if info == ffi.NULL or info.v_length < 1 or info.v_realdata == ffi.NULL:
            return None
        return float(info.v_realdata[0])


def _node(name: str) -> str:
    """A vector's name; ngspice writes `V(12)` for a node whose name is a number."""
    return name[2:-1] if name.startswith("v(") and name.endswith(")") else name
