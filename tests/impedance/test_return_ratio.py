"""The return ratio against circuits worked by hand from published formulas.

Blackman: R. B. Blackman, Effect of feedback on impedance, Bell Syst. Tech. J. 22 (1943).
Gray, Hurst, Lewis, Meyer: Analysis and Design of Analog Integrated Circuits, on the return ratio.
Sedra and Smith: Microelectronic Circuits, the inverting stage with finite gain. All from memory.
"""

import numpy as np
import pytest
from partitions_by_hand import PortAt, amplifier, elements_of, partition, partition_of

from xcheck.impedance.return_ratio import loop_gains, return_ratios
from xcheck.impedance.types import ReturnRatio
from xcheck.stages.types import Partition

FREQUENCY = np.array([1.0, 1e3, 1e6])


def ratio_of(parted: Partition, subject: str, frequency: np.ndarray = FREQUENCY) -> ReturnRatio:
    answer = return_ratios(parted, frequency)[subject]
    assert isinstance(answer, ReturnRatio), answer
    assert answer.impedance.shape == frequency.shape
    return answer


def near(value: object, rel: float = 1e-12) -> object:
    return pytest.approx(value, rel=rel)


def inverting(gain: float, rid: float = 2e6, ro: float = 75.0, r1: float = 1e4, rf: float = 1e5) -> Partition:
    """R1 from a source to the inverting input, Rf back from the output; the load is Rl at the output."""
    text = f"""
        v1 in 0
        r1 in m {r1}
        rf m out {rf}
        rid m 0 {rid}
        e1 e 0 0 m {gain}
        ro e out {ro}
        rl out 0 2e3
    """
    ports = [PortAt("in", "input", ("r1",)), PortAt("out", "output", ("ro", "rf"))]
    return partition(text, {"u1": ([amplifier("e1", ("0", "m", "out"), inner=("rid", "ro"))], ports)}, ["in"])


@pytest.mark.parametrize("gain", [1.0, 1e2, 1e5, 1e8, 1e10])
def test_inverting_stage_with_finite_gain(gain: float) -> None:
    """Zin = R1 + 1/(1/Rid + (1 + A')/(Rf + Ro')) (Sedra and Smith, extended by Rid and a load), and at the
    output Ro || (Rf + R1 || Rid) / (1 + T), with T the loop gain of the unloaded output."""
    rid, ro, r1, rf, rl = 2e6, 75.0, 1e4, 1e5, 2e3
    parted = inverting(gain)
    answer = ratio_of(parted, "u1.in")
    loaded, source = gain * rl / (rl + ro), ro * rl / (ro + rl)
    assert answer.impedance == near(r1 + 1 / (1 / rid + (1 + loaded) / (rf + source)))
    assert answer.z0 == near(r1 + 1 / (1 / rid + 1 / (rf + source)))
    low = r1 * rid / (r1 + rid)
    t_open = gain * low / (low + rf + ro)
    answer = ratio_of(parted, "u1.out")
    assert answer.z0 == near(1 / (1 / ro + 1 / (rf + low)))
    assert answer.t_open == near(t_open)
    assert np.abs(answer.t_short).max() < 1e-12 * t_open
    assert answer.impedance == near(1 / (1 / ro + 1 / (rf + low)) / (1 + t_open))


def test_loop_gain_with_the_load_in_place() -> None:
    loop = loop_gains(inverting(1e5), FREQUENCY)["e1"]
    ro, rf, low, rl = 75.0, 1e5, 1e4 * 2e6 / (1e4 + 2e6), 2e3
    seen = 1 / (1 / rl + 1 / (rf + low))
    assert loop == near(1e5 * seen / (seen + ro) * low / (low + rf))


