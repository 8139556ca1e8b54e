"""The terminal report: one block a deck, one row a port, findings in the form that editors and CI systems know."""

import cmath
import io
import shutil
from collections.abc import Iterable

from rich.console import Console
from rich.table import Table
from rich.text import Text

from xcheck.finding import Finding
from xcheck.impedance.types import PortAnswer
from xcheck.notation import engineering, percent, phase
from xcheck.report.spots import quoted
from xcheck.reviewed import DeckReview, Evidence, Outcome

CAUTION = (
    "A small-signal check of a model at its operating point: no proof of safety. Circuits on the mains, on patients or "
    "in protective functions need review by qualified people under the codes that apply where they are used."
)
STYLES = {"error": "bold red", "warning": "yellow", "note": "cyan", "disagrees": "bold red", "unchecked": "yellow"}
NARROWEST = 80
MOST_FORMULAS = 24
"""Ports of a deck up to which the formulas are written out; all of them are in the JSON report."""


def render(outcome: Outcome, *, colour: bool = False, width: int | None = None, symbols: bool = False) -> str:
    """The report as text. symbols: whether the stream can show the ohm sign."""
    columns = max(width or shutil.get_terminal_size((NARROWEST, 24)).columns, NARROWEST)
    stream = io.StringIO()
    console = Console(
        file=stream, width=columns, force_terminal=colour, color_system="standard" if colour else None,
        no_color=not colour, highlight=False, emoji=False, markup=False, soft_wrap=False,
    )  # fmt: skip
    for deck in outcome.decks:
        _deck(console, deck, symbols)
    _closing(console, outcome)
    return "\n".join(line.rstrip() for line in stream.getvalue().splitlines()) + "\n"


def _deck(console: Console, deck: DeckReview, symbols: bool) -> None:
    console.print(Text(f"{deck.path}: {deck.title}" if deck.title else deck.path, style="bold"))
    if deck.evidence is None:
        console.print(f"  not reviewed: {deck.unreadable}")
    elif deck.evidence.answers:
        _ports(console, deck.evidence, symbols)
        _formulas(console, deck.evidence)
        _remarks(console, deck.evidence)
    else:
        console.print("  no amplifier stage was found" + _blocks(deck.evidence))
    if deck.findings:
        console.print()
    for finding in deck.findings:
        _finding(console, finding)
    console.print()


def _blocks(evidence: Evidence) -> str:
    names = [c.fields[1].key for c in evidence.deck.cards if c.kind == ".subckt" and len(c.fields) > 1]
    if evidence.circuit.elements or not names:
        return ""
    return f": the deck only defines subcircuits; review one with --subckt ({', '.join(names[:8])})"


def _ports(console: Console, evidence: Evidence, symbols: bool) -> None:
    index = quoted(evidence)
    at = engineering(float(evidence.frequency[index]), "Hz")
    low, high = (engineering(float(evidence.frequency[k]), "Hz") for k in (0, -1))
    console.print(f"  impedances at {at}; differences over {low} to {high}")
    table = Table(box=None, padding=(0, 1, 0, 0), pad_edge=False, collapse_padding=True)
    for name in ("stage", "port", "ideal", "analytic", "simulated", "differ", "verdict"):
        table.add_column(name, overflow="fold", justify="left", header_style="underline" if console.is_terminal else "")
    shown = ""
    for answer in evidence.answers:
        port = answer.port
        stage = "" if port.stage == shown else f"{port.stage} {answer.topology}"
        shown = port.stage
        table.add_row(
            stage,
            f"{'in ' if port.side == 'input' else 'out'} {port.name}" + (" (ref)" if port.kind == "reference" else ""),
            _ideal(answer, index, symbols),
            _value(_at(answer.analytic, index), symbols),
            _value(_at(answer.simulated, index), symbols),
            _worst(answer),
            Text(answer.verdict, style=STYLES.get(answer.verdict, "")),
        )
    console.print(table)


def _at(values: object, index: int) -> complex | None:
    return None if values is None else complex(values[index])  # type: ignore[index]  # an array or None


def _value(value: complex | None, symbols: bool) -> str:
    if value is None:
        return "-"
    if not cmath.isfinite(value):
        return "infinite"
    size = engineering(abs(value), "Ohm", symbols=symbols)
    return size if value == 0 else f"{size} {phase(value, symbols=symbols).replace(' deg', 'd')}"


