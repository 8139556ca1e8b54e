"""The list of rules is the one list of names and levels, and no rule falls over odd evidence."""

import ast
from collections.abc import Iterator
from dataclasses import replace
from itertools import product
from pathlib import Path

import numpy as np
import pytest
from evidence_by_hand import DECK, ENGINE, amplifier, answer, evidence, ohms, volts
from hypothesis import given, settings
from hypothesis import strategies as st

import xcheck.rules
from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.finding import LEVELS, Finding
from xcheck.place import Place
from xcheck.reviewed import Evidence
from xcheck.rules import RULES, run_rules
from xcheck.rules.rule import Rule, one_a_card
from xcheck.simulate.types import Simulation
from xcheck.stages import find_amplifiers, split
from xcheck.stages.types import Quantity

PACKAGE = Path(xcheck.rules.__file__).parent.parent
LEVELS_OF = {rule.name: {rule.level, *rule.also} for rule in RULES}


def words(node: ast.expr) -> set[str]:
    """The strings that an argument can be; none where it is handed on from a caller."""
    if isinstance(node, ast.IfExp):
        return words(node.body) | words(node.orelse)
    return {node.value} if isinstance(node, ast.Constant) and isinstance(node.value, str) else set()


def findings_in_the_source() -> Iterator[tuple[str, str, str]]:
    """(file and line, rule, level) of every call whose first two arguments can be a rule and a level."""
    for path in sorted(PACKAGE.rglob("*.py")):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if not isinstance(node, ast.Call) or len(node.args) < 2 or path.parent.name == "report":
                continue
            is_finding = isinstance(node.func, ast.Name) and node.func.id == "Finding"
            says = is_finding or words(node.args[1]) & set(LEVELS)
            if says and not (isinstance(node.func, ast.Name) and node.func.id == "Rule"):
                for rule, level in product(words(node.args[0]), words(node.args[1]) or {""}):
                    yield f"{path.relative_to(PACKAGE)}:{node.lineno}", rule, level


def test_every_finding_uses_a_registered_name_and_its_level() -> None:
    found = list(findings_in_the_source())
    assert len(found) > 40
    for where, rule, level in found:
        assert rule in LEVELS_OF, f"{where}: `{rule}` is not in RULES"
        assert level in LEVELS_OF[rule] | {""}, f"{where}: `{rule}` is no {level}"


def test_every_rule_without_a_function_is_made_by_the_parts_that_read() -> None:
    made = {rule for where, rule, _ in findings_in_the_source() if not where.startswith("rules/")}
    assert {rule.name for rule in RULES if rule.check is None} <= made
    own = {rule for where, rule, _ in findings_in_the_source() if where.startswith("rules/")}
    assert {rule.name for rule in RULES if rule.check is not None} == own


def test_names_are_unique_and_say_one_line() -> None:
    assert len(LEVELS_OF) == len(RULES)
    for rule in RULES:
        assert rule.catches
        assert "\n" not in rule.catches
        assert rule.name == rule.name.lower().replace("_", "-").replace(" ", "-")


def finding(line: int, column: int, rule: str = "syntax", subject: str = "", file: str = "a.cir") -> Finding:
    return Finding(rule, "error", Place(file, line, column, column + 1), "said", subject)


def test_findings_come_in_order_of_place_and_once_a_card() -> None:
    given_order = [
        finding(9, 1),
        finding(2, 8, subject="x2.r1"),
        finding(2, 8, subject="x1.r1"),
        finding(2, 3, "value-missing"),
        finding(2, 8, "value-missing"),
        finding(9, 1),
        finding(1, 1, file="b.cir"),
    ]
    found = one_a_card(given_order)
    assert [(f.place.file, f.place.line, f.place.column, f.rule) for f in found] == [
        ("a.cir", 2, 3, "value-missing"),
        ("a.cir", 2, 8, "syntax"),
        ("a.cir", 2, 8, "value-missing"),
        ("a.cir", 9, 1, "syntax"),
        ("b.cir", 1, 1, "syntax"),
    ]
    assert found[1].subject == "x1.r1"
    assert found[1].message == "said (likewise x2.r1)"


