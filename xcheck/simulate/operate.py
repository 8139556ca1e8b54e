"""The operating point of a deck as it stands, with the small-signal values that ngspice reports of its devices."""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from xcheck.circuit.elements import Circuit, Device
from xcheck.circuit.point import OperatingPoint
from xcheck.deck.cards import Deck
from xcheck.simulate.cuts import CutWriter, NoCut, Terminals
from xcheck.simulate.engine import find_engine
from xcheck.simulate.measure import MEMORY_LIMIT, TIME_LIMIT, undefined_in, why_not
from xcheck.simulate.names import circuit_name, engine_names
from xcheck.simulate.process import WORKER, WorkerEnded, answers_of
from xcheck.simulate.sanitize import harmless
from xcheck.simulate.types import EngineInfo
from xcheck.simulate.written import blocks_of, deck_lines, unused_mark

QUANTITIES: Mapping[str, tuple[str, ...]] = {
    "d": ("gd", "cd"),
    "q": ("gm", "gpi", "gmu", "gx", "go", "cpi", "cmu", "cbx", "csub", "gdsub"),
    "j": ("gm", "gds", "ggs", "ggd", "cqgs", "cqgd", "vgs", "vgd"),
    "m": ("gm", "gds", "gmbs", "cgs", "cgd", "cgb", "cbd", "cbs", "gbd", "gbs", "vds", "rd", "rs"),
    "s": ("i",),
    "w": ("i",),
}
"""What is asked of each kind of device; the ngspice manual's chapter on device parameters lists them."""
SPOT = "ac lin 1 1 1"


@dataclass(frozen=True)
class Operated:
    """point None: ngspice found none; failure says why in its own words, failed_step where ('load', ...)."""

    point: OperatingPoint | None
    failure: str = ""
    failed_step: str = ""


def operate(
    deck: Deck,
    circuit: Circuit,
    *,
    time_limit: float = TIME_LIMIT,
    memory_limit: int = MEMORY_LIMIT,
    engine: EngineInfo | None = None,
    command: Sequence[str] = WORKER,
) -> Operated:
    """Asks ngspice for the operating point and for the small-signal values of all semiconductors and switches.

    What fails is in the result; nothing is raised.
    """
    engine = find_engine() if engine is None else engine
    sane = harmless(deck.cards)
    fault = engine.reason if not engine.available else why_not(sane, circuit)
    if circuit.boundary:
        fault = "a subcircuit by itself has no operating point"
    fault = fault or undefined_in(circuit)
    if fault:
        return Operated(None, fault, "load")
    writer = CutWriter(Terminals(circuit), unused_mark(sane.cards))
    try:
        lines = deck_lines(blocks_of(sane.cards), None, writer, circuit, None)
    except NoCut as why:
        return Operated(None, str(why), "load")
    wanted = [
        {"device": e.name, "names": engine_names(e.name, e.kind), "quantities": QUANTITIES[e.kind]}
        for e in circuit.elements
        if isinstance(e, Device) and e.kind in QUANTITIES
    ]
    job = {
        "task": "measure", "loads": [{"lines": lines, "ports": [], "devices": wanted}], "glance": SPOT,
        "memory_bytes": memory_limit, "cpu_seconds": math.ceil(time_limit) + 1,
    }  # fmt: skip
    values: dict[str, float] = {}
    devices: dict[str, dict[str, float]] = {}
    failure, step = "", ""
    try:
        for answer in answers_of(job, engine.library, time_limit, command):
            match answer["event"]:
                case "operating point":
                    values = answer["values"]
                case "devices":
                    devices = answer["values"]
                case "failed":
                    failure, step = str(answer["words"]), str(answer["step"])
    except WorkerEnded as ended:
        failure, step = str(ended), ended.step
    if failure or not values:
        return Operated(None, failure or "ngspice gave no result", step)
    return Operated(_point(values, devices))


def _point(values: Mapping[str, Any], devices: Mapping[str, Mapping[str, float]]) -> OperatingPoint:
    volts: dict[str, float] = {}
    amperes: dict[str, float] = {}
    for name, value in values.items():
        base, hash_, rest = name.partition("#")
        if not hash_:
            volts[base] = value
        elif rest == "branch":
            amperes[circuit_name(base)] = value
    return OperatingPoint(volts, amperes, devices)
