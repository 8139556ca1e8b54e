"""How far the rule of thumb holds, against crossings known beforehand."""

import numpy as np
import pytest

from xcheck.impedance.validity import deviation, holds_to

F = np.logspace(0, 6, 61)


def test_a_rise_with_frequency_crosses_where_algebra_says() -> None:
    # |Z - R|/R = f/1e5 for Z = R + j R f/1e5: off by 1 % at 1 kHz, by 10 % at 10 kHz
    rule = np.full(F.shape, 1e4, dtype=np.complex128)
    found = holds_to(F, rule, rule * (1 + 1j * F / 1e5), None)
    assert found["1%"] == pytest.approx(1e3, rel=1e-9)
    assert found["10%"] == pytest.approx(1e4, rel=1e-9)


def test_a_coupling_capacitor_at_the_low_end_does_not_count_as_the_end() -> None:
    rule = np.full(F.shape, 1e4, dtype=np.complex128)
    found = holds_to(F, rule, rule * (1 + 1j * F / 1e6 + 1 / (1j * F)), None)
    assert found["10%"] == pytest.approx(1e5, rel=1e-3)
    assert holds_to(F, rule, rule * (1 + 1 / (1j * F)), None) == {"1%": None, "10%": None}


def test_a_rule_that_never_holds_and_one_that_always_does() -> None:
    rule = np.full(F.shape, 1e4, dtype=np.complex128)
    assert holds_to(F, rule, 2 * rule, None) == {"1%": 1.0, "10%": 1.0}
    assert holds_to(F, rule, rule, None) == {"1%": None, "10%": None}


def test_infinite_and_zero_are_judged_at_the_interface() -> None:
    infinite, zero = np.full(F.shape, np.inf, complex), np.zeros(F.shape, complex)
    source, load = np.full(F.shape, 1e3, complex), np.full(F.shape, 1e3, complex)
    falling = 1e8 / (1j * F)  # |Zs/Z| = f/1e5
    assert holds_to(F, infinite, falling, source)["1%"] == pytest.approx(1e3, rel=1e-9)
    rising = 1j * F / 100  # |Z/ZL| = f/1e5
    assert holds_to(F, zero, rising, load)["10%"] == pytest.approx(1e4, rel=1e-9)
    assert deviation(infinite, falling, zero) is None
    assert deviation(zero, rising, infinite) is None
    assert deviation(zero, rising, None) is None