@pytest.mark.parametrize("gain", [10.0, 1e5, 1e9])
def test_series_shunt_amplifier(gain: float) -> None:
    """Non-inverting stage, input impedance Rid + Rg || (Rf + Ro) with the source dead. Worked from Blackman:
    shorted, the whole of the divider's voltage comes back through Rid; open, no current flows in Rid, so the
    inverting input's voltage is not sensed at all and T is 0."""
    rid, ro, rg, rf = 1e6, 100.0, 1e3, 9e3
    text = f"""
        v1 in 0
        e1 e 0 in m {gain}
        rid in m {rid}
        ro e out {ro}
        rf out m {rf}
        rg m 0 {rg}
    """
    ports = [PortAt("in", "input", ("rid", "e1")), PortAt("out", "output", ("ro", "rf"))]
    parted = partition(text, {"u1": ([amplifier("e1", ("in", "m", "out"), inner=("rid", "ro"))], ports)}, ["in"])
    answer = ratio_of(parted, "u1.in")
    leg = 1 / (1 / rg + 1 / (rf + ro))
    t_short = gain * (1 / (1 / rg + 1 / rid)) / (1 / (1 / rg + 1 / rid) + rf + ro)
    assert answer.z0 == near(rid + leg)
    assert answer.t_short == near(t_short)
    assert np.abs(answer.t_open).max() < 1e-15 * gain  # the rounding of Rid's two node voltages
    assert answer.impedance == near((rid + leg) * (1 + t_short))
    out = ratio_of(parted, "u1.out")
    low = 1 / (1 / rg + 1 / rid)
    assert out.impedance == near(1 / (1 / ro + 1 / (rf + low)) / (1 + t_short))


def test_shunt_shunt_amplifier_driven_by_a_current() -> None:
    """A transimpedance stage: input (Rf + Ro)/(1 + A) beside Rid, the textbook's shunt feedback."""
    text = """
        i1 0 m
        c1 m 0 1e-11
        rf m out 1e6
        rid m 0 1e9
        e1 e 0 0 m 1e5
        ro e out 50
    """
    inside = ("c1", "rf", "rid", "e1")
    ports = [PortAt("m", "input", inside, current_driven=True), PortAt("out", "output", ("ro", "rf"))]
    parted = partition(text, {"u1": ([amplifier("e1", ("0", "m", "out"))], ports)})
    s = 2j * np.pi * FREQUENCY
    expected = 1 / (1e-9 + s * 1e-11 + (1 + 1e5) / (1e6 + 50))
    answer = ratio_of(parted, "u1.m")
    assert answer.impedance == near(expected)
    assert np.abs(answer.t_short).max() < 1e-10
    assert answer.z0 == near(1 / (1e-9 + s * 1e-11 + 1 / (1e6 + 50)))


def test_series_series_stage_with_both_ratios_at_work() -> None:
    """Blackman's formula on a transconductor g with Re in its common lead and Rb from output to input: both
    return ratios are far from 0.

    The output is loaded by Rl; nodes in (b), common (e), output (c); the source draws g (Vb - Ve) from c to e.
    Short at b: Vb = 0. A unit current from c to e: Ve = Re, so T_sc = g Re.
    Open at b: the unit current splits at c between Rl and Rb, but no current flows in Rb with b open, so
    Vb = Vc = -Rl and T_oc = g (Re + Rl). Dead: z0 = Rb + Rl.
    """
    g, re, rb, rl = 0.04, 470.0, 22e3, 3.3e3
    text = f"""
        v1 b 0
        rb b c {rb}
        rl c 0 {rl}
        g1 c e b e {g}
        re e 0 {re}
    """
    ports = [PortAt("b", "input", ("rb", "g1"))]
    parted = partition(text, {"u1": ([amplifier("g1", ("e", "b", "c"))], ports)}, ["b"])
    answer = ratio_of(parted, "u1.b")
    assert answer.z0 == near(rb + rl)
    assert answer.t_short == near(g * re)
    assert answer.t_open == near(g * (re + rl))
    assert answer.impedance == near((rb + rl) * (1 + g * re) / (1 + g * (re + rl)))


def test_the_load_changes_no_output_impedance() -> None:
    answers = []
    for load in (1.0, 2e3, 1e9):
        parted = inverting(1e5)
        text = "\n".join(
            f"{e.name} {' '.join(e.nodes)} {load if e.name == 'rl' else getattr(e, 'value', '')}"
            for e in parted.circuit.elements
            if e.name != "e1"
        )
        changed = partition_of(
            elements_of(text + "\ne1 e 0 0 m 1e5"),
            {"u1": (parted.amplifiers, [PortAt("out", "output", ("ro", "rf"))])},
            ["in"],
        )
        answers.append(ratio_of(changed, "u1.out").impedance)
    assert answers[0] == near(answers[1])
    assert answers[0] == near(answers[2])


