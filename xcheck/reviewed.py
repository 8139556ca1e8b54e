"""A review as data: what rules read and what reports write."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import cached_property
from typing import TYPE_CHECKING

from xcheck.circuit.arrays import Real
from xcheck.circuit.elements import Circuit
from xcheck.deck.cards import Deck
from xcheck.errors import CallError
from xcheck.finding import Finding
from xcheck.frame import table
from xcheck.impedance.types import PortAnswer
from xcheck.options import Options
from xcheck.simulate.types import EngineInfo, Simulation
from xcheck.stages.types import Partition
from xcheck.topologies.types import Recognised

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True)
class Evidence:
    """All that is known of one deck before any rule speaks.

    frequency: Hz, shape (F,), the grid on which methods are compared; band: Hz, where the design is used;
    band_declared: whether somebody said so (design rules give only notes otherwise); recognised: by stage
    name; answers: one a port, in stage and port order.
    """

    deck: Deck
    circuit: Circuit
    partition: Partition
    recognised: Mapping[str, Recognised]
    answers: tuple[PortAnswer, ...]
    simulation: Simulation | None
    frequency: Real
    band: tuple[float, float]
    band_declared: bool
    options: Options

    @cached_property
    def by_subject(self) -> dict[str, PortAnswer]:
        """Port answers by `stage.port`."""
        return {answer.port.subject: answer for answer in self.answers}


@dataclass(frozen=True)
class DeckReview:
    """One deck's part of a review. evidence None: the deck could not be read at all (`unreadable` says why).
    findings: of reading, wiring, values, simulation and impedances, in order of place."""

    path: str
    title: str
    evidence: Evidence | None
    findings: tuple[Finding, ...]
    unreadable: str = ""

    def port(self, stage: str, name: str, side: str | None = None) -> PortAnswer:
        """The answer for a port by its stage, its node and, where that is needed, its side. Raises CallError."""
        answers = self.evidence.answers if self.evidence is not None else ()
        of_stage = [a for a in answers if a.port.stage == stage.lower()]
        if not of_stage:
            raise CallError(_no_such("stage", stage, {a.port.stage for a in answers}))
        found = [a for a in of_stage if a.port.name == name.lower() and side in (None, a.port.side)]
        if not found:
            raise CallError(_no_such(f"port of {stage}", name, {a.port.name for a in of_stage}))
        return found[0]


def _no_such(what: str, name: str, known: set[str]) -> str:
    near = get_close_matches(name.lower(), sorted(known), n=3) or sorted(known)[:8]
    return f"there is no {what} `{name}`; there is {', '.join(near) or 'none'}"


@dataclass(frozen=True)
class Summary:
    decks: int = 0
    stages: int = 0
    errors: int = 0
    warnings: int = 0
    notes: int = 0


@dataclass(frozen=True)
class Outcome:
    """A whole review: decks in the order asked for, the engine, the options."""

    decks: tuple[DeckReview, ...]
    engine: EngineInfo
    options: Options = field(default_factory=Options)

    @cached_property
    def findings(self) -> tuple[Finding, ...]:
        """All findings of all decks, in order."""
        return tuple(f for deck in self.decks for f in deck.findings)

    def table(self) -> "pd.DataFrame":
        """A pandas DataFrame, one row a port and frequency: deck, stage, topology, port, side, kind, frequency_hz,
        rule_of_thumb, closed_form, return_ratio and simulated (complex, ohm), difference, verdict."""
        return table((d.path, d.evidence.answers if d.evidence is not None else ()) for d in self.decks)

    @cached_property
    def summary(self) -> Summary:
        """Counts over all decks."""
        levels = [f.level for f in self.findings]
        stages = sum(len(d.evidence.partition.stages) for d in self.decks if d.evidence is not None)
        return Summary(len(self.decks), stages, levels.count("error"), levels.count("warning"), levels.count("note"))
