"""What a topology is: a name, how it is told, its places and closed forms, and where they are published."""

from collections.abc import Callable
from dataclasses import dataclass

from xcheck.topologies import forms
from xcheck.topologies.forms import Form
from xcheck.topologies.sketch import Sketch


@dataclass(frozen=True, slots=True)
class Symbols:
    """The letters of the places as seen from one port (see forms.Places)."""

    own: str = "Z1"
    leg: str = "Zg"
    bias: str = "Zp"
    feedback: str = "Zf"
    shunt: str = "Zs"


@dataclass(frozen=True, slots=True)
class Topology:
    """name: the trade's word; fits: whether a sketch shows it; source: where it and its impedances are published;
    input_rule, output_rule: the ideal amplifier's values in words; at_inverting, at_non_inverting: symbols and
    closed form at an input that leads there; at_output: symbols at the output. inverting_form: in which of its two
    ways the form at the inverting side is written."""

    name: str
    fits: Callable[[Sketch], bool]
    source: str
    input_rule: str
    output_rule: str = "zero"
    at_inverting: Symbols = Symbols()
    at_non_inverting: Symbols = Symbols()
    at_output: Symbols = Symbols(leg="Z1")
    inverting_form: Form = forms.inverting_input
    non_inverting_form: Form = forms.non_inverting_input
    output_form: Form = forms.output
    has_form: bool = True