def test_several_ports_on_one_node() -> None:
    """An output with two stages behind it: each port's own side alone is seen."""
    text = """
        v1 in 0
        r1 in m1 1e4
        f1 m1 o1 3e4
        x1 y1 0 0 m1 1e5
        z1 y1 o1 60
        r2 o1 m2 2e4
        f2 m2 o2 2e4
        x2 y2 0 0 m2 1e5
        z2 y2 o2 60
        r3 o1 m3 5e4
        f3 m3 o3 2e4
        x3 y3 0 0 m3 1e5
        z3 y3 o3 60
    """
    for card, kind in (("f", "rf"), ("x", "ex"), ("z", "rz")):
        for n in "123":
            text = text.replace(f" {card}{n} ", f" {kind}{n} ")
    stages = {
        f"u{n}": (
            [amplifier(f"ex{n}", ("0", f"m{n}", f"o{n}"))],
            [PortAt(node, "input", (f"r{n}",)), PortAt(f"o{n}", "output", (f"rz{n}", f"rf{n}"))],
        )
        for n, node in (("1", "in"), ("2", "o1"), ("3", "o1"))
    }
    parted = partition(text, stages, ["in"])
    answers = return_ratios(parted, FREQUENCY)
    assert list(answers) == ["u1.in", "u1.o1", "u2.o1", "u2.o2", "u3.o1", "u3.o3"]
    for subject, r, f in (("u2.o1", 2e4, 2e4), ("u3.o1", 5e4, 2e4)):
        answer = answers[subject]
        assert isinstance(answer, ReturnRatio)
        assert answer.impedance == near(r + (f + 60) / (1 + 1e5))
    second, third = (answers[s].impedance for s in ("u2.o1", "u3.o1"))  # type: ignore[union-attr]
    first = answers["u1.in"]
    assert isinstance(first, ReturnRatio)
    load = 1 / (1 / second + 1 / third)
    assert first.impedance == near(1e4 + (3e4 + 60 * load / (60 + load)) / (1 + 1e5 * load / (60 + load)))


def test_an_input_that_draws_no_current_is_infinite() -> None:
    text = """
        v1 in 0
        e1 e 0 in out 1e5
        ro e out 10
    """
    ports = [PortAt("in", "input", ("e1",)), PortAt("out", "output", ("ro", "e1"))]
    parted = partition(text, {"u1": ([amplifier("e1", ("in", "out", "out"))], ports)}, ["in"])
    answer = ratio_of(parted, "u1.in")
    assert (answer.impedance == np.inf).all()
    assert (answer.z0 == np.inf).all()
    assert answer.t_open == near(np.full(3, 1e5))
    assert ratio_of(parted, "u1.out").impedance == near(np.full(3, 10 / (1 + 1e5)))


def test_an_output_that_is_the_source_itself_is_zero() -> None:
    text = """
        v1 in 0
        r1 in m 1e4
        rf m out 1e4
        e1 out 0 0 m 1e5
    """
    ports = [PortAt("out", "output", ("e1", "rf")), PortAt("in", "input", ("r1",))]
    parted = partition(text, {"u1": ([amplifier("e1", ("0", "m", "out"))], ports)}, ["in"])
    answer = ratio_of(parted, "u1.out")
    assert (answer.impedance == 0).all()
    assert answer.t_open == near(np.full(3, 5e4))
    assert ratio_of(parted, "u1.in").impedance == near(np.full(3, 1e4 + 1e4 / (1 + 1e5)))


def test_a_side_open_to_all_but_current_sources_is_driven_by_current() -> None:
    """Whether the port says so or not: 1 V in series would drive nothing."""
    for outside in ("i1 0 m", ""):
        text = f"""
            {outside}
            rf m out 1e6
            e1 out 0 0 m 1e3
        """
        parted = partition(text, {"u1": ([amplifier("e1", ("0", "m", "out"))], [PortAt("m", "input", ("rf", "e1"))])})
        assert ratio_of(parted, "u1.m").impedance == near(np.full(3, 1e6 / (1 + 1e3)))


