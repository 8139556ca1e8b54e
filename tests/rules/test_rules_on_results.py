"""Rules that read results: of ngspice, and of the analytic methods among themselves."""

from collections.abc import Iterable
from dataclasses import replace

import numpy as np
import pytest
from evidence_by_hand import AT_AMPLIFIER, AT_INPUT, AT_OUTPUT, ENGINE, HZ, amplifier, answer, evidence, ohms, volts

from xcheck.finding import Finding
from xcheck.options import Options
from xcheck.rules.impedances import impedance_disagrees, methods_disagree, rule_of_thumb_fails
from xcheck.rules.operating_point import not_simulated, operating_point_fails, output_at_rail, simulation_fails
from xcheck.simulate.types import EngineInfo, Simulation


def only(findings: Iterable[Finding]) -> Finding:
    found = list(findings)
    assert len(found) == 1, found
    return found[0]


def where(finding: Finding) -> tuple[int, int]:
    return finding.place.line, finding.place.column


# operating-point-fails


@pytest.mark.parametrize(
    ("words", "line", "subject"),
    [
        ("singular matrix:  check node n", 4 + 1, "n"),
        ("doAnalyses: iteration limit reached; trouble with xu1:e1-instance e.xu1.e1", 11, "xu1.e1"),
        ("gmin stepping failed", 1, ""),
        ("", 1, ""),
    ],
)
def test_a_failed_operating_point_is_said_where_ngspice_says(words: str, line: int, subject: str) -> None:
    run = Simulation(ENGINE, failure=words, failed_step="operating point")
    finding = only(operating_point_fails(evidence(simulation=run)))
    assert (finding.level, finding.place.line, finding.subject) == ("error", line, subject)
    assert (words or "nothing on why") in finding.message


def test_the_words_of_a_failed_operating_point_are_the_first_cause_and_the_last() -> None:
    run = Simulation(
        ENGINE,
        failure="Warning: source stepping failed / Error: timestep too small / op simulation(s) aborted",
        failed_step="operating point",
        messages=("Warning: singular matrix:  check node vin#branch", "Note: Starting dynamic gmin stepping"),
    )
    finding = only(operating_point_fails(evidence(simulation=run)))
    assert finding.message.endswith("says: singular matrix:  check node vin#branch; Error: timestep too small")
    assert (finding.subject, where(finding)) == ("vin", (4, 1))
    endless = Simulation(ENGINE, failure="x" * 10_000, failed_step="operating point")
    assert len(only(operating_point_fails(evidence(simulation=endless))).message) < 400


@pytest.mark.parametrize(
    "run",
    [None, volts(0.0), Simulation(ENGINE, failure="too slow", failed_step="time limit")],
)
def test_an_operating_point_that_was_found_or_not_asked_for(run: Simulation | None) -> None:
    assert not list(operating_point_fails(evidence(simulation=run)))


# simulation-fails


@pytest.mark.parametrize("step", ["load", "ac", "time limit", "memory limit", "crash"])
def test_another_failure_of_the_run(step: str) -> None:
    run = Simulation(ENGINE, failure="its own words", failed_step=step)
    finding = only(simulation_fails(evidence(simulation=run)))
    assert finding.level == "warning"
    assert step in finding.message
    assert "its own words" in finding.message


def test_what_was_measured_before_a_limit_is_said_and_is_no_warning() -> None:
    run = Simulation(
        EngineInfo(available=True), values={"xu1.in": np.ones(1, complex)}, failure="stopped", failed_step="time limit"
    )
    finding = only(simulation_fails(evidence(simulation=run)))
    assert finding.level == "note"
    assert finding.message.startswith("1 of ")


@pytest.mark.parametrize(
    "run",
    [
        None,
        volts(0.0),
        Simulation(ENGINE, failure="singular", failed_step="operating point"),
        Simulation(EngineInfo(available=False, reason="not there"), failure="not there", failed_step="load"),
    ],
)
def test_no_other_failure(run: Simulation | None) -> None:
    assert not list(simulation_fails(evidence(simulation=run)))


