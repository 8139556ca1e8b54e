"""The registry of topologies, in the order in which they are tried, and recognition by it."""

from dataclasses import replace

from xcheck.stages.types import Partition, Stage
from xcheck.topologies import (
    charge_amplifier,
    comparator,
    difference,
    differentiator,
    integrator,
    inverting,
    non_inverting,
    non_inverting_summing,
    schmitt_trigger,
    summing,
    transimpedance,
    voltage_follower,
    voltage_to_current,
)  # fmt: skip
from xcheck.topologies.drawing import Draughtsman
from xcheck.topologies.sketch import Sketch, sketch
from xcheck.topologies.topology import Topology
from xcheck.topologies.types import Recognised

TOPOLOGIES: tuple[Topology, ...] = (
    voltage_to_current.TOPOLOGY,
    schmitt_trigger.TOPOLOGY,
    comparator.TOPOLOGY,
    transimpedance.TOPOLOGY,
    charge_amplifier.TOPOLOGY,
    difference.TOPOLOGY,
    summing.TOPOLOGY,
    differentiator.TOPOLOGY,
    integrator.TOPOLOGY,
    inverting.TOPOLOGY,
    non_inverting_summing.TOPOLOGY,
    non_inverting.TOPOLOGY,
    voltage_follower.TOPOLOGY,
)

DEFAULT_BAND = (10.0, 10e3)


def classify(partition: Partition, stage: Stage, band: tuple[float, float] = DEFAULT_BAND) -> Recognised:
    """The name of a stage by its structure at the middle of a band (Hz); `unclassified` with what was seen where
    none fits."""
    topology, seen = recognise(Draughtsman(partition), stage, band)
    return Recognised("unclassified" if topology is None else topology.name, seen)


def recognise(
    draughtsman: Draughtsman, stage: Stage, band: tuple[float, float] = DEFAULT_BAND
) -> tuple[Topology | None, str]:
    """The topology of a stage, None where none fits, and what was seen."""
    drawn = sketch(draughtsman, stage, band)
    seen = "; ".join(words for words in (drawn.why_not, drawn.seen) if words) or "no network around the amplifier"
    if drawn.why_not:
        return None, seen
    for s in (drawn, _references_as_signals(drawn)):
        for topology in TOPOLOGIES:
            if topology.fits(s):
                return topology, seen
    return None, seen


def _references_as_signals(s: Sketch) -> Sketch:
    """For decks in which no source has an AC or transient part: their DC sources are then the inputs. One that holds
    the non-inverting input undivided beside one at the inverting side stays a reference."""
    if s.signal_n or s.signal_p or s.current_n:
        return s
    if s.reference_n and len(s.reference_p) == 1 and s.ground_p is None:
        return replace(s, signal_n=s.reference_n, reference_n={})
    return replace(s, signal_n=s.reference_n, signal_p=s.reference_p, reference_n={}, reference_p={})
