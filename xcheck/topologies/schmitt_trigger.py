"""Positive feedback alone: the output is driven to its limits."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """Positive feedback alone: the output is driven to its limits."""
    return not s.shorted and s.feedback is None and s.positive is not None


TOPOLOGY = Topology(
    name="schmitt-trigger",
    fits=fits,
    source="common practice",
    input_rule="outside a small-signal check",
    has_form=False,
)