# not-simulated


def test_an_absent_engine_is_said_once_with_its_reason() -> None:
    absent = Simulation(EngineInfo(available=False, reason="no libngspice was found"))
    assert "no libngspice was found" in only(not_simulated(evidence(simulation=absent))).message
    finding = only(not_simulated(evidence(simulation=None)))
    assert (finding.level, where(finding)) == ("note", (1, 1))
    assert only(not_simulated(evidence(simulation=None, options=Options(engine="auto")))).advice


def test_an_engine_that_was_there_or_not_wanted_or_had_nothing_to_do() -> None:
    assert not list(not_simulated(evidence(simulation=volts(0.0))))
    assert not list(not_simulated(evidence(simulation=None, options=Options(engine="none"))))
    assert not list(not_simulated(evidence(simulation=None, amplifiers=())))


# output-at-rail


@pytest.mark.parametrize(
    ("run", "words"),
    [
        (volts(4.97), "at its supply `vp`"),
        (volts(-4.96), "at its supply `vn`"),
        (volts(12.0), "beyond its supply `vp`"),
        (volts(0.0, 5.0, 0.0), "at its supply `vn`"),
        (volts(-0.3, 5.0, 0.0), "beyond its supply `vn`"),
    ],
)
def test_an_output_at_its_rail(run: Simulation, words: str) -> None:
    finding = only(output_at_rail(evidence(simulation=run)))
    assert (finding.level, finding.subject, where(finding)) == ("error", "xu1", AT_AMPLIFIER)
    assert (words or "nothing on why") in finding.message


@pytest.mark.parametrize(
    "run",
    [
        None,
        volts(0.0),
        volts(4.9),
        volts(0.1, 5.0, 0.0),
        volts(1.77, 1.8, 0.0),  # 30 mV of headroom: the margin shrinks with the supply
        volts(4.99, -5.0, 5.0),  # reversed supplies are another rule's affair
        Simulation(ENGINE, operating_point={"out": 9.0, "vp": 5.0}),
        replace(volts(9.0), failed_step="operating point", failure="aborted"),
    ],
)
def test_an_output_that_is_free_or_unknown(run: Simulation | None) -> None:
    assert not list(output_at_rail(evidence(simulation=run)))


def test_an_amplifier_without_supplies_has_no_rail() -> None:
    bare = replace(amplifier(), positive_supply=None, negative_supply=None)
    assert not list(output_at_rail(evidence(simulation=volts(100.0), amplifiers=(bare,))))


def test_ground_is_a_supply() -> None:
    single = replace(amplifier(), negative_supply="0")
    assert "`0`" in only(output_at_rail(evidence(simulation=volts(0.01), amplifiers=(single,)))).message


# impedance-disagrees


def test_a_disagreement_names_both_values_at_the_worst_frequency() -> None:
    simulated = ohms(10e3)
    simulated[40] = 11e3  # 10 kHz
    simulated[50] = 10.5e3
    wrong = answer(ratio=ohms(10e3), simulated=simulated, verdict="disagrees")
    finding = only(impedance_disagrees(evidence(wrong, simulation=volts(0.0))))
    assert (finding.level, finding.subject, where(finding)) == ("error", "xu1.in", AT_INPUT)
    assert finding.cause == "unknown"
    for words in ("11.0 kOhm", "10.0 kOhm", "10.0 kHz", "10 %", "1.0 %", "return ratio"):
        assert words in finding.message


def test_a_saturated_amplifier_is_named_as_the_cause() -> None:
    wrong = answer("out", ratio=ohms(0.1), simulated=ohms(50), verdict="disagrees")
    finding = only(impedance_disagrees(evidence(wrong, simulation=volts(4.99))))
    assert (finding.cause, where(finding)) == ("output-at-rail", AT_OUTPUT)
    assert "xu1" in finding.advice


