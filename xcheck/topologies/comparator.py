"""No feedback at all."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """No feedback at all."""
    return not s.shorted and s.feedback is None and s.positive is None


TOPOLOGY = Topology(
    name="comparator",
    fits=fits,
    source="common practice",
    input_rule="open-loop",
    has_form=False,
)
