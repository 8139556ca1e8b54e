"""Measured impedances of linear decks against dense nodal equations, wherever the cut has to be written."""

import numpy as np
import pytest
from decks_by_hand import DECADES, At, Case, case, nodal

from xcheck.circuit.arrays import Complex
from xcheck.simulate import measure
from xcheck.simulate.types import Simulation

SAME = 1e-6
"""Both methods solve the same linear equations in double precision. Loop gains up to 1e5 cost them some digits."""

AMP = """
.subckt amp p m o
rid p m 2meg
cid p m 2p
rcp p 0 1g
rcm m 0 1g
e1 y 0 p m 2e5
rp y q 1k
cp q 0 32u
e2 z 0 q 0 1
ro z o 75
.ends
"""
MINUS, PLUS = "{0}.rid {0}.cid {0}.rcm {0}.e1", "{0}.rid {0}.cid {0}.rcp {0}.e1"

CASES: dict[str, Case] = {
    "flat": case(
        AMP + "v1 in 0 1 ac 1\nr1 in m 10k\nrf m out 100k\ncf m out 10p\nrp p 0 9.1k\nx1 p m out amp\nrl out 0 2k\n",
        At("in", "r1"), At("out", "x1.ro rf cf", "output"), At("m", "rf cf " + MINUS.format("x1")),
    ),
    "current driven": case(
        AMP + "i1 0 m 1u\ncd m 0 100p\nrf m out 1meg\nx1 0 m out amp\nrl out 0 10k\n",
        At("m", "cd rf " + MINUS.format("x1"), by_current=True), At("out", "x1.ro rf", "output"),
    ),
    "several ports on one node": case(
        AMP + "v1 in 0\nx1 in o o amp\nra o a 1k\nrb o b 2k\nca a 0 1n\nx2 b q q amp\nrq q 0 5k\n",
        At("o", "x1.ro " + MINUS.format("x1"), "output"), At("o", "ra"), At("o", "rb"), At("in", PLUS.format("x1")),
        At("b", PLUS.format("x2")),
    ),
    "a subcircuit used twice": case(
        AMP + ".subckt stage i o\nr1 i m 10k\nrf m o 47k\nx1 0 m o amp\n.ends\n"
        "v1 a 0\nx1 a b stage\nx2 b c stage\nrl c 0 3k\n",
        At("b", "x1.x1.ro x1.rf", "output"), At("b", "x2.r1"), At("x1.m", "x1.rf"), At("x2.m", "x2.rf"),
        At("c", "x2.x1.ro x2.rf", "output"),
    ),
    "one text, other sides in each instance": case(
        AMP + ".subckt stage i o\nr1 i m 10k\nrf m o 47k\nrg m 0 1meg\nx1 0 m o amp\n.ends\n"
        "v1 a 0\nx1 a b stage\nx2 b c stage\nx3 c d stage\nrl d 0 3k\n",
        At("x1.m", "x1.rf"), At("x2.m", "x2.rf x2.rg"), At("x3.m", "x3.rg"),
    ),
    "wrapped stages": case(
        AMP + ".subckt inner i o\nr1 i m 10k\nrf m o 30k\nx1 0 m o amp\n.ends\n"
        ".subckt outer i o\nxb i o inner\nrl o 0 100k\n.ends\n"
        "v1 a 0\nxa a b outer\nxc b c outer\nrl c 0 3k\n",
        At("b", "xa.xb.x1.ro xa.xb.rf", "output"), At("b", "xc.xb.r1"), At("c", "xc.xb.x1.ro xc.xb.rf", "output"),
        At("xa.xb.m", "xa.xb.rf"),
    ),
    "a definition inside a definition": case(
        AMP + ".subckt outer i o\n.subckt inner i o\nr1 i m 10k\nrf m o 30k\nx1 0 m o amp\n.ends inner\n"
        "xb i o inner\nxd o 0 inner\n.ends outer\nv1 a 0\nxa a b outer\nxc b c outer\n",
        At("b", "xa.xb.x1.ro xa.xb.rf", "output"), At("xc.xb.m", "xc.xb.rf"), At("xc.xd.m", "xc.xd.r1"),
    ),
    "a stage spread over two subcircuits": case(
        AMP + ".subckt net a b c\nr1 a b 10k\nr2 b c 22k\nr3 b 0 1meg\n.ends\n"
        ".subckt part p m o\nx1 p m o amp\nrx m 0 5meg\n.ends\n"
        "v1 in 0\nxn in m out net\nxp 0 m out part\nxr out w y net\nrl out 0 2k\nxq y w v part\n",
        At("m", "xn.r2 " + MINUS.format("xp.x1")), At("out", "xn.r2 xp.x1.ro", "output"), At("w", "xr.r2 xq.rx"),
    ),
    "sensing inside and outside of one pin": case(
        ".subckt two p o\nr1 p 0 1meg\ne1 a 0 p 0 3\nr2 a o 1k\ng2 o 0 p 0 1m\n.ends\n"
        "v1 s 0\nrs s p 10k\nx1 p o two\nrl o 0 1k\nx2 o q two\nrq q 0 1k\n",
        At("p", "x1.r1"), At("p", "x1.e1"), At("o", "x1.r2 x2.e1 x2.r1", "output"),
    ),
    "expressions that sense": case(
        "v1 s 0\nrs s p 10k\nb1 a 0 v=100*(v(p,m)-0.5*V(m))\nrb a o 50\nrf o m 10k\nrm m 0 1k\nrp p 0 1meg\n"
        "e2 c 0 value={2*v(o)}\nrc c m 100k\ng3 p 0 poly(2) o 0 m 0 0 1u 2u\n",
        At("p", "b1 rp"), At("m", "b1 rf rc", "output"), At("o", "rf e2 g3"), At("p", "g3 rs", "output"),
    ),
    "both pins of an instance on one node": case(
        ".subckt pad a b\nra a c 1k\nrb b c 2k\ncc c 0 1n\n.ends\nv1 s 0\nrs s n 1k\nx1 n n pad\nrl n 0 5k\n",
        At("n", "x1.ra"), At("n", "x1.ra x1.rb"), At("n", "x1.rb rl"),
    ),
    "a global node": case(
        ".global bus\n.subckt tap x\nr1 x bus 1k\nc1 bus 0 1n\n.ends\n"
        "v1 a 0\nrs a s 100\nx1 s tap\nx2 s tap\nrb bus 0 3k\n",
        At("bus", "x1.r1"), At("bus", "x1.c1 rb", "output"), At("bus", "x2.r1 x1.r1"),
    ),
    "mutual inductance and controlled currents": case(
        "v1 in 0\nr1 in m 1k\nla m 0 1m\nlb b 0 4m\nk1 la lb 0.98\nrb b c 100\nvs c d 0\n"
        "rd d 0 1k\nf1 m 0 vs 0.1\nh1 g 0 vs 5\nrg g b 10k\n",
        At("in", "r1"), At("m", "la f1"), At("b", "rb rg", "output"),
    ),
    "pins as ports": case(
        AMP + ".param gain=3\nv9 zz 0 1\n.subckt block i o r=10k\n"
        ".param k={gain*r}\nr1 i m {r}\nrf m o {k}\nx1 0 m o amp\n.ends\n"
        "xu zz 0 block\n",
        At("i", "r1", by_current=True), At("o", "rf x1.ro", "output"), At("m", "rf"), subckt="block",
    ),
    "the same terminals twice": case(
        "v1 in 0\nr1 in m 10k\nr2 m o 20k\nr3 m 0 1k\nr4 o 0 1k\n",
        At("m", "r2"), At("m", "r2 r3"), At("m", "r1 r2", "output"),
    ),
    "names and numbers alike": case(
        "v1 1 0\ne1 3 0 2 0 2\nr1 1 2 2\nr2 2 0 3\nr3 3 2 2\nr4 3 0 1\n",
        At("2", "e1 r2"), At("2", "e1"), At("3", "r3 r4"), At("2", "r3", "output"),
    ),
}  # fmt: skip


