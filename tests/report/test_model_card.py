"""A data sheet written as a subcircuit gives its values back when ngspice and the reader measure it."""

import subprocess
import sys
from pathlib import Path

import pytest

from xcheck.deck.reader import read_text
from xcheck.options import Options
from xcheck.parts.catalogue import find
from xcheck.report.amplifiers import amplifiers
from xcheck.report.model_card import model_card
from xcheck.reviewing import analyse
from xcheck.simulate import find_engine

AROUND = "vp vp 0 {v}\nvn vn 0 -{v}\nvin in 0 {dc} ac 1\nr1 in m 10k\nr2 m out 47k\nrl out 0 10k\n.ac dec 10 1 1meg\n"
VALUES = ("gain", "gain_bandwidth_hz", "input_resistance_ohm", "output_resistance_ohm")


@pytest.mark.engine
@pytest.mark.parametrize("railed", [False, True])
@pytest.mark.parametrize("name", ["ua741", "tl072", "op07", "ne5534", "mcp6001"])
def test_what_is_written_is_measured_back(name: str, railed: bool) -> None:
    part = find(name)
    assert part is not None
    around = AROUND.format(v=2.5 if name == "mcp6001" else 12, dc=0)
    text = f"back\n{model_card(part, railed=railed)}{around}xu1 0 m vp vn out {part.name}\n.end\n"
    evidence, findings = analyse(read_text(text), Options(), find_engine())
    assert not [f for f in findings if f.level != "note"], [f.message for f in findings]
    (amplifier,) = evidence.partition.amplifiers
    found = amplifier.open_loop.values
    for key in VALUES:
        if key in part.values:
            assert found[key].value == pytest.approx(part.values[key], rel=0.02), key
            assert found[key].origin == ("measured" if railed else "deck")
    assert all(answer.verdict == "agrees" for answer in evidence.answers)
    table = amplifiers(evidence)
    assert part.data_sheet in table
    assert ("fits from 1 Hz to unity gain" in table) is railed


@pytest.mark.engine
def test_a_railed_model_stays_between_its_supplies() -> None:
    part = find("ua741")
    assert part is not None
    text = f"rail\n{model_card(part, railed=True)}{AROUND.format(v=12, dc=5)}xu1 0 m vp vn out ua741\n.end\n"
    evidence, _ = analyse(read_text(text), Options(), find_engine())
    assert evidence.simulation is not None
    assert -12.0 < evidence.simulation.operating_point["out"] < -11.0


def test_what_is_not_known_is_said_in_the_card() -> None:
    part = find("lm358")
    assert part is not None
    assert "input_resistance_ohm" not in part.values
    assert "* the differential resistance is not known and assumed: 1e+06" in model_card(part)


@pytest.mark.parametrize(
    ("arguments", "status", "said"),
    [
        (["--write-model", "LM741CN"], 0, ".subckt lm741 inp inn vcc vee out"),
        (["--write-model", "lm74"], 2, "did you mean"),
        (["--write-model", "lm311"], 2, "comparator"),
        ([], 2, "a deck is wanted"),
    ],
)
def test_on_the_command_line(arguments: list[str], status: int, said: str, tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "xcheck", "amplifiers", *arguments],
        capture_output=True, text=True, cwd=tmp_path, check=False,
    )  # fmt: skip
    assert done.returncode == status, done.stderr
    assert said in done.stdout + done.stderr