def test_one_finding_for_each_port_that_disagrees() -> None:
    ports = [answer(n, ratio=ohms(1e3), simulated=ohms(2e3), verdict="disagrees") for n in ("in", "out")]
    found = list(impedance_disagrees(evidence(*ports, simulation=volts(0.0))))
    assert [f.subject for f in found] == ["xu1.in", "xu1.out"]


def test_what_agrees_or_was_not_checked_does_not_disagree() -> None:
    right = answer(ratio=ohms(10e3), simulated=ohms(10.05e3), verdict="agrees")
    unchecked = answer("out", ratio=ohms(10e3))
    never = answer("out", ratio=ohms(np.nan), simulated=ohms(1), verdict="disagrees")
    assert not list(impedance_disagrees(evidence(right, unchecked, never, simulation=volts(0.0))))


# methods-disagree


@pytest.mark.parametrize(
    ("closed", "ratio"),
    [
        (ohms(10e3), ohms(10.002e3)),
        (ohms(10e3), ohms(10e3 + 2j)),
        (ohms(np.inf), ohms(1e9)),
    ],
)
def test_two_exact_methods_that_differ(closed: np.ndarray, ratio: np.ndarray) -> None:
    finding = only(methods_disagree(evidence(answer(closed=closed, ratio=ratio))))
    assert (finding.level, where(finding)) == ("error", AT_INPUT)
    assert "fault of xcheck itself" in finding.message


@pytest.mark.parametrize(
    "port",
    [
        answer(closed=ohms(10e3), ratio=ohms(10e3 * (1 + 5e-5))),
        answer(closed=ohms(10e3), ratio=ohms(11e3), exact=False),
        answer(closed=ohms(10e3)),
        answer(ratio=ohms(10e3)),
        answer(closed=ohms(np.inf), ratio=ohms(np.inf)),
        answer(closed=ohms(np.inf), ratio=ohms(3e16)),
        answer(closed=ohms(0), ratio=ohms(1e-14)),
    ],
)
def test_two_methods_that_agree_or_cannot_be_held_together(port: object) -> None:
    assert not list(methods_disagree(evidence(port)))  # type: ignore[arg-type]


# rule-of-thumb-fails (its decks are in cases/)


def rising(corner: float) -> np.ndarray:
    return 10e3 * (1 + 1j * HZ / corner)


def test_a_rule_of_thumb_that_fails_within_the_band() -> None:
    port = answer(closed=rising(1e3), ratio=rising(1e3), rule=ohms(10e3))
    finding = only(rule_of_thumb_fails(evidence(port)))
    assert (finding.level, where(finding)) == ("note", AT_INPUT)
    # |Z - R1| / |Z| = x / sqrt(1 + x^2) with x = f / 1 kHz exceeds 0.1 from 100.5 Hz on: 126 Hz on this grid
    assert "from 126 Hz to 10.0 kHz, within the declared band" in finding.message
    undeclared = only(rule_of_thumb_fails(evidence(port, band_declared=False)))
    assert "none is declared" in undeclared.message


@pytest.mark.parametrize(
    ("port", "band"),
    [
        (answer(closed=rising(1e3), ratio=rising(1e3), rule=ohms(10e3)), (10.0, 100.0)),
        (answer(closed=rising(1e6), ratio=rising(1e6), rule=ohms(10e3)), (10.0, 10e3)),
        (answer(closed=rising(1e3), ratio=rising(1e3), rule=ohms(np.inf)), (10.0, 10e3)),
        (answer(closed=rising(1e3), ratio=rising(1e3), rule=ohms(0)), (10.0, 10e3)),
        (answer(ratio=rising(1e3)), (10.0, 10e3)),
        (answer(closed=ohms(np.nan), rule=ohms(10e3)), (10.0, 10e3)),
        (answer(closed=rising(1e3), rule=ohms(10e3)), (2e6, 3e6)),
    ],
)
def test_a_rule_of_thumb_that_holds_in_the_band_or_is_a_limit(port: object, band: tuple[float, float]) -> None:
    assert not list(rule_of_thumb_fails(evidence(port, band=band)))  # type: ignore[arg-type]
