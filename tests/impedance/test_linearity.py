"""Where a device has a say there is a reason that names it, never a number."""

import numpy as np
import pytest
from partitions_by_hand import PortAt, amplifier, partition

from xcheck.impedance.linearity import obstacles
from xcheck.impedance.return_ratio import loop_gains, return_ratios
from xcheck.impedance.types import ReturnRatio
from xcheck.stages.types import Partition

TWO_STAGES = """
    v1 in 0
    r1 in m1 1e4
    rf1 m1 o1 1e4
    e1 y1 0 0 m1 1e5
    ro1 y1 o1 50
    r2 o1 m2 1e4
    rf2 m2 o2 1e4
    e2 y2 0 0 m2 1e5
    ro2 y2 o2 50
    vcc vcc 0
    rr vcc rail 10
"""


def two_stages(extra: str = "", linear: tuple[bool, bool] = (True, True)) -> Partition:
    stages = {
        f"u{n}": (
            [amplifier(f"e{n}", ("0", f"m{n}", f"o{n}"), linear[int(n) - 1], (f"ro{n}",))],
            [PortAt(node, "input", (f"r{n}",)), PortAt(f"o{n}", "output", (f"ro{n}", f"rf{n}"))],
        )
        for n, node in (("1", "in"), ("2", "o1"))
    }
    return partition(TWO_STAGES + extra, stages, ["in", "vcc"], ["rail"])


@pytest.mark.parametrize(
    ("extra", "stopped"),
    [
        ("", set()),
        ("d1 m1 0", {"u1"}),  # at the virtual ground
        ("d1 y1 o1", {"u1"}),  # inside the amplifier
        ("d1 o1 0", {"u1"}),  # a clamp on the output: load of the one, but outside the other's side
        ("d1 m2 0", {"u1", "u2"}),  # the second stage's network hangs on the first one's output
        ("d1 o2 0", {"u2"}),  # behind another amplifier
        ("r9 o2 x 100\nd1 x 0", {"u2"}),  # in the load's own network
        ("d1 vcc 0", set()),  # at a node that does not move
        ("d1 rail 0", set()),  # at a soft rail that nothing of the stages hangs on
        ("d1 far 0\nr9 far 0 1e3", set()),  # elsewhere altogether
    ],
)
def test_a_device_stops_the_stages_that_it_touches(extra: str, stopped: set[str]) -> None:
    parted = two_stages(extra)
    found = obstacles(parted)
    assert set(found) == stopped
    assert all("d1 is not linear (diode)" in reason for reason in found.values())
    answers = return_ratios(parted, np.array([1e3]))
    for subject, answer in answers.items():
        if subject.split(".")[0] in stopped:
            assert answer == found[subject.split(".")[0]]
        else:
            assert isinstance(answer, ReturnRatio), subject
    assert set(loop_gains(parted, np.array([1e3]))) == {"e1", "e2"} - {f"e{s[1]}" for s in stopped}


def test_a_device_on_the_reference_that_a_stage_hangs_on_has_a_say() -> None:
    text = """
        v1 in 0
        vcc vcc 0
        ra vcc ref 1e4
        d1 ref 0
        r1 in m 1e4
        rf m out 1e4
        e1 out 0 ref m 1e5
    """
    stages = {"u1": ([amplifier("e1", ("ref", "m", "out"))], [PortAt("in", "input", ("r1",))])}
    assert "d1" in obstacles(partition(text, stages, ["in", "vcc"], ["ref"]))["u1"]


def test_an_amplifier_without_a_linear_model_stops_its_own_and_what_it_loads() -> None:
    assert obstacles(two_stages(linear=(False, True))) == {"u1": "e1 has no linear model: bjt"}
    both = obstacles(two_stages(linear=(True, False)))
    assert set(both) == {"u1", "u2"}
    assert set(both.values()) == {"e2 has no linear model: bjt"}


def test_an_amplifier_needs_a_source_that_stands_for_its_gain() -> None:
    stages = {"u1": ([amplifier("ro1", ("0", "m1", "o1"))], [PortAt("in", "input", ("r1",))])}
    parted = partition(TWO_STAGES, stages, ["in"])
    assert "no linear controlled source" in str(return_ratios(parted, np.array([1.0]))["u1.in"])