def test_ports_that_share_a_terminal_are_measured_apart() -> None:
    parted = inverting(1e5)
    stage = parted.stages[0]
    twice = [PortAt("in", "input", ("r1",)), PortAt("in", "output", ("r1",))]
    both = partition_of(parted.circuit.elements, {"u1": (stage.amplifiers, twice[:1]), "again": ([], ())}, ["in"])
    doubled = partition_of(
        parted.circuit.elements,
        {"u1": (stage.amplifiers, twice[:1]), "u2": (stage.amplifiers, twice[:1])},
        ["in"],
    )
    answers = return_ratios(doubled, FREQUENCY)
    assert answers["u2.in"].impedance == near(ratio_of(both, "u1.in").impedance)  # type: ignore[union-attr]
    assert answers["u1.in"].impedance == near(answers["u2.in"].impedance)  # type: ignore[union-attr]


def test_loop_gain_at_direct_current() -> None:
    """Capacitors open: an ideal integrator's loop is open at DC but for Rid; a real one's is not."""
    text = """
        v1 in 0
        r1 in m 1e4
        c1 m out 1e-9
        rid m 0 1e6
        e1 e 0 0 m 1e5
        ro e out 50
        rl out 0 1e4
    """
    members = [amplifier("e1", ("0", "m", "out"))]
    ports = [PortAt("in", "input", ("r1",))]
    parted = partition(text, {"u1": (members, ports)}, ["in"])
    assert np.abs(loop_gains(parted, np.array([0.0]))["e1"]).max() == 0
    assert ratio_of(parted, "u1.in", np.array([0.0])).impedance == near([1e4 + 1e6])
    leaky = partition(text + "rf m out 1e6", {"u1": (members, ports)}, ["in"])
    low = 1e4 * 1e6 / (1e4 + 1e6)
    seen = 1 / (1 / 1e4 + 1 / (1e6 + low))
    assert loop_gains(leaky, np.array([0.0]))["e1"] == near([1e5 * seen / (seen + 50) * low / (low + 1e6)])


def test_loop_gain_of_positive_feedback_is_negative() -> None:
    text = """
        rb out p 9e3
        ra p 0 1e3
        e1 out 0 p 0 1e3
    """
    parted = partition(text, {"u1": ([amplifier("e1", ("p", "0", "out"))], [])})
    assert loop_gains(parted, np.array([0.0, 1e3]))["e1"] == near([-100.0, -100.0])


def test_an_integrating_gain_has_an_infinite_loop_at_direct_current() -> None:
    """A transconductance into a capacitor alone: without its source the node floats, and only the least
    conductance of 1e-12 S stands in for what a real part leaks."""
    text = """
        g1 0 out in out 1e-3
        c1 out 0 1e-9
        v1 in 0
    """
    parted = partition(text, {"u1": ([amplifier("g1", ("in", "out", "out"))], [])}, ["in"])
    frequency = np.array([0.0, 1e3])
    loop = loop_gains(parted, frequency)["g1"]
    assert loop[0] == near(1e-3 / 1e-12, 1e-6)
    assert loop[1] == near(1e-3 / (2j * np.pi * 1e3 * 1e-9))


def test_two_amplifiers_in_one_loop_give_one_impedance() -> None:
    """Blackman's formula holds for either source; the impedance is the circuit's own."""
    text = """
        v1 in 0
        r1 in m 1e4
        rf m out 1e4
        ea a 0 m 0 -1e3
        ra a b 1e3
        rb b 0 1e4
        eb c 0 b 0 1e2
        ro c out 50
    """
    ports = [PortAt("in", "input", ("r1",)), PortAt("out", "output", ("ro", "rf"))]
    answers = []
    for gain in ("ea", "eb"):
        parted = partition(text, {"s": ([amplifier(gain, ("0", "m", "out"))], ports)}, ["in"])
        answers.append(return_ratios(parted, FREQUENCY))
    for subject in ("s.in", "s.out"):
        first, second = (answer[subject] for answer in answers)
        assert isinstance(first, ReturnRatio)
        assert isinstance(second, ReturnRatio)
        assert first.impedance == near(second.impedance)
        assert (first.source, second.source) == ("ea", "eb")
    total = 1e3 * 1e4 / 1.1e4 * 1e2
    assert answers[0]["s.in"].impedance == near(np.full(3, 1e4 + (1e4 + 50) / (1 + total)))  # type: ignore[union-attr]


