"""The whole flow, from paths to an outcome: the one place that knows the order of the steps."""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace
from pathlib import Path

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Circuit, Device
from xcheck.deck.cards import Deck
from xcheck.deck.reader import read_deck
from xcheck.directives import band_of
from xcheck.elaboration import elaborate
from xcheck.elaboration.unused import unused_as_notes
from xcheck.errors import CallError, DeckUnreadable, EngineError
from xcheck.finding import Finding
from xcheck.grid import DEFAULT_BAND, comparison_grid
from xcheck.impedance.answers import answer_ports
from xcheck.impedance.closed_form import closed_forms
from xcheck.impedance.return_ratio import return_ratios
from xcheck.impedance.types import ReturnRatio
from xcheck.linearisation import Linearised, linearise
from xcheck.options import DEFAULT_TOLERANCE, Options
from xcheck.project import Project, find_project, read_project
from xcheck.results.formed import impedances
from xcheck.results.rawfile import read_raw
from xcheck.reviewed import DeckReview, Evidence, Outcome
from xcheck.rules import run_rules
from xcheck.simulate import find_engine, measure
from xcheck.simulate.operate import QUANTITIES, Operated, operate
from xcheck.simulate.types import EngineInfo, Simulation
from xcheck.stages import find_amplifiers, split
from xcheck.stages.standins import STATED, stated, with_stand_ins
from xcheck.stages.types import Amplifier, Partition
from xcheck.topologies import classify

DECK_ENDINGS = (".cir", ".ckt", ".net", ".sp", ".spi", ".spice")

Progress = Callable[[str, int, int], None]
"""Told the deck's path, the ports measured so far and the ports to measure."""


def review(
    paths: str | Path | Iterable[str | Path],
    *,
    options: Options | None = None,
    progress: Progress | None = None,
) -> Outcome:
    """Reviews decks, or all decks in folders, in the order given.

    Raises CallError where there is nothing to review, EngineError where ngspice was asked for by name and
    is not there, DeckUnreadable where the only deck cannot be read; everything else is in the outcome.
    """
    options = options or Options()
    decks = _decks_of([paths] if isinstance(paths, (str, Path)) else list(paths))
    if options.results is not None and len(decks) != 1:
        raise CallError(f"results are of one deck, and {len(decks)} are to be reviewed; name that one")
    engine = _engine(options)
    reviews = [_review_deck(path, options, engine, progress) for path in decks]
    if len(reviews) == 1 and reviews[0].unreadable:
        raise DeckUnreadable(reviews[0].unreadable)
    return Outcome(tuple(reviews), engine, options)


def _decks_of(paths: list[str | Path]) -> list[Path]:
    decks: list[Path] = []
    for given in paths:
        path = Path(given)
        if path.is_dir():
            inside = sorted(p for p in path.rglob("*") if p.suffix.lower() in DECK_ENDINGS and p.is_file())
            decks += [p for p in inside if not any(part.startswith(".") for part in p.relative_to(path).parts)]
        else:
            decks.append(path)
    if not decks:
        raise CallError(f"no deck in {', '.join(map(str, paths))}: looked for {' '.join(DECK_ENDINGS)}")
    return list(dict.fromkeys(decks))


def _engine(options: Options) -> EngineInfo:
    if options.results is not None:
        if options.engine == "ngspice":
            raise CallError("--results takes the simulated values from a file: leave --engine ngspice away")
        return EngineInfo(available=False, reason=f"simulated values from {options.results}")
    if options.engine == "none":
        return EngineInfo(available=False, reason="not asked for (engine none)")
    engine = find_engine()
    if options.engine == "ngspice" and not engine.available:
        raise EngineError(f"ngspice was asked for and is not there: {engine.reason}")
    return engine


def _review_deck(path: Path, options: Options, engine: EngineInfo, progress: Progress | None) -> DeckReview:
    try:
        deck = read_deck(path, include_dirs=options.include_dirs)
    except DeckUnreadable as error:
        return DeckReview(str(path), "", None, (), unreadable=str(error))
    file = find_project(path)
    project = Project() if file is None else read_project(file)
    evidence, findings = analyse(deck, options, engine, progress, project)
    return DeckReview(deck.path, deck.title, evidence, findings)


