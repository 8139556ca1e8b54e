"""One input at the non-inverting input, a divider in the feedback."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """One input at the non-inverting input, a divider in the feedback."""
    return (
        s.closed
        and s.positive is None
        and not s.signal_n
        and bool(s.signal_p)
        and (s.ground_n is not None or bool(s.reference_n))
    )


TOPOLOGY = Topology(
    name="non-inverting",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, the non-inverting configuration; from memory",
    input_rule="infinite",
)
