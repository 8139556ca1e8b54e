"""The worker: one process that holds ngspice through PySpice, reads jobs and answers in JSON lines.

It is started in an empty folder with HOME there, puts limits on itself before ngspice is loaded (no file can be
written, memory and time are bounded), and keeps its answers on a descriptor of their own, so that nothing that
ngspice prints can disturb them. Run as `python -m xcheck.simulate.worker`.
"""

import json
import logging
import os
import resource
import sys
import warnings
from collections.abc import Callable
from typing import Any

Send = Callable[..., None]

POLY_PROBE = ["poly", "v1 1 0 1", "e1 2 0 poly(1) 1 0 0 1", "r1 2 0 1", ".end"]


class Refused(Exception):
    """A step that ngspice did not carry out, with its own words."""

    def __init__(self, step: str, words: str) -> None:
        super().__init__(words)
        self.step = step


class Engine:
    """ngspice's shared library, judged by what it says and by whether results are there: PySpice takes every
    line on standard error that does not begin with `Warning:` for a failure, and newer versions print harmless
    ones."""

    def __init__(self) -> None:
        from PySpice.Spice.NgSpice.Shared import NgSpiceShared

        self.spice = NgSpiceShared.new_instance()
        self.messages: list[str] = []

    def command(self, text: str) -> list[str]:
        """Runs a command; its lines on standard error, and on standard output where they speak of an error."""
        from PySpice.Spice.NgSpice.Shared import NgSpiceCommandError

        try:
            self.spice.exec_command(text)
        except NgSpiceCommandError:
            pass  # judged below by what was said, and by the caller by what is there
        except NameError as error:
            raise Refused("command", str(error)) from error
        return self._words()

    def load(self, lines: list[str]) -> None:
        """Loads a circuit. Raises Refused."""
        from PySpice.Spice.NgSpice.Shared import NgSpiceCircuitError

        try:
            self.spice.load_circuit("\n".join(lines))
        except NgSpiceCircuitError as error:
            raise Refused("load", " / ".join(self._words()) or "the circuit was refused") from error
        except NameError as error:
            raise Refused("load", " / ".join(self._words()) or str(error)) from error
        words = self._words()
        self.messages += words
        if any("no circuit loaded" in w.lower() for w in [*words, *self.command("listing")]):
            raise Refused("load", " / ".join(words) or "no circuit was loaded")

    def _words(self) -> list[str]:
        lines = [
            *self.spice._stderr,
            *(w for w in self.spice._stdout if "error" in w.lower() or "warning" in w.lower()),
        ]
        return [str(line).strip() for line in lines if str(line).strip()]

    def vectors(self, kind: str) -> dict[str, Any]:
        """The vectors of the newest plot of a kind ('op', 'ac'), {} where there is none."""
        try:
            names = [n for n in self.spice.plot_names if n.startswith(kind)]
        except RuntimeError:  # no plot at all: a null pointer where the list should be
            return {}
        if not names:
            return {}
        plot = self.spice.plot(None, names[0])
        return {str(name).lower(): vector._data for name, vector in plot.items()}


def limit(job: dict[str, Any]) -> None:
    """Bounds what this process can do: write no file, use so much memory and processor time."""
    resource.setrlimit(resource.RLIMIT_FSIZE, (0, 0))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    memory, seconds = int(job["memory_bytes"]), int(job["cpu_seconds"])
    for what, soft, hard in ((resource.RLIMIT_AS, memory, memory), (resource.RLIMIT_CPU, seconds, seconds + 5)):
        # a limit that is there already may only be lowered
        most = resource.getrlimit(what)[1]
        bounds = [n if most == resource.RLIM_INFINITY else min(n, most) for n in (soft, hard)]
        resource.setrlimit(what, (bounds[0], bounds[1]))


def probe(engine: Engine, send: Send) -> None:
    """Says which ngspice this is, and whether its code models run."""
    try:
        engine.load(POLY_PROBE)
        engine.command("op")
        models = bool(engine.vectors("op"))
    except Refused:
        models = False
    send(event="engine", version=str(engine.spice.ngspice_version or ""), code_models=models)


def operating_point(engine: Engine, send: Send) -> None:
    """One operating point; trusted only where nothing says that the search was aborted."""
    words = engine.command("op")
    engine.messages += words
    values = engine.vectors("op")
    failed = [w for w in words if "aborted" in w.lower() or "failed" in w.lower()]
    if not values or any("aborted" in w.lower() for w in words):
        raise Refused("operating point", " / ".join(failed or words) or "no operating point was found")
    real = {name: float(data[0].real) for name, data in values.items() if len(data)}
    send(
        event="operating point",
        voltages={n: v for n, v in real.items() if not n.endswith("#branch") and not n.startswith("@")},
        currents={n.removesuffix("#branch"): v for n, v in real.items() if n.endswith("#branch")},
    )


def measure_port(engine: Engine, port: dict[str, Any], sweeps: list[list[Any]], send: Send) -> None:
    """One `ac` run a sweep, with this port's test source alone alive."""
    engine.command("delete all")
    engine.command("destroy all")
    engine.command(f"save {port['voltage']} {port['current']}")
    source = port["source"]
    engine.command(f"alter {source} acmag = 1")
    voltage: list[complex] = []
    current: list[complex] = []
    words: list[str] = []
    for kind, points, low, high in sweeps:
        words = engine.command(f"ac {kind} {points} {low!r} {high!r}")
        values = engine.vectors("ac")
        if port["voltage"] not in values or port["current"] not in values:
            send(event="unmeasured", subject=port["subject"], reason=" / ".join(words) or "ngspice gave no result")
            break
        voltage += list(values[port["voltage"]])
        current += list(values[port["current"]])
        engine.command("destroy all")
    else:
        send(
            event="port", subject=port["subject"],
            voltage=[[v.real, v.imag] for v in map(complex, voltage)],
            current=[[c.real, c.imag] for c in map(complex, current)],
        )  # fmt: skip
    engine.command(f"alter {source} acmag = 0")


def run(job: dict[str, Any], send: Send) -> None:
    """Carries out one job: a probe, or a deck with its ports."""
    limit(job)
    engine = Engine()
    if job["task"] == "probe":
        probe(engine, send)
        return
    try:
        engine.load(job["deck"])
        send(event="loaded")
        operating_point(engine, send)
        for port in job["ports"]:
            measure_port(engine, port, job["sweeps"], send)
    except Refused as refused:
        send(event="failed", step=refused.step, words=str(refused))
    send(event="done", messages=list(dict.fromkeys(engine.messages))[:50])


def main() -> None:
    """Reads one job from standard input, answers on a private copy of standard output."""
    answers = os.fdopen(os.dup(1), "w", encoding="utf-8")
    silence = os.open(os.devnull, os.O_WRONLY)
    os.dup2(silence, 1)
    os.dup2(silence, 2)
    logging.disable(logging.CRITICAL)
    warnings.simplefilter("ignore")

    def send(**event: Any) -> None:
        answers.write(json.dumps(event, allow_nan=True) + "\n")
        answers.flush()

    try:
        run(json.load(sys.stdin), send)
    except MemoryError:
        send(event="failed", step="memory limit", words="the memory limit was reached")
    except Exception as error:  # noqa: BLE001  # the one door out: whatever went wrong is told, never lost
        send(event="failed", step="crash", words=f"{type(error).__name__}: {error}")
    answers.close()
    # ngspice's own exit handlers are of no use to a process that has answered
    os._exit(0)


if __name__ == "__main__":
    main()
