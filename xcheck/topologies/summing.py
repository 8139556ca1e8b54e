"""Several inputs into one virtual ground."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """Several inputs into one virtual ground."""
    return (
        s.closed
        and s.positive is None
        and not s.signal_p
        and len(s.signal_n) + len(s.reference_n) > 1
        and bool(s.signal_n)
    )


TOPOLOGY = Topology(
    name="summing",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, the weighted summer; from memory",
    input_rule="each input's own impedance to the virtual ground",
)
