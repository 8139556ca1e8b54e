"""Several inputs into one virtual ground."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Symbols, Topology


def fits(s: Sketch) -> bool:
    """Several inputs into one virtual ground."""
    return s.closed and not s.signal_p and bool(s.signal_n) and len(s.signal_n) + len(s.reference_n) > 1


TOPOLOGY = Topology(
    name="summing",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, the weighted summer; from memory",
    input_rule="each input's own impedance to the virtual ground",
    at_inverting=Symbols(leg="Zg"),
    at_output=Symbols(leg="Zg"),
)
