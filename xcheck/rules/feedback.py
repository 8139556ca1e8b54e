"""Feedback: whether there is any, and whether it is negative where it must be.

`feedback-positive` is judged at true DC: capacitors open, inductors short. The return ratio T of an
amplifier's gain element, all else alive, is positive for negative feedback; 1 + T below zero means a real
pole in the right half-plane (Blackman's return difference is a ratio of determinants, and its sign at DC
against its sign at infinite frequency counts real poles), so the output runs to a rail and stays there. In
a stage of several amplifiers one return difference may be negative because the loop is unstable without
that amplifier; there the amplifiers are brought to life one after the other and the product of their return
differences decides. Positive feedback that is smaller than 1 at DC (a bootstrap, a current source with
resistors that match) is no fault, and one that a capacitor carries has no say.

How hysteresis that is meant is told from inputs that were swapped: the networks look alike, so what the
deck does with the stage decides. It counts as meant where the user says so (a name or comment of the
amplifier, its model or its output speaks of a comparator, trigger, hysteresis or latch), or where the deck
only asks for large-signal results (`.tran` or `.dc`, and no `.ac`). It never counts as meant where the
output is wired straight to the non-inverting input: a feedback of 100 % is a latch that no signal can turn.
Meant or not, it is said: as a note, or as an error. An oscillator's negative path wins at DC (a Wien
bridge's positive path has a capacitor, a relaxation oscillator's divider takes less than all), so it does
not come here.

`feedback-missing`: no way leads from the output to the inverting input, at any frequency. The same evidence
tells a comparator that is meant, and so does an input that is held at a reference while no source with an
AC part drives the other.
"""

import re
from collections.abc import Iterator, Mapping
from dataclasses import replace

import numpy as np

from xcheck.circuit.elements import GROUND, Controlled, Source
from xcheck.deck.cards import Comment
from xcheck.finding import Finding, Level
from xcheck.impedance.return_ratio import loop_gains
from xcheck.notation import engineering
from xcheck.reviewed import Evidence
from xcheck.rules.graphs import influence, loops, reach
from xcheck.rules.pins import misfits
from xcheck.rules.unread import is_complete
from xcheck.stages.types import Amplifier, Partition, Stage

MEANT = re.compile(r"comparat|schmitt|trigger|hyster|latch|bistable|flip.?flop", re.IGNORECASE)
"""Words in which a user says that an amplifier is to switch."""

MEANT_NAME = re.compile(MEANT.pattern + r"|comp\d*$|cmp|trig|hyst", re.IGNORECASE)
"""The same in names, which are shorter; in a sentence `comp` is mostly compensation."""

AT_DC = np.zeros(1)

MOST_IN_A_LOOP = 12
"""Amplifiers of one stage that are brought to life in turn; each costs a solution of the whole circuit."""


def feedback_positive(evidence: Evidence) -> Iterator[Finding]:
    """Net feedback at DC goes to the non-inverting input; see the head of this module."""
    for stage, amplifier, seen in _positive(evidence):
        meant = "" if amplifier.output == amplifier.non_inverting else _why_meant(evidence, amplifier)
        level: Level = "note" if meant else "error"
        if len(stage.amplifiers) == 1:
            loop = (
                f"the feedback of {amplifier.name} at DC is positive, from `{amplifier.output}` to its "
                f"non-inverting input, node `{amplifier.non_inverting}`: {seen}"
            )
            swap = f"swap the inputs of {amplifier.name}, or the feedback and the reference at them"
        else:
            names = ", ".join(a.name for a in stage.amplifiers)
            loop = f"the feedback around {names} at DC is positive: {seen} at {amplifier.name}"
            swap = f"look at the inputs of {amplifier.name} first: the loop inverts an even number of times"
        yield Finding(
            "feedback-positive",
            level,
            amplifier.place,
            loop + (f"; taken for meant, because {meant}" if meant else ""),
            subject=stage.name,
            advice="small-signal impedances of this stage mean nothing while it switches"
            if meant
            else f"{swap}; where hysteresis is meant, say so in a comment or name (comparator, trigger)",
        )


def feedback_missing(evidence: Evidence) -> Iterator[Finding]:
    """No way from an amplifier's output to its inverting input."""
    if not is_complete(evidence):
        return
    circles = _circles(evidence.partition)
    without = [a for a in evidence.partition.amplifiers if not _share(circles, a.output, a.inverting)]
    if not without:
        return
    explained = {a.name for stage, _, _ in _positive(evidence) for a in stage.amplifiers} | misfits(evidence).keys()
    driven = _driven_at_ac(evidence)
    for amplifier in (a for a in without if a.name not in explained and a.kind != "transconductance"):
        meant = _why_meant(evidence, amplifier) or _reference_input(evidence, amplifier, driven)
        message = (
            f"no way leads from the output of {amplifier.name}, node `{amplifier.output}`, to its inverting input, "
            f"node `{amplifier.inverting}`"
        )
        advice = "close the loop; look for a misspelt node in the feedback network"
        if meant:
            message += f"; taken for a comparator, because {meant}"
            advice = "impedances of an amplifier in open loop are those of its model"
        elif _share(circles, amplifier.output, amplifier.non_inverting):
            message += f", but one to its non-inverting input, node `{amplifier.non_inverting}`"
            advice = f"look whether the inputs of {amplifier.name} are swapped"
        yield Finding(
            "feedback-missing",
            "note" if meant else "warning",
            amplifier.place,
            message,
            subject=amplifier.name,
            advice=advice,
        )


