"""A review with results that are already there."""

from pathlib import Path

import pytest

from tests.results.test_formed import INVERTING, formed_of
from xcheck.errors import CallError
from xcheck.options import Options
from xcheck.report.document import document
from xcheck.report.text import render
from xcheck.reviewing import review

RAILED = """.subckt lm741 p n o
rid p n 2meg
b1 a 0 v=10*tanh(2e4*v(p,n))
rp a b 1k
cp b 0 15.9u
e2 c 0 b 0 1
ro c o 75
.ends"""


@pytest.mark.engine
def test_values_come_from_the_file(tmp_path: Path) -> None:
    formed_of(tmp_path, "v1 in 0 ac 1", INVERTING)
    options = Options(results=tmp_path / "r.raw")
    answer = review(tmp_path / "d.cir", options=options).decks[0].port("xu1", "in")
    assert answer.verdict == "agrees"
    assert len(answer.frequency) == 31
    (tmp_path / "d.cir").write_text((tmp_path / "d.cir").read_text().replace("4.7k", "5.6k"))
    other = review(tmp_path / "d.cir", options=options).decks[0]
    assert other.port("xu1", "in").verdict == "disagrees"
    assert "not formed" in other.port("xu1", "out").unchecked_because
    with pytest.raises(CallError, match="one deck"):
        review([tmp_path / "d.cir", tmp_path / "e.cir"], options=options)


@pytest.mark.engine
def test_a_result_of_another_deck_is_the_cause_that_is_named(tmp_path: Path) -> None:
    formed_of(tmp_path, "v1 in 0 ac 1", INVERTING)
    deck = tmp_path / "d.cir"
    deck.write_text(deck.read_text().replace("4.7k", "5.6k").replace("Level probe, test", "Level probe, second try"))
    outcome = review(deck, options=Options(results=tmp_path / "r.raw"))
    (finding,) = [f for f in outcome.findings if f.rule == "impedance-disagrees"]
    assert finding.cause == "result-from-another-deck"
    assert "its title is `level probe, test`" in finding.advice.lower()
    assert document(outcome)["decks"][0]["simulated_from"] == str(tmp_path / "r.raw")
    assert f"simulated values from {tmp_path / 'r.raw'}" in render(outcome, width=200).replace("\n", " ")


@pytest.mark.engine
def test_a_nonlinear_model_without_an_operating_point_is_not_held_against_the_file(tmp_path: Path) -> None:
    formed_of(tmp_path, "v1 in 0 ac 1", INVERTING.replace("oa", "lm741") + "\n" + RAILED)
    options = Options(results=tmp_path / "r.raw", engine="none")
    answer = review(tmp_path / "d.cir", options=options).decks[0].port("xu1", "in")
    assert answer.verdict == "unchecked"
    assert "data sheet" in answer.unchecked_because
    agreed = review(tmp_path / "d.cir", options=Options(results=tmp_path / "r.raw"))
    assert agreed.decks[0].port("xu1", "in").verdict == "agrees"


def test_a_file_and_an_engine_asked_for_by_name_exclude_each_other(tmp_path: Path) -> None:
    (tmp_path / "d.cir").write_text("t\nr1 a 0 1k\n.end\n")
    with pytest.raises(CallError, match="--engine ngspice"):
        review(tmp_path / "d.cir", options=Options(results=tmp_path / "r.raw", engine="ngspice"))
