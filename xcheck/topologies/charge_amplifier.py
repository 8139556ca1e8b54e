"""A capacitive feedback that takes the charge of a capacitive source or a current."""

from xcheck.topologies import forms
from xcheck.topologies.judgements import capacitive_feedback, current_alone, one_capacitive_source
from xcheck.topologies.sketch import Sketch
from xcheck.topologies.topology import Topology


def fits(s: Sketch) -> bool:
    """A capacitive feedback that takes the charge of a capacitive source or a current."""
    return s.closed and capacitive_feedback(s) and (current_alone(s) or one_capacitive_source(s))


TOPOLOGY = Topology(
    name="charge-amplifier",
    fits=fits,
    source="common practice of piezoelectric sensors",
    input_rule="the source capacitance; zero at the virtual ground",
    inverting_form=forms.virtual_ground,
)
