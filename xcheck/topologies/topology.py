"""What a topology is: a name, how it is told, and where it is published."""

from collections.abc import Callable
from dataclasses import dataclass

from xcheck.topologies.sketch import Sketch


@dataclass(frozen=True, slots=True)
class Topology:
    """name: the trade's word; fits: whether a sketch shows it; source: where it and its impedances are published;
    input_rule, output_rule: the ideal amplifier's values in words."""

    name: str
    fits: Callable[[Sketch], bool]
    source: str
    input_rule: str
    output_rule: str = "zero"
