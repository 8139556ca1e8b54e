"""Several inputs joined at the non-inverting input."""

from xcheck.topologies.judgements import added_at_p
from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Symbols, Topology


def fits(s: Sketch) -> bool:
    """Several inputs joined at the non-inverting input."""
    return s.closed and bool(s.signal_p) and not s.signal_n and added_at_p(s) > 1


TOPOLOGY = Topology(
    name="non-inverting-summing",
    fits=fits,
    source="common practice",
    input_rule="the input's branch and the other branches at the non-inverting input",
    at_output=Symbols(leg="Zg"),
)
