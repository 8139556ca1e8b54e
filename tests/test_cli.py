"""The command line as a user meets it: standard output, standard error and exit status apart."""

import json
import subprocess
import sys
from pathlib import Path

import jsonschema
import pytest
from click.testing import CliRunner, Result

import xcheck
from xcheck.cli import main
from xcheck.report.document import SCHEMA

NETLISTS = Path(__file__).parent.parent / "netlists"
CLEAN = str(NETLISTS / "well_level.cir")
FAULTY = str(NETLISTS / "mistakes" / "value_codes.cir")


def run(*arguments: str) -> Result:
    return CliRunner().invoke(main, list(arguments))


def test_version_and_help() -> None:
    assert run("--version").stdout.strip() == f"xcheck {xcheck.__version__}"
    for command in ("review", "stages", "sweep", "amplifiers", "engine"):
        done = run(command, "--help")
        assert done.exit_code == 0
        assert command in done.stdout


def test_a_clean_deck_ends_with_zero_and_a_faulty_one_with_one() -> None:
    assert run("review", "--engine", "none", CLEAN).exit_code == 0
    done = run("review", "--engine", "none", FAULTY)
    assert done.exit_code == 1
    assert f"{FAULTY}:7:9: error: " in done.stdout
    assert run("review", "--engine", "none", "--fail-on", "never", FAULTY).exit_code == 0


@pytest.mark.parametrize(
    ("arguments", "words"),
    [(["review", "nowhere.cir"], "nowhere.cir cannot be read"), (["review", "--band", "20", CLEAN], "LOW:HIGH"),
     (["review", "--band", "2k:20", CLEAN], "lower end"), (["review", "--at", "0", CLEAN], "frequency"),
     (["review", "--tolerance", "x", CLEAN], "tolerance"), (["review", "--subckt", "gp_am", CLEAN], "gp_amp"),
     (["review", "--port", "nothere", CLEAN], "nothere"),
     (["sweep", CLEAN, "--stage", "xu9", "--port", "a", "--engine", "none"], "xu1"),
     (["sweep", CLEAN, "--stage", "xu1", "--port", "b", "--engine", "none"], "buf"),
     (["sweep", CLEAN, "--stage", "xu1", "--port", "a", "--engine", "none", "--out", "z.pdf"], ".svg")],
)  # fmt: skip
def test_a_wrong_call_is_told_in_one_line(arguments: list[str], words: str) -> None:
    done = run(*arguments)
    assert done.exit_code == 2
    assert words in done.stderr
    assert "Traceback" not in done.stderr
    assert done.stdout == ""


@pytest.mark.engine
def test_json_follows_its_schema_and_tells_the_same_story() -> None:
    done = run(
        "review",
        "--format",
        "json",
        "--at",
        "1k",
        "--fail-on",
        "never",
        CLEAN,
        FAULTY,
        str(NETLISTS / "lantern_light.cir"),
    )
    assert done.exit_code == 0
    found = json.loads(done.stdout)
    jsonschema.validate(found, json.loads(SCHEMA.read_text()))
    assert found["format"] == 1
    assert found["engine"]["available"]
    port = found["decks"][0]["stages"][1]["ports"][0]
    assert (port["name"], port["side"], port["rule_of_thumb_ohm"], port["verdict"]) == ("buf", "input", None, "agrees")
    (spot,) = port["spots"]
    assert spot["frequency_hz"] == 1000.0
    assert spot["simulated"] == pytest.approx(spot["closed_form"], rel=1e-6)
    assert spot["return_ratio"] == pytest.approx(spot["closed_form"], rel=1e-6)
    assert found["decks"][2]["amplifiers"][0]["open_loop"]["gain"] == {"value": pytest.approx(1e6), "from": "deck"}
    outcome = xcheck.review([CLEAN, FAULTY, NETLISTS / "lantern_light.cir"])
    assert found["summary"]["errors"] == outcome.summary.errors == 3
    assert found["summary"]["stages"] == outcome.summary.stages
    listed = [(f["rule"], f["line"]) for d in found["decks"] for f in d["findings"]]
    assert listed == [(f.rule, f.place.line) for f in outcome.findings]


