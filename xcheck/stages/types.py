"""Amplifiers, ports and stages: what later parts of the pipeline read."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal, Protocol

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Circuit
from xcheck.finding import Finding
from xcheck.parts.catalogue import Part
from xcheck.place import Place

ValueOrigin = Literal["deck", "measured", "project", "data sheet", "assumed"]
Side = Literal["input", "output"]
Kind = Literal["signal", "reference"]


@dataclass(frozen=True, slots=True)
class Quantity:
    """A value in SI units and where it came from. value None: infinite (an input resistance that is not
    there, a bandwidth without a pole); () for no poles."""

    value: float | tuple[float, ...] | None
    origin: ValueOrigin


@dataclass(frozen=True, slots=True)
class AmplifierResponse:
    """An amplifier as seen from its three signal pins, supplies at AC ground; each array has shape (F,).

    With V+ and V- at the inputs and the output unloaded, Vout = gain_plus V+ + gain_minus V- (so
    gain_minus is near -A). y_differential: admittance between the inputs (1/Zid); y_plus, y_minus: from each
    input to ground (1/Zic), siemens. z_output: Zo, ohm.
    """

    gain_plus: Complex
    gain_minus: Complex
    y_differential: Complex
    y_plus: Complex
    y_minus: Complex
    z_output: Complex


class AmplifierModel(Protocol):
    """The small-signal model of an amplifier."""

    def response(self, frequency: Real) -> AmplifierResponse:
        """The model at some frequencies (Hz, shape (F,))."""


@dataclass(frozen=True)
class OpenLoop:
    """Open-loop values by contract name ('gain', 'gain_bandwidth_hz', 'poles_hz', 'input_resistance_ohm',
    'input_capacitance_f', 'common_mode_resistance_ohm', 'common_mode_capacitance_f',
    'output_resistance_ohm') and the model behind them.

    model None: the amplifier holds nonlinear parts, so no linear model is known; reason says which.
    exact: the three-pin model says all that the deck's elements say (no path back from output to input, no
    supply coupling); reason says why not.
    """

    values: Mapping[str, Quantity]
    model: AmplifierModel | None
    exact: bool = True
    reason: str = ""


@dataclass(frozen=True)
class Amplifier:
    """An op-amp found in the circuit; all nodes are flat names.

    subckt: the name of its subcircuit, '' for a bare source; elements: flat names of its own elements;
    gain_element: the controlled source whose return ratio stands for the amplifier; place: its instance
    card, or its E source's; part: the data sheet that holds for it; kind:
    'voltage-feedback', 'current-feedback', 'transconductance' or 'comparator'.
    """

    name: str
    subckt: str
    non_inverting: str
    inverting: str
    output: str
    positive_supply: str | None
    negative_supply: str | None
    evidence: tuple[str, ...]
    elements: tuple[str, ...]
    gain_element: str
    open_loop: OpenLoop
    place: Place
    part: Part | None = None
    kind: str = "voltage-feedback"


@dataclass(frozen=True, slots=True)
class Terminal:
    """One end of an element: index of its node in `nodes`, or -1 for all that it senses at the node."""

    element: str
    index: int


@dataclass(frozen=True)
class Port:
    """A place where a stage meets the rest.

    name: the node's name, made unique within the stage; inside: the terminals on the node that belong to the
    stage (all others on the node are outside); current_driven: the outside is open at AC, so the test is a
    current; place: of the card that a finding on this port points at.
    """

    stage: str
    name: str
    node: str
    side: Side
    kind: Kind
    inside: tuple[Terminal, ...]
    current_driven: bool
    place: Place

    @property
    def subject(self) -> str:
        return f"{self.stage}.{self.name}"


@dataclass(frozen=True)
class Stage:
    """Amplifiers in one feedback loop with the network around them.

    elements: flat names of the passives (and devices) of its networks, the amplifiers' own left out.
    """

    name: str
    amplifiers: tuple[Amplifier, ...]
    elements: tuple[str, ...]
    ports: tuple[Port, ...]


@dataclass(frozen=True)
class Partition:
    """A circuit split into stages.

    ac_ground: nodes that do not move at AC (ground, nodes held by voltage sources without a path to another
    moving node), each with the reason; stiff: nodes at which the circuit is split, each with the reason
    ('ground', 'voltage source v1', 'output of xu1', 'rail', 'reference'); driver: for a stiff node, the flat
    name of the amplifier or source that holds it.
    """

    circuit: Circuit
    amplifiers: tuple[Amplifier, ...]
    stages: tuple[Stage, ...]
    stiff: Mapping[str, str]
    ac_ground: Mapping[str, str]
    driver: Mapping[str, str]
    references: tuple[str, ...] = ()
    findings: tuple[Finding, ...] = field(default=())
