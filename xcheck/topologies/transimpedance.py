"""A current into the virtual ground, turned into a voltage by a resistive feedback."""

from xcheck.topologies.judgements import capacitive_feedback, inputs
from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """A current into the virtual ground, turned into a voltage by a resistive feedback."""
    return s.closed and s.positive is None and s.current_n and not inputs(s) and not capacitive_feedback(s)


TOPOLOGY = Topology(
    name="transimpedance",
    fits=fits,
    source="Graeme, Photodiode Amplifiers: Op Amp Solutions (1996); from memory",
    input_rule="zero: the virtual ground",
)
