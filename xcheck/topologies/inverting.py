"""One input into the virtual ground."""

from xcheck.topologies.judgements import only_one_n
from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """One input into the virtual ground."""
    return s.closed and only_one_n(s)


TOPOLOGY = Topology(
    name="inverting",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, inverting configuration with finite gain; from memory",
    input_rule="R1",
)
