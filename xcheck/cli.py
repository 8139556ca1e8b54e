"""The command line: options, one call, an exit status. Computes nothing.

Exit status: 0 nothing at or above the fail level; 1 something is; 2 the deck can't be read or the call is wrong.
"""

import os
import re
import sys
from collections.abc import Callable
from contextlib import suppress
from pathlib import Path
from typing import Any, NoReturn

import click

from xcheck.errors import CallError, OutputError, XcheckError
from xcheck.version import __version__

LEVELS = ("note", "warning", "error")


class Frequency(click.ParamType[float]):
    """A frequency as a deck has it: 20, 1k, 2.2meg."""

    name = "FREQ"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> float:
        from xcheck.deck.numbers import read_number

        if isinstance(value, float):
            return value
        number = read_number(str(value))
        if number is None or not 0 < number.value < 1e18 or re.search(r"\d", number.rest):
            self.fail(f"`{value}` is no frequency above zero; write it as in a deck: 20, 1k, 2.2meg", param, ctx)
        return number.value


class Band(click.ParamType[tuple[float, float]]):
    """LOW:HIGH in Hz."""

    name = "LOW:HIGH"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[float, float]:
        if isinstance(value, tuple):
            return value
        low, colon, high = str(value).partition(":")
        if not colon:
            self.fail(f"`{value}` is no band; write it as LOW:HIGH, for example 20:20k", param, ctx)
        ends = (Frequency().convert(low, param, ctx), Frequency().convert(high, param, ctx))
        if ends[0] >= ends[1]:
            self.fail(f"`{value}`: the lower end must be below the upper one", param, ctx)
        return ends


class Tolerance(click.ParamType[float]):
    """A relative difference: 1% or 0.01."""

    name = "PERCENT"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> float:
        if isinstance(value, float):
            return value
        text = str(value).strip()
        try:
            number = float(text.removesuffix("%")) / (100 if text.endswith("%") else 1)
        except ValueError:
            number = -1.0
        if not 0 < number < 10:
            self.fail(f"`{value}` is no tolerance; write it as 1% or 0.01", param, ctx)
        return number


class Group(click.Group):
    """Turns the package's own errors into one line on standard error and exit status 2."""

    def invoke(self, ctx: click.Context) -> Any:
        try:
            return super().invoke(ctx)
        except XcheckError as error:
            _refuse(str(error), error.exit_status)
        except BrokenPipeError:
            # the reader of our output went away; nothing is left to say
            os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
            sys.exit(0)


def _refuse(message: str, status: int = 2) -> NoReturn:
    click.echo(f"xcheck: {message}", err=True)
    sys.exit(status)


DECK = click.argument("deck", type=click.Path(path_type=Path))


def _shared(command: Callable[..., Any]) -> Callable[..., Any]:
    """Options of all commands that read a deck."""
    for option in (
        click.option("--include-dir", "include_dirs", type=click.Path(path_type=Path, file_okay=False, exists=True),
                     multiple=True, help="Another folder that includes may be read from (repeatable)."),
        click.option("--subckt", metavar="NAME", help="Look at one subcircuit definition, its pins as ports."),
        click.option("--port", "ports", metavar="NODE", multiple=True, help="Measure at this node too (repeatable)."),
        click.option("--band", type=Band(), help="Where the design is used; else a deck's `* xcheck: band LOW HIGH`."),
    ):  # fmt: skip
        command = option(command)
    return command


ENGINE = click.option(
    "--engine", type=click.Choice(["auto", "ngspice", "none"]), default="auto", show_default=True,
    help="auto: simulate when ngspice is there; ngspice: it must be there; none: do not simulate.",
)  # fmt: skip


@click.group(cls=Group, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="xcheck", message="%(prog)s %(version)s")
def main() -> None:
    """Checks the input and output impedance of the op-amp feedback stages in SPICE decks: by hand-calculation formula,
    by return ratio, and by ngspice in the deck as it stands.
    """


