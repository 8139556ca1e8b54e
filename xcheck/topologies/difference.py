"""One signal to each input."""

from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Symbols, Topology


def fits(s: Sketch) -> bool:
    """One signal to each input."""
    return s.closed and bool(s.signal_n) and bool(s.signal_p)


TOPOLOGY = Topology(
    name="difference",
    fits=fits,
    source="Sedra and Smith, Microelectronic Circuits, the difference amplifier; Analog Devices MT-061; from memory",
    input_rule="R1 at the inverting side, R3 + R4 at the non-inverting side",
    at_non_inverting=Symbols(own="Z2", leg="Z1", bias="Zg"),
)