def _ideal(answer: PortAnswer, index: int, symbols: bool) -> str:
    form = answer.closed_form
    if form is None:
        return "-"
    value = complex(form.rule_of_thumb[index])
    return form.rule_text if form.rule_text in ("infinite", "zero") else engineering(abs(value), "Ohm", symbols=symbols)


def _worst(answer: PortAnswer) -> str:
    if answer.difference is None:
        return "-"
    worst = float(answer.difference.max())
    # below a ten thousandth of a per cent a difference is arithmetic
    return "0 %" if worst < 1e-6 else percent(worst)


def _formulas(console: Console, evidence: Evidence) -> None:
    """Each port's closed form, its numbers put in, and how far the ideal value holds."""
    for answer in evidence.answers if len(evidence.answers) <= MOST_FORMULAS else ():
        form = answer.closed_form
        if form is None:
            continue
        console.print()
        letter = "Zin" if answer.port.side == "input" else "Zout"
        console.print(f"  {answer.port.subject}: {letter} = {form.formula}")
        console.print(f"    = {form.numbers}")
        holds = [f"{name} from {engineering(f, 'Hz')}" for name, f in answer.holds_to_hz.items() if f is not None]
        if holds:
            console.print(f"    the ideal value, {form.rule_text}, is off by {', by '.join(holds)}")


def _remarks(console: Console, evidence: Evidence) -> None:
    if evidence.partition.references:
        console.print(f"  taken as still nodes for splitting: {', '.join(evidence.partition.references)}")
    _stand_ins(console, evidence)
    reasons: dict[str, list[str]] = {}
    for answer in evidence.answers:
        if answer.verdict == "unchecked":
            reasons.setdefault(answer.unchecked_because, []).append(answer.port.subject)
    for reason, subjects in reasons.items():
        console.print(f"  not checked: {_few(subjects)}: {reason}")
    if not evidence.band_declared:
        low, high = (engineering(f, "Hz") for f in evidence.band)
        console.print(f"  no band declared (--band or `* xcheck: band LOW HIGH`): looked at {low} to {high}")


STATED = {
    "gain": "gain", "gain_bandwidth_hz": "gain-bandwidth", "input_resistance_ohm": "input resistance",
    "output_resistance_ohm": "output resistance",
}  # fmt: skip


def _stand_ins(console: Console, evidence: Evidence) -> None:
    """Amplifiers whose values are not their own model's, alike ones together, and where each value comes from."""
    alike: dict[str, list[str]] = {}
    for amplifier in evidence.partition.amplifiers:
        values = amplifier.open_loop.values
        sources: dict[str, list[str]] = {}
        for name, words in STATED.items():
            if name in values and values[name].origin in ("data sheet", "assumed", "project"):
                sources.setdefault(values[name].origin, []).append(words)
        sheet = amplifier.part.data_sheet if amplifier.part is not None else "data sheet"
        named = {"data sheet": f"by the {sheet}", "project": "by the project file", "assumed": "assumed"}
        told = "; ".join(f"{', '.join(words)} {named[origin]}" for origin, words in sources.items())
        if told:
            alike.setdefault(told, []).append(amplifier.name)
    for told, names in alike.items():
        console.print(f"  {_few(names)}: {told}")


def _few(names: Iterable[str]) -> str:
    listed = list(names)
    return ", ".join(listed[:6]) + (f" and {len(listed) - 6} more" if len(listed) > 6 else "")


def _finding(console: Console, finding: Finding) -> None:
    line = Text(f"{finding.place}: ")
    line.append(finding.level, style=STYLES[finding.level])
    cause = f" (cause: {finding.cause})" if finding.cause else ""
    line.append(f": {finding.message}{cause} [{finding.rule}]")
    # never wrapped: editors and CI systems read a finding from one line
    console.print(line, soft_wrap=True)
    if finding.advice:
        console.print(f"    {finding.advice}", soft_wrap=True)


def _closing(console: Console, outcome: Outcome) -> None:
    summary, engine = outcome.summary, outcome.engine
    version = f"ngspice {engine.version}" if engine.available else f"not simulated: {engine.reason}"
    if outcome.options.results is not None:
        version = engine.reason
    console.print(
        f"{summary.decks} deck(s), {summary.stages} stage(s): {summary.errors} error(s), "
        f"{summary.warnings} warning(s), {summary.notes} note(s); {version}"
    )
    console.print(CAUTION)