def test_a_part_without_solution_costs_its_own_ports_alone() -> None:
    text = """
        v1 in 0
        r1 in m 1e4
        rf m out 1e4
        e1 out 0 0 m 1e5
        va a 0
        r2 a m2 1e4
        r3 m2 o2 1e4
        e2 o2 0 0 m2 1e5
        e3 o2 0 0 m2 1e5
    """
    stages = {
        "u1": ([amplifier("e1", ("0", "m", "out"))], [PortAt("in", "input", ("r1",))]),
        "u2": ([amplifier("e2", ("0", "m2", "o2"))], [PortAt("a", "input", ("r2",))]),
    }
    answers = return_ratios(partition(text, stages, ["in", "a"]), FREQUENCY)
    assert answers["u1.in"].impedance == near(np.full(3, 1e4 + 1e4 / (1 + 1e5)))  # type: ignore[union-attr]
    assert "undetermined" in str(answers["u2.a"])
    assert set(loop_gains(partition(text, stages, ["in", "a"]), FREQUENCY)) == {"e1"}


def test_what_cannot_be_cut_is_said() -> None:
    parted = inverting(1e5)
    amplifiers = parted.stages[0].amplifiers
    odd = [PortAt("in", "input", ("r1", "v1")), PortAt("0", "input", ("rl",))]
    text = "\n".join(["v2 in out"])
    answers = return_ratios(partition_of(parted.circuit.elements, {"u1": (amplifiers, odd)}, ["in"]), FREQUENCY)
    assert answers["u1.0"] == "the port is ground"
    assert answers["u1.in"].impedance == near(np.zeros(3))  # type: ignore[union-attr]
    bridged = [*parted.circuit.elements, *elements_of(text)]
    held = partition_of(bridged, {"u1": (amplifiers, [PortAt("out", "output", ("ro", "rf"))])}, ["in"])
    assert "held by a voltage source" in str(return_ratios(held, FREQUENCY)["u1.out"])
    sensed = [*parted.circuit.elements, *elements_of("f9 in 0 rl 1")]
    unread = partition_of(sensed, {"u1": (amplifiers, [PortAt("in", "input", ("r1",))])}, ["in"])
    assert "f9 reads the current of rl" in str(return_ratios(unread, FREQUENCY)["u1.in"])
    assert loop_gains(unread, FREQUENCY) == {}


def test_coupling_capacitors_at_direct_current() -> None:
    """Outside, a capacitor leaves the stage's side as it is; inside, it lets no direct current in. Both answers
    come with those above DC."""
    text = """
        v1 in 0
        c1 in a 1e-6
        r1 a m 1e4
        rf m out 1e5
        e1 out 0 0 m 1e5
        c2 a m2 1e-6
        r2 m2 o2 1e4
        e2 o2 0 0 m2 1e5
    """
    stages = {
        "u1": ([amplifier("e1", ("0", "m", "out"))], [PortAt("a", "input", ("r1",))]),
        "u2": ([amplifier("e2", ("0", "m2", "o2"))], [PortAt("a", "input", ("c2",))]),
    }
    frequency = np.array([1e3, 0.0, 1e6])
    parted = partition(text, stages, ["in"])
    assert ratio_of(parted, "u1.a", frequency).impedance == near(np.full(3, 1e4 + 1e5 / (1 + 1e5)))
    second = ratio_of(parted, "u2.a", frequency)
    series = 1 / (2j * np.pi * frequency[[0, 2]] * 1e-6) + 1e4 / (1 + 1e5)
    assert second.impedance[[0, 2]] == near(series)
    assert second.impedance[1] == np.inf


def test_a_stage_without_an_amplifier_has_a_reason() -> None:
    parted = partition("v1 in 0\nr1 in 0 1e3", {"s": ([], [PortAt("in", "input", ("r1",))])}, ["in"])
    assert return_ratios(parted, FREQUENCY)["s.in"] == "s has no amplifier"
