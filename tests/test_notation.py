"""Numbers as text. Prefixes: the SI Brochure (BIPM), table of SI prefixes, from memory."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from xcheck.notation import PREFIXES, engineering, percent, phase, polar, shortest


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (10e3, "Ohm", "10.0 kOhm"),
        (999.6, "Ohm", "1.00 kOhm"),
        (999.4, "Ohm", "999 Ohm"),
        (0.1, "Ohm", "100 mOhm"),
        (-4700, "Ohm", "-4.70 kOhm"),
        (1e6, "Hz", "1.00 MHz"),
        (1e-12, "F", "1.00 pF"),
        (2e-15, "F", "2.00 fF"),
        (0, "Ohm", "0 Ohm"),
        (1.5, "", "1.50"),
        (1e20, "Ohm", "1.00e+20 Ohm"),
        (1e-20, "F", "1.00e-20 F"),
        (math.inf, "Ohm", "infinite"),
        (-math.inf, "Ohm", "minus infinite"),
        (math.nan, "Ohm", "undefined"),
    ],
)
def test_engineering(value: float, unit: str, text: str) -> None:
    assert engineering(value, unit) == text


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (4700, "4.7 kOhm"),
        (4000, "4 kOhm"),
        (1e-3, "1 mOhm"),
        (1e6, "1 MOhm"),
        (12345.6, "12.3456 kOhm"),
        (100, "100 Ohm"),
        (1e-21, "1e-21 Ohm"),
        (1.5e20, "1.5e+20 Ohm"),
    ],
)
def test_shortest(value: float, text: str) -> None:
    assert shortest(value, "Ohm") == text


def test_symbols_only_where_asked_for() -> None:
    assert engineering(1e-6, "F", symbols=True) == "1.00 \N{MICRO SIGN}F"
    assert engineering(1e3, "Ohm", symbols=True) == "1.00 k\N{GREEK CAPITAL LETTER OMEGA}"
    assert polar(1j, "Ohm", symbols=True) == "1.00 \N{GREEK CAPITAL LETTER OMEGA} at 90.0\N{DEGREE SIGN}"
    assert polar(1e-6 + 0j, "Ohm").isascii()


def test_polar_and_phase() -> None:
    assert polar(1e4 * (1 - 1j) / math.sqrt(2), "Ohm") == "10.0 kOhm at -45.0 deg"
    assert polar(complex(-5, 0), "Ohm") == "5.00 Ohm at 180.0 deg"
    assert polar(0j, "Ohm") == "0 Ohm"
    assert polar(complex(math.inf, 0), "Ohm") == "infinite"
    assert phase(complex(1, -1e-9)) == "0.0 deg"


@pytest.mark.parametrize(
    ("ratio", "text"),
    [
        (0.01, "1.0 %"),
        (0.0123, "1.2 %"),
        (1.5, "150 %"),
        (0.0996, "10 %"),
        (0.00996, "1.0 %"),
        (0, "0 %"),
        (1e-9, "1.0e-07 %"),
        (1e6, "1.0e+08 %"),
        (math.inf, "infinite"),
        (math.nan, "undefined"),
    ],
)
def test_percent(ratio: float, text: str) -> None:
    assert percent(ratio) == text


@given(st.floats(min_value=1e-15, max_value=9.9e14), st.sampled_from([-1, 1]), st.integers(2, 8))
def test_reading_the_text_back_gives_the_value(value: float, sign: int, digits: int) -> None:
    scale = {prefix: power for power, prefix in PREFIXES.items()}
    for text in (engineering(sign * value, "Ohm", digits), shortest(sign * value, "Ohm", digits)):
        number, _, unit = text.partition(" ")
        assert float(number) * 10.0 ** scale[unit.removesuffix("Ohm")] == pytest.approx(
            sign * value, rel=0.51 * 10.0 ** (1 - digits)
        )
        assert 1 <= abs(float(number)) < 1000