def test_a_rule_that_raises_is_not_swallowed(monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(evidence: Evidence) -> Iterator[Finding]:
        yield finding(1, 1)
        raise ZeroDivisionError

    monkeypatch.setattr(xcheck.rules, "RULES", (*RULES, Rule("syntax", "error", "broken", broken)))
    with pytest.raises(ZeroDivisionError):
        run_rules(evidence())


ODD_OHMS = [ohms(v) for v in (0, 1e4, -5j, np.inf, np.nan, complex(np.nan, np.inf), 1e300, 1e-300)]
ODD_RUNS = [
    None,
    Simulation(ENGINE),
    volts(np.nan),
    volts(np.inf, -np.inf, np.nan),
    Simulation(ENGINE, failure="node . and () [x1.n5] #branch \x00", failed_step="operating point"),
    Simulation(ENGINE, failure="", failed_step="crash", messages=("", "Warning: " + "a" * 10_000)),
]
ODD_VALUES: list[dict[str, Quantity]] = [
    {},
    {"gain": Quantity(None, "deck"), "poles_hz": Quantity((), "deck")},
    {"gain": Quantity(float("nan"), "assumed"), "poles_hz": Quantity((), "deck")},
    {"output_resistance_ohm": Quantity(0.0, "deck"), "input_resistance_ohm": Quantity(None, "deck")},
]


@pytest.mark.parametrize("run", ODD_RUNS)
@pytest.mark.parametrize("values", ODD_VALUES)
def test_no_rule_raises_on_odd_results(run: Simulation | None, values: dict[str, Quantity]) -> None:
    for closed, ratio in product(ODD_OHMS, ODD_OHMS):
        ports = (
            answer(closed=closed, ratio=ratio, simulated=ratio[::-1], rule=closed, verdict="disagrees"),
            answer("out", closed=closed, verdict="disagrees"),
        )
        found = run_rules(evidence(*ports, simulation=run, amplifiers=(amplifier(values),)))
        assert all(f.level in LEVELS_OF[f.rule] for f in found)


@pytest.mark.parametrize(
    "change",
    [
        {"text": "", "amplifiers": ()},
        {"text": "title only", "amplifiers": ()},
        {"text": DECK.replace("xu1", "xq1")},  # the amplifier's name is in no card
        {"text": DECK.replace("r1 in n", "r1 0 0")},
        {"amplifiers": ()},
        {"frequency": np.zeros(0)},
        {"band": (1e9, 1e10)},
        {"amplifiers": (replace(amplifier(), inverting="nowhere", output="n", gain_element="gone"),)},
        {"amplifiers": (replace(amplifier(), inverting="0", output="0"),)},
    ],
)
def test_no_rule_raises_on_evidence_that_does_not_fit_together(change: dict[str, object]) -> None:
    found = run_rules(evidence(answer(ratio=ohms(1e4)), simulation=volts(0.0), **change))  # type: ignore[arg-type]
    assert all(f.level in LEVELS_OF[f.rule] for f in found)


NODES = st.sampled_from(["0", "a", "b", "c", "n1", "out", "in"])
VALUES = st.sampled_from(["1k", "4k7", "1M", "1m", "10F", "1,5k", "{x}", "", "0", "-1", "1e400", "10f", "{1/0}", "x"])
CARDS = st.one_of(
    st.builds("{}{} {} {} {}".format, st.sampled_from("rclvid"), st.integers(1, 9), NODES, NODES, VALUES),
    st.builds("e{} {} {} {} {} 100k".format, st.integers(1, 4), NODES, NODES, NODES, NODES),
    st.builds("x{} {} {} {} amp".format, st.integers(1, 4), NODES, NODES, NODES),
    st.builds(".param x={}".format, VALUES),
    st.builds(".ac dec 10 {} {}".format, VALUES, VALUES),
    st.text(max_size=30),
)
AMP = ".subckt amp p n o\nrid p n 1M\ne1 a 0 p n 100k\nro a o 4R7\n.ends"


@settings(max_examples=150, deadline=None)
@given(st.lists(CARDS, max_size=14))
def test_no_rule_raises_on_any_text(cards: list[str]) -> None:
    deck = read_text("\n".join(["any deck", AMP, *cards]))
    circuit = elaborate(deck)
    amplifiers, findings = find_amplifiers(circuit)
    partition = split(circuit, amplifiers, findings)
    found = run_rules(replace(evidence(), deck=deck, circuit=circuit, partition=partition))
    assert all(f.level in LEVELS_OF[f.rule] for f in found)
    assert list(found) == sorted(found, key=lambda f: (f.place.file, f.place.line, f.place.column, f.rule))
    lines = ["any deck", *AMP.splitlines(), *"\n".join(cards).splitlines(), ""]
    assert all(1 <= f.place.line <= len(lines) + 1 for f in found)
