"""A transconductance amplifier in open loop: its output is a current."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """A transconductance amplifier without feedback."""
    return s.transconductance and not s.shorted and s.feedback is None and s.positive is None


TOPOLOGY = Topology(
    name="voltage-to-current",
    fits=fits,
    source="common practice",
    input_rule="open-loop",
    output_rule="infinite",
    has_form=False,
)
