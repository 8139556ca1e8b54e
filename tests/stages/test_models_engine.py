"""Linear models against ngspice: the amplifier alone on the bench, one AC run for each of three stimuli."""

import subprocess
from pathlib import Path

import numpy as np
import pytest
from gauge import one_amplifier

from xcheck.circuit.arrays import Complex

PARTS = {
    "two poles": "rid p n 2meg\ncid p n 1.4p\nrcp p 0 1g\nrcn n 0 2g\nccp p 0 3p\ng1 0 a p n 1m\nra a 0 200meg\n"
    "ca a 0 100p\ne1 b 0 a 0 1\nrb b c 1k\ncb c 0 30p\ne2 d 0 c 0 1\nro d o 75\nco o 0 5p",
    "mid-supply and common mode": "em m 0 vp vn 0.5\nrid p n 1meg\ne1 x m poly(3) p n p 0 n 0 0 1e5 5 3\nr1 x y 1k\n"
    "c1 y 0 1u\ne2 z m y m 1\nro z w 20\nlo w o 1u\nrdamp w o 200",
    "Miller": "rid p n 1meg\ng1 x 0 p n 200u\nr1 x 0 100k\ng2 0 o x 0 -0.1\nr2 o 0 10k\nrz x t 300\ncc t o 30p\n"
    "rq vp vn 10k",
    "input network, split gain": "ri p x 300\nci x y 4p\nrj y n 300\nvos x xx 1m\nrp xx 0 10meg\ng1 0 a xx y 1m\n"
    "g2 0 a xx y 1m\nra a 0 80meg\nca a 0 47p\ne1 b 0 a 0 1\nro b o 33\nrs o vn 47k\nrcm y vp 1g",
}  # fmt: skip
STAGE = "vp vp 0 12\nvn vn 0 -12\nvin in 0 ac 1\nr1 in n 10k\nr2 n out 100k\nxu1 0 n vp vn out part\n"


def measured(body: str, stimulus: str, folder: Path) -> tuple[Complex, dict[str, Complex]]:
    """Frequency in Hz and the vectors v(o), i(vtp), i(vtn) with one stimulus alive."""
    ac = {name: " ac 1" if name == stimulus else "" for name in ("vtp", "vtn", "ito")}
    deck = (
        f"bench\n.subckt part p n vp vn o\n{body}\n.ends\nvp vp 0 12\nvn vn 0 -12\nvtp p 0 dc 0{ac['vtp']}\n"
        f"vtn n 0 dc 0{ac['vtn']}\nito 0 o dc 0{ac['ito']}\nxu1 p n vp vn o part\n.ac dec 3 1 100meg\n"
        ".control\nrun\nset wr_singlescale\nset wr_vecnames\nset numdgt=15\n"
        "wrdata result.txt v(o) i(vtp) i(vtn)\n.endc\n.end\n"
    )
    (folder / "bench.cir").write_text(deck)
    done = subprocess.run(
        ["ngspice", "-n", "-b", "bench.cir"], cwd=folder, capture_output=True, text=True, timeout=60, check=False
    )
    result = folder / "result.txt"
    assert result.exists(), done.stdout + done.stderr
    table = np.loadtxt(result, skiprows=1)
    result.unlink()
    vectors = {name: table[:, 1 + 2 * k] + 1j * table[:, 2 + 2 * k] for k, name in enumerate(("o", "p", "n"))}
    return table[:, 0].astype(np.complex128), vectors


@pytest.mark.engine
@pytest.mark.parametrize("part", PARTS, ids=list(PARTS))
def test_response_against_ngspice(part: str, tmp_path: Path) -> None:
    body = PARTS[part]
    amplifier = one_amplifier(f".subckt part p n vp vn o\n{body}\n.ends\n{STAGE}")
    assert amplifier.open_loop.model is not None
    runs = {stimulus: measured(body, stimulus, tmp_path) for stimulus in ("vtp", "vtn", "ito")}
    found = amplifier.open_loop.model.response(runs["vtp"][0].real)
    # a source's current flows through it from + to -, so what flows into the pin is its negative
    across = runs["vtn"][1]["p"]
    expected = {
        "gain_plus": runs["vtp"][1]["o"], "gain_minus": runs["vtn"][1]["o"], "z_output": runs["ito"][1]["o"],
        "y_differential": across, "y_plus": -runs["vtp"][1]["p"] - across, "y_minus": -runs["vtn"][1]["n"] - across,
    }  # fmt: skip
    for name, value in expected.items():
        # ngspice's gmin, 1e-12 S, and the digits that a common-mode admittance loses beside the differential one
        slack = 1e-6 * np.abs(value) + (3e-12 + 1e-9 * np.abs(across) if name.startswith("y") else 0)
        assert np.all(np.abs(getattr(found, name) - value) <= slack), name
