"""Every deck in tests/decks states in its own comments what a review must say of it.

`* expect stage NAME TOPOLOGY`              a stage of that name; `*` for any topology
`* expect port SUBJECT SIDE [KIND] [RULE]`  a port; RULE: 'infinite', 'zero' or the ohms at mid band
`* expect reference NODE`                   a node listed as a reference or rail
`* expect warning RULE`, `* expect error RULE`   a finding that must be there; no other one may be

Besides, the simulated values must agree with the return ratio, and the closed form, where it is exact,
with both, within 1e-6 of the value on the whole grid: the decks are linear, so nothing but arithmetic
parts the methods. Those in `nonlinear/` are linearised at ngspice's operating point: 1e-3, since ngspice reports small
signal values of each device but not all of them (a bipolar transistor's charge that moves with the collector).
"""

from pathlib import Path

import numpy as np
import pytest

from xcheck.deck.numbers import read_number
from xcheck.options import Options
from xcheck.reviewed import DeckReview, Evidence
from xcheck.reviewing import review

HERE = Path(__file__).parent / "decks"
DECKS = sorted((*HERE.glob("*.cir"), *HERE.glob("nonlinear/*.cir")))
TOLERANCE = {"decks": 1e-6, "nonlinear": 1e-3}


def expectations(path: Path) -> list[list[str]]:
    lines = path.read_text().splitlines()
    found = [line.split()[2:] for line in lines if line.startswith("* expect ")]
    assert found, f"{path.name} expects nothing"
    return found


@pytest.fixture(scope="module", params=DECKS, ids=lambda p: p.stem)
def reviewed(request: pytest.FixtureRequest) -> tuple[Path, DeckReview]:
    path: Path = request.param
    wide = tuple(float(f) for f in np.logspace(0, 7, 15))
    return path, review([path], options=Options(engine="ngspice", spots=wide)).decks[0]


def evidence_of(deck: DeckReview) -> Evidence:
    assert deck.evidence is not None, deck.unreadable
    return deck.evidence


def rule_of_thumb(evidence: Evidence, subject: str) -> float:
    answer = evidence.by_subject[subject]
    assert answer.closed_form is not None, f"{subject} has no closed form"
    middle = np.argmin(np.abs(np.log(answer.frequency / np.sqrt(np.prod(evidence.band)))))
    return float(abs(answer.closed_form.rule_of_thumb[middle]))


@pytest.mark.engine
def test_says_what_the_deck_expects(reviewed: tuple[Path, DeckReview]) -> None:
    path, deck = reviewed
    evidence = evidence_of(deck)
    topologies = {name: r.topology for name, r in evidence.recognised.items()}
    allowed = set()
    for kind, *rest in expectations(path):
        match kind, rest:
            case "stage", [name, topology]:
                assert name in topologies, topologies
                assert topology in ("*", topologies[name]), evidence.recognised[name]
            case "port", [subject, side, *more]:
                assert subject in evidence.by_subject, sorted(evidence.by_subject)
                port = evidence.by_subject[subject].port
                assert port.side == side
                if more and side == "input":
                    assert port.kind == more.pop(0)
                if more:
                    rule = rule_of_thumb(evidence, subject)
                    number = read_number(more[0])
                    expected = {"infinite": np.inf, "zero": 0.0}.get(more[0], number and number.value)
                    assert rule == pytest.approx(expected, rel=1e-6)
            case "reference", [node]:
                assert node in evidence.partition.references
            case (("warning" | "error"), [rule_name]):
                assert (kind, rule_name) in {(f.level, f.rule) for f in deck.findings}
                allowed.add(rule_name)
            case _:
                pytest.fail(f"{path.name}: cannot read the expectation {kind} {rest}")
    counted = [name for name in topologies if not any(e[:2] == ["stage", name] for e in expectations(path))]
    assert not counted, f"stages that the deck does not mention: {counted}"
    alarms = [f for f in deck.findings if f.level != "note" and f.rule not in allowed]
    assert not alarms


@pytest.mark.engine
def test_methods_agree(reviewed: tuple[Path, DeckReview]) -> None:
    path, deck = reviewed
    tolerance = TOLERANCE[path.parent.name]
    evidence = evidence_of(deck)
    assert evidence.answers
    for answer in evidence.answers:
        subject = answer.port.subject
        assert answer.return_ratio is not None, (subject, answer.unchecked_because, answer.notes)
        assert answer.simulated is not None, (subject, answer.unchecked_because, answer.notes)
        road = answer.return_ratio.impedance
        assert np.max(np.abs(answer.simulated - road) / np.abs(road)) < tolerance, subject
        if answer.closed_form is not None and answer.closed_form.exact:
            assert np.max(np.abs(answer.closed_form.value - road) / np.abs(road)) < tolerance, subject
        assert answer.verdict == "agrees"
