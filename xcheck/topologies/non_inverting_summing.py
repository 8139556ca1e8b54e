"""Several inputs joined at the non-inverting input."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """Several inputs joined at the non-inverting input."""
    return (
        s.closed
        and s.positive is None
        and not s.signal_n
        and len(s.signal_p) + len(s.reference_p) > 1
        and bool(s.signal_p)
        and not s.direct_p
    )


TOPOLOGY = Topology(
    name="non-inverting-summing",
    fits=fits,
    source="common practice",
    input_rule="the input's branch and the other branches at the non-inverting input",
)
