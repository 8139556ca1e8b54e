"""A resistor into the virtual ground and a capacitive feedback."""

from xcheck.topologies.judgements import capacitive_feedback, only_one_n, single
from xcheck.topologies.sketch import Sketch, is_capacitive
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """A resistor into the virtual ground and a capacitive feedback."""
    return s.closed and only_one_n(s) and not is_capacitive(single(s)) and capacitive_feedback(s)


TOPOLOGY = Topology(
    name="integrator",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, the Miller integrator; from memory",
    input_rule="R1",
)
