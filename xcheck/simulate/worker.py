"""The worker: one process that holds ngspice, reads one job and answers in JSON lines.

It is started in an empty folder with HOME there, so that no start-up file is found. It bounds itself before the deck
is looked at: memory and processor time are limited, no file can grow, and once ngspice and its code models are in
memory no file can be opened any more, so that nothing can be read, written or started even by a deck that gets past
the list of harmless cards. Answers go to a descriptor of their own, so that nothing that ngspice prints can disturb
them. Run as `python -m xcheck.simulate.worker`.
"""

import json
import logging
import os
import re
import resource
import sys
import warnings
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from xcheck.simulate.names import circuit_name, of_another_kind
from xcheck.simulate.ngspice import Ngspice, NoCommand
from xcheck.simulate.words import by_transient, not_loaded, out_of_memory, quoted, refused, telling

Send = Callable[..., None]

POLY_PROBE = ("poly", "v1 1 0 1", "e1 2 0 poly(1) 1 0 0 1", "r1 2 0 1", ".end")
MOST_MESSAGES = 50
TRANSIENT_ALONE = (
    "ngspice finds the operating point by a transient run alone, and after that its small-signal values are wrong"
)


class Refused(Exception):
    """A step that ngspice did not carry out, with its own words."""

    def __init__(self, step: str, words: str) -> None:
        super().__init__(words)
        self.step = step


def limit(job: dict[str, Any]) -> None:
    """Bounds memory (bytes) and processor time (s) of this process, and lets no file grow."""
    memory, seconds = int(job["memory_bytes"]), int(job["cpu_seconds"])
    bounds = (
        (resource.RLIMIT_FSIZE, 0, 0),
        (resource.RLIMIT_CORE, 0, 0),
        (resource.RLIMIT_AS, memory, memory),
        (resource.RLIMIT_CPU, seconds, seconds + 5),
    )
    for what, soft, hard in bounds:
        # a limit that is there already may only be lowered
        most = resource.getrlimit(what)[1]
        lowered = [n if most == resource.RLIM_INFINITY else min(n, most) for n in (soft, hard)]
        resource.setrlimit(what, (lowered[0], lowered[1]))


def open_nothing_more() -> None:
    """From here on no file, pipe or program can be opened; what is open stays open."""
    resource.setrlimit(resource.RLIMIT_NOFILE, (0, 0))


def probe(engine: Ngspice, send: Send) -> None:
    """Says which ngspice this is, and whether its code models run."""
    taken, _ = engine.load(list(POLY_PROBE))
    models = taken and not refused(engine.command("op")) and bool(engine.vectors("op"))
    send(event="engine", version=engine.version, code_models=models)


