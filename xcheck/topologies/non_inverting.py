"""One input at the non-inverting input, a divider in the feedback."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Symbols, Topology


def fits(s: Sketch) -> bool:
    """One input at the non-inverting input, a divider in the feedback."""
    leg = s.ground_n is not None or bool(s.reference_n)
    return s.closed and bool(s.signal_p) and not s.signal_n and leg


TOPOLOGY = Topology(
    name="non-inverting",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, the non-inverting configuration; from memory",
    input_rule="infinite",
    at_output=Symbols(leg="Zg"),
)