def analyse(
    deck: Deck,
    options: Options,
    engine: EngineInfo,
    progress: Progress | None = None,
    project: Project | None = None,
) -> tuple[Evidence, tuple[Finding, ...]]:
    """All that can be known of one deck, and what the rules say of it, in order of place."""
    project = project or Project()
    circuit = elaborate(deck, options.subckt)
    # with results at hand ngspice, where it is, still says at which operating point the deck is linear
    asks = find_engine() if options.results is not None and options.engine == "auto" else engine
    operated = _operated(deck, circuit, asks)
    linear = linearise(circuit, operated.point) if operated.point is not None else Linearised(circuit)
    declared, refusals = band_of(deck.directives)
    band = options.band or declared or project.band
    in_band = band or DEFAULT_BAND
    tolerance = options.tolerance or project.tolerance or DEFAULT_TOLERANCE
    options = replace(options, tolerance=tolerance)
    amplifiers, amplifier_findings = find_amplifiers(linear.circuit, circuit, project)
    analytic, amplifiers = _with_models(linear.circuit, amplifiers, operated, project)
    partition = split(analytic, amplifiers, amplifier_findings, extra_ports=options.ports, band=in_band)
    frequency = comparison_grid(circuit.analyses, options.spots)
    formed = None
    if options.results is not None:
        formed = impedances(read_raw(options.results), circuit, partition)
        frequency = formed.frequency
        if not frequency.size:
            raise CallError(f"{options.results} holds no AC plot with a frequency above zero; save an `.ac` run")
    recognised = {stage.name: classify(partition, stage, band=in_band) for stage in partition.stages}
    roads = return_ratios(partition, frequency)
    forms = closed_forms(partition, frequency, band=in_band)
    simulation = None
    if formed is not None:
        simulation = Simulation(
            engine, formed.values, formed.not_formed, taken_from=str(options.results), doubts=formed.doubts
        )
    elif options.ports_measured and engine.available and any(stage.ports for stage in partition.stages):

        def tell(done: int, total: int) -> None:
            if progress is not None:
                progress(deck.path, done, total)

        simulation = measure(deck, circuit, partition, frequency, progress=tell)
    answers = answer_ports(
        partition,
        {name: r.topology for name, r in recognised.items()},
        frequency,
        roads,
        forms,
        {} if simulation is None else simulation.values,
        {} if simulation is None else simulation.unmeasured,
        tolerance=tolerance,
        stood_in=_stood_in(partition),
        data_sheet=_by_data_sheet(partition, options, frequency, in_band),
    )
    evidence = Evidence(
        deck=deck,
        circuit=circuit,
        partition=partition,
        recognised=recognised,
        answers=answers,
        simulation=simulation,
        frequency=frequency,
        band=in_band,
        band_declared=band is not None,
        options=options,
    )
    read = unused_as_notes(deck.findings, circuit, options.subckt)
    findings = (*read, *circuit.findings, *refusals, *partition.findings, *run_rules(evidence))
    return evidence, _in_order(findings)


def _operated(deck: Deck, circuit: Circuit, engine: EngineInfo) -> Operated:
    """The operating point, asked for only where there is something nonlinear that has an equivalent at it."""
    devices = [e for e in circuit.elements if isinstance(e, Device)]
    if engine.available and any(d.behaviour is not None or d.kind == "a" or d.kind in QUANTITIES for d in devices):
        return operate(deck, circuit, engine=engine)
    return Operated(None)


def _with_models(
    circuit: Circuit, amplifiers: Sequence[Amplifier], operated: Operated, project: Project
) -> tuple[Circuit, tuple[Amplifier, ...]]:
    """The circuit with stand-ins for amplifiers whose own model is not there, or is nonlinear while no operating point
    is known, or whose values the project overrides. At an operating point what has no linear model stays without: a
    simulation speaks of it alone."""
    chosen = {}
    for a in (a for a in amplifiers if a.kind == "voltage-feedback"):
        own = project.amplifiers.get(a.subckt)
        wanted = {name: v for name, v in (own.values if own is not None else {}).items() if name in STATED}
        if a.open_loop.model is None and (operated.point is None or a.elements == (a.name,)):
            chosen[a.name] = stated(a.part, a.open_loop.values, wanted)
        elif wanted:
            chosen[a.name] = stated(None, a.open_loop.values, wanted)
    return with_stand_ins(circuit, amplifiers, chosen) if chosen else (circuit, tuple(amplifiers))


def _stood_in(partition: Partition) -> frozenset[str]:
    """Stages with an amplifier whose values are not its own model's nor the project's: no simulation of the deck can be
    held against them."""
    doubtful = ("data sheet", "assumed")
    return frozenset(
        stage.name
        for stage in partition.stages
        if any(q.origin in doubtful and q.value for a in stage.amplifiers for q in a.open_loop.values.values())
    )


def _by_data_sheet(
    partition: Partition, options: Options, frequency: Real, band: tuple[float, float]
) -> dict[str, Complex]:
    """The ports' impedances with data sheets in place of models, by subject, for stages whose parts are all known."""
    parts = {a.name: a.part for a in partition.amplifiers}
    known = {name: part for name, part in parts.items() if part is not None and part.kind == "voltage-feedback"}
    whole = [s for s in partition.stages if all(a.name in known for a in s.amplifiers)]
    if not whole:
        return {}
    chosen = {a.name: stated(known[a.name], a.open_loop.values) for a in partition.amplifiers if a.name in known}
    circuit, amplifiers = with_stand_ins(partition.circuit, partition.amplifiers, chosen)
    by_sheet = split(circuit, amplifiers, extra_ports=options.ports, band=band)
    subjects = {port.subject for stage in whole for port in stage.ports}
    roads = return_ratios(by_sheet, frequency)
    return {s: r.impedance for s, r in roads.items() if s in subjects and isinstance(r, ReturnRatio)}


def _in_order(findings: Iterable[Finding]) -> tuple[Finding, ...]:
    """Each finding once, by place and then by rule."""
    once = dict.fromkeys(replace(f) for f in findings)
    return tuple(sorted(once, key=lambda f: (f.place.file, f.place.line, f.place.column, f.rule)))