@main.command()
@click.argument("decks", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--at", "spots", type=Frequency(), multiple=True, help="A frequency to report at (repeatable).")
@click.option("--tolerance", type=Tolerance(), help="Analytic against simulated; else the project file's, else 1%.")
@click.option("--format", "form", type=click.Choice(["text", "json"]), default="text", show_default=True)
@click.option("--out", type=click.Path(path_type=Path), help="Write the report to this file instead.")
@click.option(
    "--fail-on", type=click.Choice([*LEVELS, "never"]), default="error", show_default=True,
    help="Exit with 1 where a finding of this level or above is made.",
)  # fmt: skip
@click.option(
    "--results",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="Take simulated values from this raw file of the deck; run no ngspice.",
)
@ENGINE
@_shared
def review(decks: tuple[Path, ...], form: str, out: Path | None, fail_on: str, **settings: Any) -> None:
    """Review decks, or all decks in folders: every stage, every finding.

    \b
    Examples:
      xcheck review board/preamp.cir
      xcheck review --band 20:20k --at 1k --fail-on warning board/
      xcheck review --format json --out review.json board/preamp.cir
    """
    from xcheck.reviewing import review as run

    outcome = run(decks, options=_options(settings), progress=_progress())
    _write(_rendered(outcome, form, out), out)
    if fail_on != "never" and any(LEVELS.index(f.level) >= LEVELS.index(fail_on) for f in outcome.findings):
        sys.exit(1)
    if any(deck.unreadable for deck in outcome.decks):
        sys.exit(2)


@main.command()
@DECK
@_shared
def stages(deck: Path, **settings: Any) -> None:
    """Show the stages of a deck and the evidence for its amplifiers; no impedances."""
    from xcheck.report import listing

    click.echo(listing.stages(_evidence(deck, settings)), nl=False)


@main.command()
@click.argument("deck", required=False, type=click.Path(path_type=Path))
@click.option("--write-model", "part", metavar="PART", help="Print a subcircuit with a part's values instead.")
@click.option("--railed", is_flag=True, help="With --write-model: its output is limited to the supplies.")
@ENGINE
@_shared
def amplifiers(deck: Path | None, part: str | None, railed: bool, **settings: Any) -> None:
    """Show the open-loop values of every amplifier: by data sheet, as modelled, and, of a nonlinear model, as measured
    by ngspice at the deck's operating point.

    \b
    Examples:
      xcheck amplifiers board/preamp.cir
      xcheck amplifiers --write-model tl072 > models/tl072.lib
    """
    if part is not None:
        _write(_model_card(part, deck, railed), None)
        return
    if deck is None:
        raise CallError("a deck is wanted, or --write-model PART")
    from xcheck.report.amplifiers import amplifiers as table

    click.echo(table(_evidence(deck, {**settings, "ports_measured": False})), nl=False)


def _model_card(name: str, deck: Path | None, railed: bool) -> str:
    from difflib import get_close_matches

    from xcheck.parts.catalogue import catalogue
    from xcheck.project import Project, find_project, read_project
    from xcheck.report.model_card import model_card

    file = find_project(deck or Path("deck.cir"))
    project = Project() if file is None else read_project(file)
    part = project.part_of(name)
    if part is None:
        near = get_close_matches(name.lower(), [*project.parts, *catalogue()], n=3)
        raise CallError(f"no data sheet of `{name}` is known" + (f"; did you mean {', '.join(near)}?" if near else ""))
    if part.kind != "voltage-feedback":
        raise CallError(f"`{name}` is a {part.kind} part; the model would be that of a voltage-feedback op-amp")
    return model_card(part, railed=railed)


@main.command()
@DECK
@click.option("--stage", required=True, help="The stage, as `xcheck stages` names it.")
@click.option("--port", "port_name", required=True, help="The port: the name of its node.")
@click.option("--side", type=click.Choice(["input", "output"]), help="Where a node is a port on both sides.")
@click.option("--out", type=click.Path(path_type=Path), help="A .csv, .svg or .png file; else CSV is printed.")
@click.option("--include-dir", "include_dirs", type=click.Path(path_type=Path, file_okay=False), multiple=True)
@click.option("--subckt", metavar="NAME", help="Look at one subcircuit definition, its pins as ports.")
@ENGINE
def sweep(deck: Path, stage: str, port_name: str, side: str | None, out: Path | None, **settings: Any) -> None:
    """Show one port over frequency: CSV, or a picture of magnitude and phase by every method.

    \b
    Example:
      xcheck sweep board/preamp.cir --stage xu1 --port in --out zin.svg
    """
    from xcheck.report import sweep as report
    from xcheck.reviewing import review as run

    outcome = run(deck, options=_options(settings), progress=_progress())
    answer = outcome.decks[0].port(stage, port_name, side)
    ending = out.suffix.lower() if out is not None else ".csv"
    if ending == ".csv":
        _write(report.csv(answer), out)
    elif ending in (".svg", ".png") and out is not None:
        report.picture(answer, out)
    else:
        raise CallError(f"`{out}`: the file's ending must be .csv, .svg or .png")


@main.command()
def engine() -> None:
    """Show which ngspice was found, its version, and what it can do."""
    from xcheck.simulate import find_engine

    found = find_engine()
    if not found.available:
        _refuse(f"ngspice is not available: {found.reason}", 1)
    click.echo(f"{found.name} {found.version}")
    click.echo(f"library: {found.library}")
    click.echo(f"code models (POLY sources, A devices): {'yes' if found.code_models else 'no'}")


def _options(settings: dict[str, Any]) -> Any:
    from xcheck.options import Options

    return Options(**settings)


def _evidence(deck: Path, settings: dict[str, Any]) -> Any:
    from xcheck.errors import DeckUnreadable
    from xcheck.reviewing import review as run

    outcome = run(deck, options=_options({"engine": "none", **settings}))
    evidence = outcome.decks[0].evidence
    if evidence is None:
        raise DeckUnreadable(outcome.decks[0].unreadable)
    for finding in outcome.decks[0].findings:
        if finding.level == "error":
            click.echo(f"{finding.place}: {finding.level}: {finding.message} [{finding.rule}]", err=True)
    return evidence


def _rendered(outcome: Any, form: str, out: Path | None) -> str:
    if form == "json":
        from xcheck.report import document

        return document.render(outcome)
    from xcheck.report import text

    terminal = out is None and sys.stdout.isatty()
    colour = terminal and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"
    encoding = (sys.stdout.encoding or "ascii").lower() if out is None else "utf-8"
    return text.render(outcome, colour=colour, width=None if terminal else 100, symbols=encoding.startswith("utf"))


def _write(text: str, out: Path | None) -> None:
    if out is None:
        click.echo(text, nl=False)
        return
    # beside the target and renamed, so that a report is there whole or not at all
    beside = out.parent / (out.name + ".part")
    try:
        beside.write_text(text, encoding="utf-8")
        beside.replace(out)
    except (OSError, ValueError) as error:
        with suppress(OSError):
            beside.unlink(missing_ok=True)
        raise OutputError(f"{out} cannot be written: {getattr(error, 'strerror', None) or error}") from error


def _progress() -> Any:
    """A progress bar on standard error, when that is a terminal and more than a few ports are measured."""
    if not sys.stderr.isatty():
        return None

    def tell(path: str, done: int, total: int) -> None:
        if total > 8:
            width = 30
            filled = "#" * (width * done // total)
            click.echo(f"\r{filled:<{width}} {done}/{total} ports of {path}", err=True, nl=done == total)

    return tell