def _positive(evidence: Evidence) -> Iterator[tuple[Stage, Amplifier, str]]:
    """Amplifiers whose net feedback at DC is positive, one a loop, with a few words on what was seen."""
    partition = evidence.partition
    ratios = _ratios_in_turn(partition)
    circles: Mapping[str, int] | None = None
    for stage in partition.stages:
        turned = [a for a in stage.amplifiers if ratios.get(a.name, 0.0) < -1]
        if len(turned) % 2 and all(a.name in ratios for a in stage.amplifiers):
            yield stage, turned[0], f"a loop gain of {engineering(-ratios[turned[0].name])} in phase"
        for amplifier in stage.amplifiers:
            if amplifier.name in ratios or len(stage.amplifiers) > 1:
                continue
            circles = _circles(partition, at_dc=True) if circles is None else circles
            if _share(circles, amplifier.output, amplifier.non_inverting) and not _share(
                circles, amplifier.output, amplifier.inverting
            ):
                yield stage, amplifier, "no way leads to the inverting input"


def _ratios_in_turn(partition: Partition) -> dict[str, float]:
    """Return ratio at DC by amplifier, with those after it in its stage dead and those before it alive: the
    product of a stage's return differences is then the whole stage's. Left out: what is infinite or unknown."""
    ratios: dict[str, float] = {}
    most = max((len(stage.amplifiers) for stage in partition.stages), default=0)
    for turn in range(min(most, MOST_IN_A_LOOP)):
        live = {s.amplifiers[turn].name for s in partition.stages if turn < len(s.amplifiers) <= MOST_IN_A_LOOP}
        dead = {a.gain_element for s in partition.stages for a in s.amplifiers[turn + 1 :]}
        gains = loop_gains(_silenced(partition, dead), AT_DC)
        ratios.update({n: float(gains[n][0].real) for n in live if n in gains and np.isfinite(gains[n][0])})
    return ratios


def _silenced(partition: Partition, dead: set[str]) -> Partition:
    """The partition with some controlled sources giving nothing."""
    if not dead:
        return partition
    elements = tuple(
        replace(e, terms=tuple(replace(t, gain=0.0) for t in e.terms))
        if e.name in dead and isinstance(e, Controlled)
        else e
        for e in partition.circuit.elements
    )
    return replace(partition, circuit=replace(partition.circuit, elements=elements))


def _circles(partition: Partition, *, at_dc: bool = False) -> dict[str, int]:
    return loops(partition.circuit.nodes, influence(partition, at_dc=at_dc))


def _share(circles: Mapping[str, int], one: str, other: str) -> bool:
    return one == other or (one in circles and circles[one] == circles.get(other))


def _why_meant(evidence: Evidence, amplifier: Amplifier) -> str:
    """Why an amplifier without negative feedback is taken for a switch, '' where it is not."""
    if amplifier.kind == "comparator" and amplifier.part is not None:
        return f"{amplifier.part.name} is a comparator ({amplifier.part.data_sheet})"
    for name in (amplifier.name.rpartition(".")[2], amplifier.subckt, amplifier.output.rpartition(".")[2]):
        if MEANT_NAME.search(name):
            return f"`{name}` says so"
    for comment in _comments_on(evidence, amplifier):
        found = MEANT.search(comment.text)
        if found:
            return f"the comment in line {comment.place.line} says `{found.group()}`"
    kinds = {analysis.kind for analysis in evidence.circuit.analyses}
    if kinds & {"tran", "dc"} and "ac" not in kinds:
        return "the deck asks for large-signal results only"
    return ""


def _comments_on(evidence: Evidence, amplifier: Amplifier) -> list[Comment]:
    """The comments within three lines above an amplifier's card, and those around its definition."""
    file, line = amplifier.place.file, amplifier.place.line
    above = [c for c in evidence.deck.comments if c.place.file == file and line - 3 <= c.place.line < line]
    return above + [c for i in evidence.circuit.instances if i.name == amplifier.name for c in i.comments]


def _driven_at_ac(evidence: Evidence) -> set[str]:
    """Nodes that a source with an AC part can move."""
    elements = evidence.circuit.elements
    held = {n for e in elements if isinstance(e, Source) and e.ac for n in e.nodes} - {GROUND}
    # a source's own node is held, so what hangs on it is come to from there
    beside = {node for e in elements if held.intersection(e.nodes) for node in e.nodes}
    beside -= {GROUND, *evidence.partition.ac_ground}
    return reach(held | beside, influence(evidence.partition))


def _reference_input(evidence: Evidence, amplifier: Amplifier, driven: set[str]) -> str:
    """Whether one input stands at a reference and no AC source drives the other."""
    partition = evidence.partition
    fixed = {GROUND, *partition.ac_ground, *partition.references}
    inputs = {amplifier.non_inverting, amplifier.inverting}
    held = sorted(inputs & fixed)
    if len(held) == 1 and not inputs & driven:
        return f"its input `{held[0]}` is a reference and no AC source drives the other"
    return ""
