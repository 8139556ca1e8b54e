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
)  # fmt: skip
from xcheck.topologies.sketch import Sketch, sketch
from xcheck.topologies.topology import Topology
from xcheck.topologies.types import Recognised

TOPOLOGIES: tuple[Topology, ...] = (
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
    """The name of a stage by its structure; `unclassified` with what was seen where none fits."""
    drawn = sketch(partition, stage, band)
    if drawn.why_not:
        return Recognised("unclassified", drawn.why_not)
    if drawn.bypass:
        return Recognised("unclassified", drawn.seen + "; an input leads past the amplifier to the output")
    for s in (drawn, _references_as_signals(drawn)):
        for topology in TOPOLOGIES:
            if topology.fits(s):
                return Recognised(topology.name, drawn.seen or "no network around the amplifier")
    return Recognised("unclassified", drawn.seen or "no input was found")


def _references_as_signals(s: Sketch) -> Sketch:
    """For decks in which no source has an AC or transient part: their DC sources are then the inputs."""
    if s.signal_n or s.signal_p or s.current_n:
        return s
    return replace(s, signal_n=s.reference_n, signal_p=s.reference_p, reference_n={}, reference_p={})