@pytest.mark.engine
def test_the_report_fits_eighty_columns_without_losing_names() -> None:
    from xcheck.report import text

    outcome = xcheck.review(NETLISTS / "pressure_bridge.cir")
    shown = text.render(outcome, width=80)
    assert max(len(line) for line in shown.splitlines()) <= 80
    joined = " ".join(shown.split())
    for answer in outcome.decks[0].evidence.answers:  # type: ignore[union-attr]
        assert answer.port.name in joined
    assert shown.isascii()
    assert "qualified people" in joined
    assert "\x1b" not in shown
    assert "\x1b" in text.render(outcome, colour=True, width=80)


@pytest.mark.engine
def test_sweep_writes_csv_and_pictures(tmp_path: Path) -> None:
    import io

    import pandas as pd

    arguments = ["sweep", CLEAN, "--stage", "xu2", "--port", "level"]
    frame = pd.read_csv(io.StringIO(run(*arguments).stdout))
    assert len(frame) == 71
    assert (frame["difference"] < 1e-6).all()
    for ending, begins in (("svg", b"<?xml"), ("png", b"\x89PNG")):
        target = tmp_path / f"z.{ending}"
        assert run(*arguments, "--out", str(target)).exit_code == 0
        assert target.read_bytes().startswith(begins)
    done = run(*arguments, "--out", str(tmp_path / "none" / "z.png"))
    assert done.exit_code == 2
    assert "cannot be written" in done.stderr


@pytest.mark.engine
def test_the_table_has_a_row_a_port_and_frequency() -> None:
    outcome = xcheck.review(CLEAN)
    table = outcome.table()
    assert len(table) == 5 * 71
    assert set(table["topology"]) == {"voltage-follower", "non-inverting"}
    assert (table["difference"] < 1e-6).all()
    assert table["return_ratio"].dtype == complex


@pytest.mark.engine
def test_other_commands_speak() -> None:
    assert run("engine").stdout.startswith("ngspice ")
    assert "structure: gain 2e+05" in run("stages", CLEAN).stdout
    assert "gain-bandwidth" in run("amplifiers", CLEAN).stdout


def test_a_block_without_sources_by_its_name() -> None:
    done = run("review", "--engine", "auto", "--subckt", "logger_input", str(NETLISTS / "logger_block.cir"))
    assert done.exit_code == 0, done.stdout + done.stderr
    assert "difference" in done.stdout


@pytest.mark.engine
def test_clean_decks_raise_no_alarm_and_planted_mistakes_are_found() -> None:
    clean = xcheck.review(sorted(NETLISTS.glob("*.cir")))
    assert [f for f in clean.findings if f.level != "note"] == []
    expected = {
        "megohm": {"milli-for-mega"}, "value_codes": {"digit-after-suffix", "comma-in-number"},
        "swapped_inputs": {"feedback-positive"}, "ideal_source": {"amplifier-ideal"},
        "missing_model": {"undefined-model", "undefined-parameter"}, "at_the_rail": {"output-at-rail"},
        "no_bias_path": {"input-without-dc-path", "feedback-missing"},
    }  # fmt: skip
    for name, rules in expected.items():
        found = xcheck.review(NETLISTS / "mistakes" / f"{name}.cir")
        assert rules <= {f.rule for f in found.findings if f.level != "note"}, name


def test_start_up_loads_only_what_is_used() -> None:
    script = (
        "import sys\nfrom xcheck.reviewing import review\nfrom xcheck.options import Options\n"
        f"review({CLEAN!r}, options=Options(engine='none'))\nprint(*sys.modules)"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    loaded = {name.partition(".")[0] for name in done.stdout.split()}
    assert not loaded & {"pandas", "PySpice", "matplotlib", "sympy", "cffi"}
