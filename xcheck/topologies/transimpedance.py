"""A current into the virtual ground, turned into a voltage by a resistive feedback."""

from xcheck.topologies import forms
from xcheck.topologies.judgements import capacitive_feedback, current_alone
from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Symbols, Topology


def fits(s: Sketch) -> bool:
    """A current into the virtual ground, turned into a voltage by a resistive feedback."""
    return s.closed and current_alone(s) and not capacitive_feedback(s)


TOPOLOGY = Topology(
    name="transimpedance",
    fits=fits,
    source="Graeme, Photodiode Amplifiers: Op Amp Solutions (1996); from memory",
    input_rule="zero: the virtual ground",
    inverting_form=forms.virtual_ground,
    at_output=Symbols(leg="Zg"),
)
