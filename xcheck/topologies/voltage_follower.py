"""One input at the non-inverting input, the whole output fed back."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Symbols, Topology


def fits(s: Sketch) -> bool:
    """One input at the non-inverting input, the whole output fed back."""
    return s.closed and bool(s.signal_p) and not s.signal_n and not s.reference_n and s.ground_n is None


TOPOLOGY = Topology(
    name="voltage-follower",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, the voltage follower; from memory",
    input_rule="infinite",
    at_output=Symbols(leg="Zg"),
)
