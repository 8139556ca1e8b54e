"""Raw files: written by ngspice itself, by a writer here, and broken in every way."""

import os
import shutil
import struct
import subprocess
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xcheck.errors import CallError
from xcheck.results.rawfile import parse_raw, read_raw

DECK = """Level probe front, corner
v1 in 0 dc 2 ac 1
r1 in out 1k
c1 out 0 159.15494309189535n
.control
set filetype={form}
op
write r.raw
ac dec 5 10 100k
set appendwrite
write r.raw
.endc
.end
"""


@pytest.mark.engine
@pytest.mark.parametrize("form", ["binary", "ascii"])
def test_two_plots_that_ngspice_wrote(tmp_path: Path, form: str) -> None:
    program = shutil.which("ngspice")
    assert program, "ngspice is needed for this test"
    (tmp_path / "d.cir").write_text(DECK.format(form=form))
    environment = {**os.environ, "HOME": str(tmp_path)}
    subprocess.run(
        [program, "-b", "d.cir"], cwd=tmp_path, env=environment, capture_output=True, timeout=30, check=False
    )
    point, sweep = read_raw(tmp_path / "r.raw")
    assert not point.is_complex
    assert sweep.is_complex
    assert "Operating" in point.name
    assert sweep.name.startswith("AC")
    # version 39 writes the title in lower case here (seen)
    assert sweep.title.lower() == "level probe front, corner"
    names = [v.name for v in sweep.variables]
    f, out, current = (sweep.data[names.index(n)] for n in ("frequency", "v(out)", "i(v1)"))
    assert len(f) == 21
    # first-order low-pass, corner at 1 kHz: H = 1/(1 + jf/fc) (common practice)
    h = 1 / (1 + 1j * f.real / 1e3)
    np.testing.assert_allclose(out, h, rtol=1e-9)
    np.testing.assert_allclose(current, -(1 - h) / 1e3, rtol=1e-7)
    assert point.data[[v.name for v in point.variables].index("v(out)")][0] == pytest.approx(2)


def written(data: np.ndarray, binary: bool, title: str = "t", encoding: str = "utf-8") -> bytes:
    kind = "complex" if np.iscomplexobj(data) else "real"
    head = f"Title: {title}\nDate: today\nPlotname: AC Analysis\nFlags: {kind}\nNo. Variables: {len(data)}\n"
    head += f"No. Points: {data.shape[1]}\nCommand: version 39\nOption: reltol = 1e-3\nVariables:\n"
    head += "".join(f"\t{k}\tV(n{k})\tvoltage\n" for k in range(len(data)))
    if binary:
        flat = np.ascontiguousarray(data.T).ravel().view(np.float64)
        return head.encode(encoding) + b"Binary:\n" + struct.pack(f"<{len(flat)}d", *flat)
    lines = []
    for p in range(data.shape[1]):
        for k, value in enumerate(data[:, p]):
            text = f"{value.real!r},{value.imag!r}" if kind == "complex" else repr(float(value))
            text = text.replace("np.float64(", "").replace(")", "")
            lines.append(f" {p}\t{text}" if k == 0 else f"\t{text}")
        lines.append("")
    return (head + "Values:\n" + "\n".join(lines) + "\n").encode(encoding)


numbers = st.floats(allow_nan=False, allow_infinity=False)


@given(st.lists(numbers, min_size=12, max_size=12), st.booleans(), st.booleans(), st.integers(1, 3))
def test_round_trip(values: list[float], binary: bool, real: bool, plots: int) -> None:
    table = np.array(values).reshape(2, 6)
    data = table if real else np.ascontiguousarray(table).view(np.complex128)
    read = parse_raw(b"".join(written(data, binary) for _ in range(plots)))
    assert len(read) == plots
    for plot in read:
        assert plot.is_complex is not real
        assert [v.name for v in plot.variables] == ["v(n0)", "v(n1)"]
        assert np.array_equal(plot.data, data)


@pytest.mark.parametrize("encoding", ["utf-8", "latin-1"])
def test_titles_in_two_encodings(encoding: str) -> None:
    (plot,) = parse_raw(written(np.ones((1, 1)), True, "Füllstand", encoding))
    assert plot.title == "Füllstand"


@pytest.mark.parametrize("binary", [True, False])
def test_a_file_cut_anywhere_is_refused(binary: bool) -> None:
    whole = written(np.arange(1.0, 5).reshape(2, 2) + 1j, binary).rstrip(b"\n")
    for cut in range(len(whole) - (1 if binary else 12)):
        with pytest.raises(CallError):
            parse_raw(whole[:cut])


@given(st.binary(max_size=300))
def test_garbage_is_refused(content: bytes) -> None:
    with pytest.raises(CallError, match=r"byte|empty"):
        parse_raw(content)


def test_counts_beyond_the_file_are_refused_before_memory_is_taken() -> None:
    for binary in (True, False):
        huge = written(np.ones((1, 2)), binary).replace(b"Points: 2", b"Points: 99999999999")
        with pytest.raises(CallError, match="cut short"):
            parse_raw(huge)


def test_a_missing_file_and_a_folder_are_said(tmp_path: Path) -> None:
    with pytest.raises(CallError, match="cannot be read"):
        read_raw(tmp_path / "none.raw")
    with pytest.raises(CallError, match="regular file"):
        read_raw(tmp_path)
