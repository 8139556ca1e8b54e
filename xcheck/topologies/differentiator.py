"""A capacitor into the virtual ground and a resistive feedback."""

from xcheck.topologies.judgements import capacitive_feedback, only_one_n, single
from xcheck.topologies.sketch import Sketch, is_capacitive
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """A capacitor into the virtual ground and a resistive feedback."""
    return s.closed and only_one_n(s) and is_capacitive(single(s)) and not capacitive_feedback(s)


TOPOLOGY = Topology(
    name="differentiator",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, the op-amp differentiator; from memory",
    input_rule="the input branch",
)
