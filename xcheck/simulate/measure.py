"""Measuring every port of a deck with ngspice."""

import math
import re
from collections.abc import Callable, Iterator, Mapping
from typing import Any

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Circuit, Source
from xcheck.deck.cards import Card, Deck
from xcheck.simulate.cuts import Cut, CutWriter, NoCut
from xcheck.simulate.engine import find_engine
from xcheck.simulate.process import WorkerEnded, answers_of
from xcheck.simulate.sanitize import ac_part, harmless, options_text
from xcheck.simulate.types import Simulation
from xcheck.stages.types import Partition, Port

TIME_LIMIT = 120.0
MEMORY_LIMIT = 4_000_000_000
TITLE = "deck under review"


def measure(
    deck: Deck,
    circuit: Circuit,
    partition: Partition,
    frequency: Real,
    *,
    time_limit: float = TIME_LIMIT,
    memory_limit: int = MEMORY_LIMIT,
    progress: Callable[[int, int], None] | None = None,
) -> Simulation:
    """The impedance of each port (ohm, shape (F,) on `frequency` in Hz), in the deck as it stands.

    input: 1 V in series in the cut, Z = V(stage side) / I(into the stage); outputs and current-driven inputs: 1 A
    into the stage's side, Z = V / (1 A - I(cut, into the outside)). What fails is in the result.
    """
    engine = find_engine()
    if not engine.available:
        return Simulation(engine, failure=engine.reason, failed_step="load")
    writer = CutWriter(circuit)
    unmeasured: dict[str, str] = {}
    cuts: dict[str, tuple[Port, Cut]] = {}
    for stage in partition.stages:
        for port in stage.ports:
            try:
                cuts[port.subject] = (port, writer.cut(port))
            except NoCut as why:
                unmeasured[port.subject] = f"no cut could be written into the deck: {why}"
    lines, left_out = deck_lines(deck, circuit, partition, writer)
    sweeps, order = sweeps_of(frequency)
    job = {
        "task": "measure", "deck": lines, "sweeps": sweeps, "memory_bytes": memory_limit,
        "cpu_seconds": math.ceil(time_limit), "ports": [_port_job(port, cut) for port, cut in cuts.values()],
    }  # fmt: skip
    found = _Found(len(cuts), progress)
    try:
        for answer in answers_of(job, engine.library, time_limit):
            found.take(answer)
    except WorkerEnded as ended:
        found.failure, found.failed_step = str(ended), ended.step
    values: dict[str, Complex] = {}
    for subject, (voltage, current) in found.raw.items():
        if len(voltage) != len(frequency) or len(current) != len(frequency):
            unmeasured[subject] = f"ngspice gave {len(voltage)} of {len(frequency)} points"
            continue
        value = impedance(cuts[subject][0], voltage[order], current[order])
        if np.all(np.isfinite(value)):
            values[subject] = value
        else:
            unmeasured[subject] = "no current flows into the port: its impedance is beyond measure"
    for subject in cuts:
        if subject not in values and subject not in unmeasured:
            unmeasured[subject] = found.refused.get(subject, found.failure or "ngspice gave no result")
    return Simulation(
        engine, values, unmeasured, found.operating_point, found.currents, found.failure, found.failed_step,
        tuple(found.messages), left_out,
    )  # fmt: skip


def impedance(port: Port, voltage: Complex, current: Complex) -> Complex:
    """A port's impedance from the voltage on the stage's side and the cut's current into the stage."""
    with np.errstate(divide="ignore", invalid="ignore"):
        if port.side == "input" and not port.current_driven:
            return voltage / current
        # the cut's current counts from the outside into the stage; 1 A - I(outside) is 1 A + that
        return voltage / (1.0 + current)


class _Found:
    """Collects the worker's answers."""

    def __init__(self, ports: int, progress: Callable[[int, int], None] | None) -> None:
        self.ports = ports
        self.progress = progress
        self.raw: dict[str, tuple[Complex, Complex]] = {}
        self.refused: dict[str, str] = {}
        self.operating_point: dict[str, float] = {}
        self.currents: dict[str, float] = {}
        self.messages: list[str] = []
        self.failure = ""
        self.failed_step = ""

    def take(self, answer: Mapping[str, Any]) -> None:
        """One answer."""
        match answer["event"]:
            case "operating point":
                self.operating_point = {n: v for n, v in answer["voltages"].items() if not _is_ours(n)}
                self.currents = {_our_name(n): v for n, v in answer["currents"].items() if not _is_ours(n)}
            case "port":
                pair = [np.array(answer[k], dtype=np.float64).reshape(-1, 2) for k in ("voltage", "current")]
                voltage, current = (a[:, 0] + 1j * a[:, 1] for a in pair)
                self.raw[answer["subject"]] = (voltage, current)
            case "unmeasured":
                self.refused[answer["subject"]] = answer["reason"]
            case "failed":
                self.failure, self.failed_step = answer["words"], answer["step"]
            case "done":
                self.messages = answer["messages"]
        if self.progress is not None and answer["event"] in ("port", "unmeasured"):
            self.progress(len(self.raw) + len(self.refused), self.ports)


def _is_ours(name: str) -> bool:
    return re.search(r"(^|\.)[vi]?xc_\d+$", name) is not None