@pytest.fixture(scope="module", params=CASES, ids=str)
def simulated(request: pytest.FixtureRequest) -> tuple[Case, Simulation]:
    made = CASES[request.param]
    return made, measure(made.deck, made.circuit, made.partition, DECADES)


def apart(measured: Complex, expected: Complex) -> float:
    return float(np.max(np.abs(measured - expected) / np.abs(expected)))


@pytest.mark.engine
def test_every_port_agrees_with_the_nodal_equations(simulated: tuple[Case, Simulation]) -> None:
    made, simulation = simulated
    assert not simulation.failure, simulation.failure
    expected = {subject: nodal(made, subject, DECADES) for subject in made.ports}
    infinite = {subject for subject, value in expected.items() if not np.all(np.isfinite(value))}
    assert set(simulation.unmeasured) == infinite, simulation.unmeasured
    assert infinite or len(simulation.values) == len(made.ports)
    for subject, value in simulation.values.items():
        assert apart(value, expected[subject]) < SAME, subject


@pytest.mark.engine
def test_cuts_at_wrong_terminals_would_be_seen(simulated: tuple[Case, Simulation]) -> None:
    """The ports of a case differ, so a port that got another one's cut could not pass."""
    _, simulation = simulated
    values = list(simulation.values.values())
    for k, one in enumerate(values):
        for other in values[k + 1 :]:
            assert apart(one, other) > 1e-4