class Measuring:
    """One job: loads of one deck, each with the ports that are measured in it. glance: the `ac` command of one
    point that shows whether all is silent."""

    def __init__(self, engine: Ngspice, sweeps: Sequence[str], glance: str, send: Send) -> None:
        self.engine = engine
        self.sweeps = sweeps
        self.glance = glance
        self.send = send
        self.messages: dict[str, None] = {}
        self.sources: dict[str, str] = {}

    def load(self, lines: list[str], first: bool) -> None:
        """Loads the deck and finds its operating point, which is told once. Raises Refused.

        Where ngspice 39 gets there by a transient run alone, the conductances of junctions with charge still hold that
        run's share, and every small-signal result is wrong (seen with diodes and JFETs). Started at the voltages found,
        it gets there directly."""
        numbers, words = self._operating_point(lines)
        if by_transient(words):
            self.engine.command("remcirc")
            numbers, words = self._operating_point([*lines[:-1], *_starting_at(numbers), lines[-1]])
            if by_transient(words):
                raise Refused("operating point", TRANSIENT_ALONE)
        branches = [name.removesuffix("#branch") for name in numbers if name.endswith("#branch")]
        self.sources = {circuit_name(device): device for device in branches}
        if first:
            self.send(event="operating point", values=numbers)

    def _operating_point(self, lines: list[str]) -> tuple[dict[str, float], list[str]]:
        """The vectors of an operating point, and what ngspice said on the way. Raises Refused."""
        taken, said = self.engine.load(lines)
        self.messages |= dict.fromkeys(telling(said))
        if not taken:
            raise _refusal("load", said, "ngspice did not take the deck")
        words = self.engine.command("op")
        if not_loaded(words):
            raise _refusal("load", said or words, "ngspice did not take the deck")
        self.messages |= dict.fromkeys(telling(words))
        values = self.engine.vectors("op")
        numbers = {name: float(data[0].real) for name, data in values.items() if len(data)}
        if refused(words) or not numbers or not all(map(np.isfinite, numbers.values())):
            raise _refusal("operating point", words, "ngspice found no operating point")
        return numbers, words

    def devices(self, wanted: Sequence[dict[str, Any]]) -> None:
        """Tells the small-signal values of devices at the operating point. names: what ngspice may call the device."""
        # charges become capacitances only where a small-signal analysis has been at work
        words = self.engine.command(self.glance)
        if refused(words):
            raise _refusal("ac", words, "ngspice gave no result")
        found: dict[str, dict[str, float]] = {}
        for device in wanted:
            for name in device["names"]:
                values = {q: self.engine.value(f"@{name}[{q}]") for q in device["quantities"]}
                known = {q: v for q, v in values.items() if v is not None and np.isfinite(v)}
                if known:
                    found[device["device"]] = known
                    break
        self.send(event="devices", values=found)

    def silence(self) -> None:
        """Makes sure that nothing answers at AC while no test signal is alive. Raises Refused."""
        self._forget()
        words = self.engine.command(self.glance)
        values = self.engine.vectors("ac")
        if refused(words) or "frequency" not in values:
            raise _refusal("ac", words, "ngspice gave no result")
        loud = [name for name, data in values.items() if name != "frequency" and np.any(data != 0)]
        if loud:
            raise Refused("ac", f"a signal at AC is alive that is no test signal, seen at {', '.join(loud[:3])}")

    def _forget(self) -> None:
        """Drops earlier results and wishes of what to save."""
        self.engine.command("destroy all")
        self.engine.command("delete all")

    def port(self, port: dict[str, str]) -> None:
        """Measures one port with its test source alone alive, and tells what was found."""
        subject = port["subject"]
        try:
            points = self._points(port)
        except (Refused, NoCommand) as why:
            self.send(event="unmeasured", subject=subject, reason=str(why))
            return
        self.send(event="port", subject=subject, **{key: _pairs(values) for key, values in points.items()})

    def _points(self, port: dict[str, str]) -> "dict[str, np.typing.NDArray[np.complex128]]":
        cut = self.sources.get(port["source"])
        if cut is None:
            raise Refused("ac", "ngspice does not know the cut")
        test = of_another_kind(cut, port["test"])
        names = {"frequency": "frequency", "voltage": port["node"], "current": f"{cut}#branch"}
        self._forget()
        self.engine.command(f"save {names['voltage']} {names['current']}")
        said = self.engine.command(f"alter {test} acmag = 1")
        if refused(said):
            raise _refusal("ac", said, "the test signal could not be set")
        found: dict[str, list[Any]] = {key: [] for key in names}
        try:
            for sweep in self.sweeps:
                words = self.engine.command(sweep)
                values = self.engine.vectors("ac")
                if refused(words) or not all(len(values.get(name, ())) for name in names.values()):
                    raise _refusal("ac", words, "ngspice gave no result")
                for key, name in names.items():
                    found[key].append(values[name])
                self.engine.command("destroy all")
        finally:
            self.engine.command(f"alter {test} acmag = 0")
        return {key: np.concatenate(parts).astype(np.complex128) for key, parts in found.items()}


def _starting_at(numbers: dict[str, float]) -> list[str]:
    """Cards that start the search at some voltages; names that the card does not take are left out."""
    plain = {name: volt for name, volt in numbers.items() if re.fullmatch(r"[a-z0-9_.]+", name)}
    return [f".nodeset v({name})={volt!r}" for name, volt in plain.items()]


def _refusal(step: str, said: Sequence[str], otherwise: str) -> Refused:
    return Refused("memory limit" if out_of_memory(said) else step, quoted(said, otherwise))


def _pairs(values: "np.typing.NDArray[np.complex128]") -> list[list[float]]:
    return np.stack([values.real, values.imag], axis=1).tolist()  # type: ignore[no-any-return]


def run(job: dict[str, Any], send: Send) -> None:
    """Carries out one job: a probe, or a deck with its ports."""
    limit(job)
    engine = Ngspice()
    open_nothing_more()
    if job["task"] == "probe":
        probe(engine, send)
        return
    measuring = Measuring(engine, job.get("sweeps", ()), job["glance"], send)
    try:
        for number, load in enumerate(job["loads"]):
            if number:
                engine.command("remcirc")
            measuring.load(load["lines"], first=not number)
            if load.get("devices"):
                measuring.devices(load["devices"])
            if load["ports"]:
                measuring.silence()
            for port in load["ports"]:
                measuring.port(port)
    except Refused as why:
        send(event="failed", step=why.step, words=str(why))
    send(event="done", messages=list(measuring.messages)[:MOST_MESSAGES])


def main() -> None:
    """Reads one job from standard input, answers on a private copy of standard output."""
    answers = os.fdopen(os.dup(1), "w", encoding="utf-8")
    silence = os.open(os.devnull, os.O_WRONLY)
    os.dup2(silence, 1)
    os.dup2(silence, 2)
    logging.disable(logging.CRITICAL)
    warnings.simplefilter("ignore")

    def send(**event: Any) -> None:
        answers.write(json.dumps(event) + "\n")
        answers.flush()

    try:
        run(json.load(sys.stdin), send)
    except MemoryError:
        send(event="failed", step="memory limit", words="ngspice needs more memory than it may have")
        send(event="done", messages=[])
    except Exception as error:  # noqa: BLE001  # the one door out: whatever went wrong is told, never lost
        send(event="failed", step="crash", words=f"{type(error).__name__}: {error}")
        send(event="done", messages=[])
    # ngspice's own exit handlers are of no use to a process that has answered
    os._exit(0)


if __name__ == "__main__":
    main()
