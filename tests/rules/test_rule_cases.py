"""Every rule on decks on which it must speak, and on near misses on which it must not."""

from collections import Counter

import pytest
from rule_cases import Case, all_cases

from xcheck.deck.reader import read_text
from xcheck.options import Options
from xcheck.reviewing import analyse
from xcheck.rules import RULES
from xcheck.simulate.types import EngineInfo

WITHOUT_ENGINE = Options(engine="none")
BY_HAND = {
    "operating-point-fails",
    "simulation-fails",
    "not-simulated",
    "output-at-rail",
    "impedance-disagrees",
    "methods-disagree",
    "input-outside-common-mode",
    "output-current-exceeded",
}
"""Rules that read what ngspice or two methods say: in test_rules_on_results.py and test_rules_at_the_point.py."""

ALL = all_cases()


@pytest.mark.parametrize("case", ALL, ids=str)
def test_case(case: Case) -> None:
    deck = read_text(case.text, case.path)
    _, findings = analyse(deck, WITHOUT_ENGINE, EngineInfo(available=False, reason="not asked for"))
    said = [
        (f.rule, f.level, f.place.line, f.place.column) for f in findings if f.level != "note" or f.rule == case.rule
    ]
    assert sorted(said) == sorted(case.expected), [f"{f.place} {f.rule}: {f.message}" for f in findings]
    assert all(f.place.file == case.path for f in findings if f.rule == case.rule)
    assert all(f.message and f.advice for f in findings if f.rule == case.rule)


def test_every_rule_has_decks() -> None:
    checked = {rule.name for rule in RULES if rule.check is not None}
    assert {case.rule for case in ALL} | BY_HAND == checked
    assert not {case.rule for case in ALL} & BY_HAND
    counts = Counter((case.rule, case.kind == "silent") for case in ALL)
    for rule in {case.rule for case in ALL}:
        assert counts[rule, False] >= 3, f"{rule}: at least three decks on which it speaks"
        assert counts[rule, True] >= 3, f"{rule}: at least three near misses"
