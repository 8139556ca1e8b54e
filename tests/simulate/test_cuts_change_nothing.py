"""A deck with cuts has the operating point and the AC response of the deck without them, nonlinear devices included."""

import subprocess
from pathlib import Path

import numpy as np
import pytest
from decks_by_hand import At, Case, case

from xcheck.circuit.arrays import Real
from xcheck.simulate import measure
from xcheck.simulate.measure import planned
from xcheck.simulate.sanitize import harmless

FREQUENCY = 10.0 ** np.arange(0, 7)
SAME = 1e-6
"""Relative: ngspice ends its search for an operating point when steps fall below reltol, 1e-3 by default, so that two
searches of one point that start alike may end this much apart; the decks here ask for 1e-9."""

TEXT = """.options reltol=1e-9
.model dn d(is=1e-14 rs=2 cjo=4p)
.model qn npn(bf=150 vaf=80 cje=5p cjc=2p)
.subckt pair in out vp vn ref
qa ca in e qn
qb vp fb e qn
re e vn 47k
rc vp ca 22k
eb out1 0 ca ref 200
ro out1 out 100
rf out fb 10k
rg fb 0 10k
d1 out lim dn
rl lim 0 100k
.ends
.subckt twice in out vp vn
x1 in mid vp vn refa pair
x2 mid out vp vn refb pair
vra refa 0 11.5
vrb refb 0 11.5
.ends
vp vp 0 12
vn vn 0 -12
v1 in 0 0.2 @
xa in o1 vp vn twice
ca o1 i2 1u
rb i2 0 100k
xb i2 o2 vp vn twice
rl o2 0 2k
"""
PORTS = (
    At("in", "xa.x1.qa"), At("xa.mid", "xa.x1.ro xa.x1.rf xa.x1.d1", "output"), At("xb.mid", "xb.x2.qa"),
    At("o1", "xa.x2.ro xa.x2.d1", "output"), At("o2", "xb.x2.rf"), At("xb.x1.fb", "xb.x1.rf"),
    At("vp", "xa.x1.rc xb.x2.rc"), At("i2", "rb"), At("xa.x1.lim", "xa.x1.rl"),
)  # fmt: skip


def made() -> Case:
    return case(TEXT.replace("@", "ac 1"), *PORTS)


@pytest.mark.engine
def test_operating_point() -> None:
    cut = made()
    plain = case(TEXT.replace("@", ""))
    with_cuts = measure(cut.deck, cut.circuit, cut.partition, FREQUENCY)
    without = measure(plain.deck, plain.circuit, plain.partition, FREQUENCY)
    assert not with_cuts.failure, with_cuts.failure
    assert len(with_cuts.values) == len(PORTS), with_cuts.unmeasured
    assert set(without.operating_point) == set(with_cuts.operating_point) >= set(cut.circuit.nodes) - {"0"}
    assert set(without.currents) == set(with_cuts.currents) >= {"vp", "vn", "v1", "xa.vra", "xb.x2.eb"}
    assert abs(without.operating_point["o2"]) > 0.01
    for found, expected in (
        (with_cuts.operating_point, without.operating_point), (with_cuts.currents, without.currents),
    ):  # fmt: skip
        for name, value in expected.items():
            assert found[name] == pytest.approx(value, rel=SAME, abs=1e-12), name


def response(lines: list[str], nodes: list[str], folder: Path) -> Real:
    """Real and imaginary parts at some nodes over frequency, by ngspice itself."""
    folder.mkdir()
    control = ["set wr_vecnames", "set numdgt=15", "ac dec 1 1 1meg", f"wrdata out {' '.join(nodes)}"]
    (folder / "deck.cir").write_text("\n".join([*lines[:-1], ".control", *control, ".endc", ".end", ""]))
    subprocess.run(
        ["ngspice", "-b", "deck.cir"], cwd=folder, check=False, capture_output=True, timeout=60,
        stdin=subprocess.DEVNULL,
    )  # fmt: skip
    return np.loadtxt(folder / "out", skiprows=1)


@pytest.mark.engine
def test_ac_response(tmp_path: Path) -> None:
    cut = made()
    plan = planned(harmless(cut.deck.cards).cards, cut.circuit, cut.partition, cut.ports)
    assert not plan.refused
    nodes = ["o1", "o2", "i2", "xa.mid", "xb.mid"]
    plain = response(["by hand", *TEXT.replace("@", "ac 1").splitlines(), ".end"], nodes, tmp_path / "plain")
    assert plain.shape[0] == 7
    assert np.max(np.abs(plain[:, 4])) > 1  # the chain passes the signal on
    for k, load in enumerate(plan.loads):
        lines = [line + " ac 1" if line.startswith("v1 in 0") else line for line in load["lines"]]
        found = response(lines, nodes, tmp_path / f"cut{k}")
        assert np.allclose(found, plain, rtol=SAME, atol=1e-9)
