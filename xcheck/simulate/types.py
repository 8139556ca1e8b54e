"""What ngspice answered, as plain data; also what a test puts in its place."""

from collections.abc import Mapping
from dataclasses import dataclass, field

from xcheck.circuit.arrays import Complex

MISSING_MODEL = "missing model"
"""The step at which a deck fails whose models are not all there."""


@dataclass(frozen=True, slots=True)
class EngineInfo:
    """Which simulator was found. reason: why it is not available, '' where it is; version: as it says
    ('39'); library: the shared library's path; code_models: whether POLY sources and A devices run."""

    available: bool
    version: str = ""
    library: str = ""
    code_models: bool = False
    reason: str = ""
    name: str = "ngspice"


@dataclass(frozen=True)
class Simulation:
    """Measured impedances of one deck.

    values: ohm by port subject, shape (F,) on the grid that was asked for; unmeasured: reason by port
    subject; operating_point: volt by flat node; currents: ampere by flat name of a voltage source, into its
    first node; failure: what failed as a whole, in ngspice's own words, '' where nothing did; failed_step:
    'missing model', 'load', 'operating point', 'ac', 'time limit', 'memory limit', 'crash' or ''; messages: ngspice's
    warnings and notes; left_out: cards that were not handed to ngspice, in words; taken_from: the result file that
    the values come from, '' where ngspice was run; doubts: what speaks for another deck behind that file.
    """

    engine: EngineInfo
    values: Mapping[str, Complex] = field(default_factory=dict)
    unmeasured: Mapping[str, str] = field(default_factory=dict)
    operating_point: Mapping[str, float] = field(default_factory=dict)
    currents: Mapping[str, float] = field(default_factory=dict)
    failure: str = ""
    failed_step: str = ""
    messages: tuple[str, ...] = ()
    left_out: tuple[str, ...] = ()
    taken_from: str = ""
    doubts: tuple[str, ...] = ()