def _our_name(name: str) -> str:
    """ngspice's `v.x1.v3` is `x1.v3` here."""
    letter, dot, rest = name.partition(".")
    return rest if dot and len(letter) == 1 else name


def _port_job(port: Port, cut: Cut) -> dict[str, str]:
    series = port.side == "input" and not port.current_driven
    return {
        "subject": port.subject,
        "source": cut.flat("v" if series else "i"),
        "voltage": cut.stage_node(port),
        "current": f"{cut.flat('v')}#branch",
    }


def sweeps_of(frequency: Real) -> tuple[list[list[Any]], Any]:
    """ngspice sweeps that give the frequencies, and the order in which to read their points: one logarithmic run
    for all that lies on ten points a decade from the first, single points for the rest."""
    first = float(frequency[0])
    place = 10.0 * np.log10(frequency / first)
    on = np.abs(place - np.round(place)) < 1e-7
    steps = np.round(place[on]).astype(int)
    regular = len(steps) > 1 and bool(np.all(np.diff(steps) == 1))
    if not regular:
        on[:] = False
    sweeps: list[list[Any]] = []
    if regular:
        # ngspice divides the range evenly, so its end decides where every point lies
        sweeps.append(["dec", 10, first, first * 10.0 ** (float(steps[-1]) / 10.0)])
    sweeps += [["lin", 1, float(f), float(f)] for f in frequency[~on]]
    positions = np.concatenate([np.nonzero(on)[0], np.nonzero(~on)[0]])
    return sweeps, np.argsort(positions)


def deck_lines(
    deck: Deck, circuit: Circuit, partition: Partition, writer: CutWriter
) -> tuple[list[str], tuple[str, ...]]:
    """The deck as ngspice gets it: the user's harmless cards with the cuts written in, AC parts silenced."""
    sorted_cards = harmless(deck.cards)
    block = _block_of(sorted_cards.cards, circuit) if circuit.boundary else None
    lines = [TITLE]
    inner: set[int] = set(map(id, block)) if block else set()
    for card in sorted_cards.cards:
        if id(card) not in inner and (
            block is None or card.kind in (".param", ".func", ".model", ".global", ".options")
        ):
            lines += _lines_of(card, writer)
    if block is not None:
        lines = [TITLE, *_definitions(sorted_cards.cards, block, writer), *_body(block, writer)]
    lines += writer.added.get(id(None), [])
    lines += _ties(circuit, partition)
    lines.append(".end")
    return lines, sorted_cards.left_out


def _lines_of(card: Card, writer: CutWriter) -> Iterator[str]:
    if card.kind in (".options", ".option", ".opt"):
        text = options_text(card)
    else:
        silent = ac_part(card)
        if silent is not None:
            writer.edits.setdefault(id(card), []).append((*silent, ""))
        text = writer.text_of(card)
    if text:
        yield text
    if card.kind in (".subckt", ".macro"):
        yield from writer.added.get(id(card), [])


def _block_of(cards: tuple[Card, ...], circuit: Circuit) -> list[Card]:
    """The cards of the subcircuit whose pins are the circuit's boundary, its `.subckt` and `.ends` included."""
    depth = 0
    block: list[Card] = []
    for card in cards:
        opens = card.kind in (".subckt", ".macro")
        if opens and not block and tuple(f.key for f in card.fields[2 : 2 + len(circuit.boundary)]) == circuit.boundary:
            depth = 1
            block.append(card)
        elif block and depth:
            block.append(card)
            depth += opens - (card.kind in (".ends", ".eom"))
    return block


def _definitions(cards: tuple[Card, ...], block: list[Card], writer: CutWriter) -> list[str]:
    """All top-level definitions and settings but the block itself."""
    own = set(map(id, block))
    lines: list[str] = []
    depth = 0
    for card in cards:
        if id(card) in own:
            continue
        depth += card.kind in (".subckt", ".macro")
        if depth or card.kind.startswith("."):
            lines += _lines_of(card, writer)
        depth -= card.kind in (".ends", ".eom")
    return lines


def _body(block: list[Card], writer: CutWriter) -> list[str]:
    """The block's cards at top level, its default parameters as parameters."""
    lines: list[str] = []
    fields = block[0].fields if block else ()
    for index, field in enumerate(fields):
        if field.text == "=" and 0 < index < len(fields) - 1:
            lines.append(f".param {fields[index - 1].text}={fields[index + 1].text}")
    for card in block[1:-1]:
        lines += _lines_of(card, writer)
    return lines


def _ties(circuit: Circuit, partition: Partition) -> list[str]:
    """Zero-volt sources from supply pins that the deck leaves open to ground: rails do not move at AC, and an open
    one would leave ngspice without an operating point."""
    fed = {n for e in circuit.elements if not e.origin.path for n in e.nodes}
    held = {n for e in circuit.elements if isinstance(e, Source) for n in e.nodes}
    own = {name for a in partition.amplifiers for name in a.elements}
    outer = {n for e in circuit.elements if e.name not in own for n in e.nodes} | fed | held
    open_rails = [n for n, why in partition.stiff.items() if why == "rail" and n not in outer and "." not in n]
    return [f"vxc_{k + 1000000} {node} 0 dc 0" for k, node in enumerate(open_rails)]
