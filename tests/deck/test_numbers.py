"""Numbers against ngspice's own reading: a resistor of each value, asked back."""

import math
import re
import subprocess
from collections.abc import Sequence
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from xcheck.deck.numbers import read_number

TRAPS = [
    "4k7", "2R2", "1u5", "10k5", "1M", "1m", "1meg", "1MEG", "1megohm", "1mil", "1mila", "10F", "5k.",
    "1.5.2", ".5k", "5.k", "+3k", "1e3", "1E3k", "1d3", "10e-3meg", "1g", "1t", "1x", "1kohm", "3n3",
    "47p", "1a", "22ohm", "1e", "1k e3",
]  # fmt: skip


def by_ngspice(texts: Sequence[str], folder: Path) -> list[float]:
    """What ngspice takes for each text as a resistor's value, times 1e3 for very small ones' sake: conductance."""
    lines = ["numbers", "v1 a 0 1"]
    lines += [f"r{k} a 0 {text}" for k, text in enumerate(texts)]
    lines += [".control", "op", "set numdgt=15"]
    lines += [f"print @r{k}[resistance]" for k in range(len(texts))]
    lines += [".endc", ".end", ""]
    (folder / "numbers.cir").write_text("\n".join(lines))
    done = subprocess.run(
        ["ngspice", "-b", "numbers.cir"], cwd=folder, capture_output=True, text=True, timeout=60, check=False
    )
    found = dict(re.findall(r"@r(\d+)\[resistance\] = (\S+)", done.stdout))
    assert len(found) == len(texts), done.stdout[-500:] + done.stderr[-500:]
    return [float(found[str(k)]) for k in range(len(texts))]


@pytest.mark.engine
def test_each_trap_reads_as_in_ngspice(tmp_path: Path) -> None:
    texts = [t for t in TRAPS if " " not in t]
    for text, taken in zip(texts, by_ngspice(texts, tmp_path), strict=True):
        number = read_number(text)
        assert number is not None, text
        assert number.value == pytest.approx(taken, rel=1e-12), text


DIGITS = st.from_regex(r"[1-9][0-9]{0,4}(\.[0-9]{0,3})?", fullmatch=True)
SUFFIX = st.sampled_from(["", "k", "K", "meg", "Meg", "m", "M", "u", "n", "g", "t", "mil", "kOhm", "k7", "R2", "ohm"])


@pytest.mark.engine
@settings(max_examples=3, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(texts=st.lists(st.tuples(DIGITS, SUFFIX).map("".join), min_size=40, max_size=80))
def test_any_number_reads_as_in_ngspice(texts: list[str], tmp_path: Path) -> None:
    for text, taken in zip(texts, by_ngspice(texts, tmp_path), strict=True):
        number = read_number(text)
        assert number is not None
        assert math.isclose(number.value, taken, rel_tol=1e-12), text


@pytest.mark.parametrize(
    ("text", "value", "scale", "rest"),
    [("4k7", 4e3, "k", "7"), ("1M", 1e-3, "M", ""), ("10F", 10e-15, "F", ""), ("1mil", 25.4e-6, "mil", ""),
     ("2.2MEGohm", 2.2e6, "MEG", "ohm"), ("1,5k", 1.0, "", ",5k"), ("2R2", 2.0, "", "R2")],
)  # fmt: skip
def test_what_is_read_and_what_is_lost(text: str, value: float, scale: str, rest: str) -> None:
    number = read_number(text)
    assert number is not None
    assert number.value == pytest.approx(value, rel=1e-12)
    assert (number.scale, number.rest) == (scale, rest)


@pytest.mark.parametrize("text", ["", "k", "abc", "{1k}", "-", ".", "e3"])
def test_what_is_no_number(text: str) -> None:
    assert read_number(text) is None
