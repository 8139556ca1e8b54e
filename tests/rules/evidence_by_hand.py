"""Evidence put together by hand: a real deck, one amplifier, and results of the test's own making."""

from collections.abc import Mapping
from typing import Any

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.impedance.types import ClosedForm, PortAnswer, ReturnRatio, Verdict
from xcheck.options import Options
from xcheck.place import Place
from xcheck.reviewed import Evidence
from xcheck.simulate.types import EngineInfo, Simulation
from xcheck.stages.types import Amplifier, OpenLoop, Partition, Port, Quantity, Stage, Terminal

DECK = """Wave staff
vp vp 0 5
vn vn 0 -5
vin in 0 dc 0 ac 1
r1 in n 10k
r2 n out 100k
xu1 0 n vp vn out amp
rl out 0 10k
.subckt amp p n vp vn o
rid p n 1meg
e1 a 0 p n 100k
ro a o 50
rq vp vn 10k
.ends amp
.ac dec 10 1 1meg
.end
"""
AT_AMPLIFIER = (7, 1)
AT_INPUT = (5, 4)
AT_OUTPUT = (7, 16)
HZ: Real = np.logspace(0, 6, 61)
ENGINE = EngineInfo(available=True, version="39")


def ohms(value: complex) -> Complex:
    return np.full(len(HZ), value, dtype=np.complex128)


def amplifier(values: Mapping[str, Quantity] | None = None) -> Amplifier:
    return Amplifier(
        name="xu1",
        subckt="amp",
        non_inverting="0",
        inverting="n",
        output="out",
        positive_supply="vp",
        negative_supply="vn",
        evidence=("by hand",),
        elements=("xu1.rid", "xu1.e1", "xu1.ro", "xu1.rq"),
        gain_element="xu1.e1",
        open_loop=OpenLoop(values or {}, None, reason="none is needed"),
        place=Place("deck.cir", *AT_AMPLIFIER, 4),
    )


def port(name: str) -> Port:
    line, column = AT_INPUT if name == "in" else AT_OUTPUT
    inside = (Terminal("r1", 0),) if name == "in" else (Terminal("r2", 1), Terminal("xu1.ro", 1))
    return Port(
        stage="xu1",
        name=name,
        node=name,
        side="input" if name == "in" else "output",
        kind="signal",
        inside=inside,
        current_driven=False,
        place=Place("deck.cir", line, column, column + 1),
    )


def answer(
    name: str = "in",
    *,
    closed: Complex | None = None,
    ratio: Complex | None = None,
    simulated: Complex | None = None,
    rule: Complex | None = None,
    exact: bool = True,
    verdict: Verdict = "unchecked",
) -> PortAnswer:
    form = None
    if closed is not None:
        form = ClosedForm("Z1 + ...", "10k + ...", closed, closed if rule is None else rule, "R1", exact)
    road = None if ratio is None else ReturnRatio("xu1.e1", ratio, ohms(0), ohms(0), ratio)
    gap = None
    if simulated is not None and ratio is not None:
        with np.errstate(all="ignore"):
            gap = np.abs(simulated - ratio) / np.abs(ratio)
    return PortAnswer(port(name), "inverting", HZ, form, road, simulated, gap, {}, verdict)


def evidence(
    *answers: PortAnswer,
    simulation: Simulation | None = None,
    amplifiers: tuple[Amplifier, ...] | None = None,
    text: str = DECK,
    **changes: Any,
) -> Evidence:
    deck = read_text(text)
    circuit = elaborate(deck)
    found = (amplifier(),) if amplifiers is None else amplifiers
    ports = (port("in"), port("out"))
    stages = (Stage("xu1", found, ("r1", "r2"), ports),) if found else ()
    still = {"in": "vin", "vp": "vp", "vn": "vn"}
    partition = Partition(circuit, found, stages, {**still, "out": "output of xu1"}, still, {"out": "xu1"})
    known: dict[str, Any] = {
        "deck": deck,
        "circuit": circuit,
        "partition": partition,
        "recognised": {},
        "answers": answers,
        "simulation": simulation,
        "frequency": HZ,
        "band": (10.0, 10e3),
        "band_declared": True,
        "options": Options(),
    }
    return Evidence(**{**known, **changes})


def volts(output: float, high: float = 5.0, low: float = -5.0) -> Simulation:
    """An operating point with some output and supplies."""
    return Simulation(ENGINE, operating_point={"out": output, "vp": high, "vn": low, "n": 0.0, "in": 0.0})
