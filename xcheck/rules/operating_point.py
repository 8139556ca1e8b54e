"""What ngspice says of the operating point, and of the run as a whole."""

import re
from collections.abc import Iterator

from xcheck.finding import Finding, Level
from xcheck.notation import engineering
from xcheck.place import Place
from xcheck.reviewed import Evidence
from xcheck.simulate.types import MISSING_MODEL, Simulation
from xcheck.stages.types import Amplifier

MARGIN_VOLT = 0.05
MARGIN_OF_SPAN = 0.01
"""An output nearer to a supply than the lesser of the two is at it: rail-to-rail outputs of ordinary parts
come within tens of millivolts under light load (common practice), and no output works there."""

NEAR_OF_SPAN = 0.25
COLLAPSED = 100.0
"""A nonlinear model whose gain at the operating point is less, in the outer quarter of its span, is at its limit: the
outputs of ordinary bipolar parts end one to three volts before the supplies (common practice)."""

OPERATING_POINT = "operating point"

SINGULAR = re.compile(r"singular matrix.*", re.IGNORECASE)
MOST_WORDS = 300
"""Characters of what ngspice says; its own log has the rest."""

NAME = re.compile(r"[a-z0-9_.#+\-]+")


def operating_point_fails(evidence: Evidence) -> Iterator[Finding]:
    """ngspice found no operating point, so there is nothing to take small-signal values at."""
    simulation = evidence.simulation
    if simulation is None or simulation.failed_step != OPERATING_POINT:
        return
    place, named = _named_in(evidence, (simulation.failure, *simulation.messages))
    yield Finding(
        "operating-point-fails",
        "error",
        place,
        f"ngspice finds no operating point; it says: {_in_its_words(simulation)}",
        subject=named,
        advice="look for nodes without a DC path, loops of voltage sources, and positive feedback",
    )


def simulation_fails(evidence: Evidence) -> Iterator[Finding]:
    """ngspice is there and the run came to nothing, not for want of an operating point, nor of a model that the deck
    does not define: those are said already."""
    simulation = evidence.simulation
    if (
        simulation is None
        or not simulation.engine.available
        or simulation.failed_step in ("", OPERATING_POINT, MISSING_MODEL)
    ):
        return
    place, named = _named_in(evidence, (simulation.failure,))
    measured, ports = len(simulation.values), len(evidence.answers)
    # what was measured before, say, the time limit stands: that is no fault of the deck
    level: Level = "note" if measured else "warning"
    done = f"{measured} of {ports} impedances were simulated" if measured else "no impedance was simulated"
    yield Finding(
        "simulation-fails",
        level,
        place,
        f"{done}: ngspice failed ({simulation.failed_step}) and says: {_in_its_words(simulation)}",
        subject=named,
        advice="the other analytic values stand unchecked"
        if measured
        else "the analytic values stand unchecked until ngspice can run this deck",
    )


def _in_its_words(simulation: Simulation) -> str:
    """What ngspice says of a failure: the matrix that it called singular, and its last words; its steps in between
    left out."""
    said = [part.strip() for text in (*simulation.messages, simulation.failure) for part in text.split(" / ")]
    singular = [SINGULAR.search(part) for part in said]
    first = next((match.group() for match in singular if match), "")
    last = [part for part in simulation.failure.split(" / ") if part.strip() and "aborted" not in part]
    words = "; ".join(dict.fromkeys(w for w in (first, *(p.strip() for p in last[-1:])) if w))
    words = words or "nothing on why"
    return words if len(words) <= MOST_WORDS else words[: MOST_WORDS - 3] + "..."


def not_simulated(evidence: Evidence) -> Iterator[Finding]:
    """ngspice was wanted and is not there."""
    ports = sum(len(stage.ports) for stage in evidence.partition.stages)
    absent = evidence.simulation is None or not evidence.simulation.engine.available
    if not (ports and absent) or evidence.options.engine == "none":
        return
    why = "" if evidence.simulation is None else evidence.simulation.engine.reason
    yield Finding(
        "not-simulated",
        "note",
        _first_line(evidence),
        "no impedance was simulated: ngspice is not available" + (f" ({why})" if why else ""),
        advice="install ngspice, and run the review again; `xcheck engine` says what was looked for",
    )


def output_at_rail(evidence: Evidence) -> Iterator[Finding]:
    """An output at, near or (a linear model cannot clip) beyond one of its supplies. A comparator belongs there."""
    for amplifier in evidence.partition.amplifiers:
        seen = rail_of(evidence, amplifier)
        if seen and amplifier.kind != "comparator":
            yield Finding(
                "output-at-rail",
                "error",
                amplifier.place,
                f"the output of {amplifier.name}, node `{amplifier.output}`, is at {seen} (operating point): "
                "a real amplifier saturates there, and small-signal values taken there mean nothing",
                subject=amplifier.name,
                cause="output-at-rail",
                advice="look at the DC level of the source, the bias of the inputs and the gain at DC",
            )


def rail_of(evidence: Evidence, amplifier: Amplifier) -> str:
    """How an amplifier's output stands to the supply that it has reached, in words; '' where it is free."""
    simulation = evidence.simulation
    positive, negative = amplifier.positive_supply, amplifier.negative_supply
    if simulation is None or simulation.failed_step == OPERATING_POINT or not positive or not negative:
        return ""
    volts = {"0": 0.0, **simulation.operating_point}
    if not {positive, negative, amplifier.output} <= volts.keys():
        return ""
    output, high, low = volts[amplifier.output], volts[positive], volts[negative]
    if not high > low:
        return ""
    margin = min(MARGIN_VOLT, MARGIN_OF_SPAN * (high - low))
    for supply, level, beyond in ((positive, high, output - high), (negative, low, low - output)):
        if beyond > -margin:
            how = "beyond" if beyond > margin else "at"
            return f"{engineering(output, 'V')}, {how} its supply `{supply}` of {engineering(level, 'V')}"
        fallen = _collapsed_gain(amplifier)
        if fallen is not None and beyond > -NEAR_OF_SPAN * (high - low):
            where = f"{engineering(output, 'V')}, near its supply `{supply}` of {engineering(level, 'V')}"
            return f"{where}, where its gain has fallen to {engineering(fallen, '')}"
    return ""


def _collapsed_gain(amplifier: Amplifier) -> float | None:
    """The measured gain of a nonlinear model where it is next to none, None where it is sound or not measured."""
    gain = amplifier.open_loop.values.get("gain")
    if gain is None or gain.origin != "measured" or not isinstance(gain.value, float):
        return None
    return gain.value if gain.value < COLLAPSED else None


def _named_in(evidence: Evidence, texts: tuple[str, ...]) -> tuple[Place, str]:
    """The first element or node that some text of ngspice's names, with a place in the user's text; else the
    deck's first line and ''."""
    circuit = evidence.circuit
    by_node: dict[str, str] = {}
    for element in circuit.elements:
        for node in element.nodes:
            by_node.setdefault(node, element.name)
    for text in texts:
        for word in NAME.findall(text.lower()):
            name = word.strip(".-+").removesuffix("#branch")
            # ngspice writes r.x1.r3 for the element that is x1.r3 here
            for candidate in (name, name.partition(".")[2]):
                if candidate in circuit.by_name and len(candidate) > 1:
                    return circuit.by_name[candidate].origin.card.place(), candidate
            if name in by_node and name != "0" and f"node {name}" in text.lower():
                return circuit.by_name[by_node[name]].origin.card.place(), name
    return _first_line(evidence), ""


def _first_line(evidence: Evidence) -> Place:
    return Place(evidence.deck.path, 1, 1, 1 + len(evidence.deck.title))
