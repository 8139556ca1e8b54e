"""Every equivalent against ngspice: a small deck around each kind of device, solved by the linear equations and by
ngspice's own small-signal analysis, node by node."""

import subprocess
from pathlib import Path

import numpy as np
import pytest

from xcheck.circuit.elements import Circuit, Device, Source
from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.linearisation import linearise
from xcheck.simulate.operate import operate
from xcheck.stages.model import bench

MODELS = """\
.model qn npn bf=100 is=1e-15 rb=100 rc=10 re=1 cje=1p cjc=2p tf=0.3n vaf=50 cjs=1p
.model qr npn bf=100 is=1e-15 rb=100 rc=10 re=1 cje=1p cjc=2p tf=0.3n vaf=50 cjs=1p rbm=20 irb=1u xcjc=0.6
.model qi npn bf=100 is=1e-15 rb=100 cje=1p cjc=2p tf=0.3n vaf=50 itf=0.01 xtf=2
.model qp pnp bf=60 is=1e-15 rb=200 cje=1p cjc=2p tf=10n vaf=50 cjs=1p
.model dd d is=1e-14 rs=10 cjo=2p tt=1n
.model dz d is=1e-14 rs=5 cjo=20p bv=4.7 ibv=1m
.model jn njf vto=-2 beta=1e-3 lambda=0.01 cgs=2p cgd=1p rd=10 rs=10
.model jp pjf vto=-2 beta=1e-3 lambda=0.01 cgs=2p cgd=1p
.model mn nmos level=1 vto=1 kp=1e-4 lambda=0.02 cgso=1e-10 cgdo=1e-10 cbd=1p cbs=1p rd=5 tox=2e-8 gamma=.5
.model mp pmos level=1 vto=-1 kp=5e-5 lambda=0.02 cgso=1e-10 cgdo=1e-10 cbd=1p cbs=1p rs=5 tox=2e-8 gamma=.5
.model m3 nmos level=3 vto=1 kp=1e-4 cgso=1e-10 cbd=1p tox=2e-8 gamma=.5 rsh=20 nsub=1e16 theta=0.1 vmax=1e5
.model sw sw vt=1 ron=10 roff=1e6
vcc vcc 0 10
vin in 0 0.7 ac 1
vbias vb 0 3 ac 1
"""
DECKS = {
    "diode": "d1 in n dd\nrn n 0 1k",
    "diode, area": "d1 in n dd area=3\nrn n 0 1k\nd2 in n2 dd m=2\nrn2 n2 0 1k",
    "zener": "r1 vcc z 1k\nd1 0 z dz\nc1 in z 1n",
    "npn": "rb in b 1k\nq1 c b 0 qn\nrc vcc c 1k",
    "npn, area and m": "rb in b 1k\nq1 c b e qn 2 m=3\nrc vcc c 100\nre e 0 10",
    "npn, base resistance by current": "rb in b 1k\nq1 c b 0 qr\nrc vcc c 1k",
    "npn, saturated": "rb vb b 10k\nq1 c b 0 qn\nrc vcc c 10k",
    "npn, high current": "q1 c in 0 qi\nrc vcc c 1k",
    "pnp": "rb b x 100k\nvx x 0 9 ac 1\nq1 c b vcc qp area=2\nrc c 0 3k",
    "npn in a subcircuit": ".subckt s c b e\nq1 c b e qn\n.ends\nx1 c in 0 s\nrc vcc c 1k",
    "n-channel jfet": "rg g in 1meg\nj1 vcc g s jn 2\nrs s 0 1k",
    "p-channel jfet": "rg g in 1meg\nj1 0 g s jp m=2\nrs s vcc 1k",
    "nmos": "rg g vb 10k\nm1 d g s 0 mn w=100u l=2u m=2\nrd vcc d 1k\nrs s 0 1k",
    "nmos, drain and source exchanged": "rg g vb 10k\nm1 0 g s 0 mn w=100u l=2u\nrs s vcc 1k",
    "pmos": "rg g vb 10k\nm1 d g vcc vcc mp w=100u l=2u ad=10p as=10p\nrd d 0 1k",
    "nmos of level 3": "rg g vb 10k\nm1 d g 0 0 m3 w=100u l=2u nrd=2 nrs=2\nrd vcc d 1k",
    "open switch": "s1 vcc x in 0 sw\nrx x in 1k",
    "behavioural voltage": "b1 o 0 v=tanh(v(in))*2+max(v(in),v(vb))+(v(in)>0.1?v(vb)^2:3)+i(vbias)\nro o vb 1k",
    "behavioural current": "b1 o 0 i=v(o)*v(in)*1m-pow(v(in),2)*1m+sqrt(abs(v(vb)))*1u\nro o 0 1k",
    "polynomial of second degree": "e1 o 0 poly(2) in 0 vb 0 0.1 1 2 3 4 5\nro o 0 1k",
    "polynomial of a current": "vs in x 0\nrs x 0 1k\nf1 0 o poly(1) vs 0 10 2k\nro o 0 1k",
    "behavioural resistor": "r1 in o r='1k*(1+v(vb)*v(vb))'\nr2 o 0 1k",
    "powers of a negative base": "b1 o 0 v=(v(in)-v(vb))**3+(v(in)-v(vb))^2+pow(-v(vb),3)+pwr(-v(vb),3)\nro o 0 1k",
    "lines, and beyond them": "b1 o 0 v=pwl(v(vb),0,0,1,2,2,5)+pwl(v(in),0,0,1,2)+pwl(-v(vb),0,0,1,2)\nro o 0 1k",
    "table between points": "e1 o 0 table {v(vb)} = (0,0) (2,1) (5,7)\nro o 0 1k",
    "table, at corners": "e1 o1 0 table {v(vb)} = (0,0) (3.05,1) (5,7)\ng1 0 o table {v(vb)} (3,0) (4,1m)\nro o 0 1k",
    "table, at its end": "e1 o1 0 table {v(vb)} = (0,0) (2.95,1)\ne2 o 0 table {v(in)} (0,0) (0.5,1)\nro o 0 1k",
    "code model: gain": "a1 in o ga\n.model ga gain(gain=3 in_offset=0.1)\nro o 0 1k",
    "code model: summer": "a1 [in vb] o su\n.model su summer(in_gain=[1 2.5] out_gain=-2)\nro o 0 1k",
    "code model: transfer function": (
        "rd in d 1k\nre d vb 3k\nrg d 0 1k\na1 %vd(d vb) o tf\nro o 0 1k\n"
        ".model tf s_xfer(gain=2 num_coeff=[1 3] den_coeff=[1 2 5] int_ic=[0 0])"
    ),
    "code model: an op-amp's two poles": (
        "r1 in m 10k\nr2 m o 47k\na1 %vd(0 m) x tf\nro x o 75\nrl o 0 10k\n"
        ".model tf s_xfer(gain=1e5 num_coeff=[1] den_coeff=[5e-10 1.59e-2 1] int_ic=[0 0])"
    ),
    "code model: of equal orders": (
        "a1 in o tf\n.model tf s_xfer(num_coeff=[1 0] den_coeff=[1 1] int_ic=[0] denormalized_freq=6283)\nro o 0 1k"
    ),
    "user functions": ".func sq(x) {x*x*k}\n.param k=2\nb1 o 0 v=sq(v(in,vb))\nro o 0 1k",
}
TOLERANCE = 1e-6
STORED = 5e-3
"""Of a bipolar transistor near its transit frequency: ngspice does not report how the charge stored at the emitter
moves with the collector's voltage, so that is taken from the output conductance, and not at all in saturation."""


def simulated(text: str, folder: Path) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    """Frequencies and node voltages by ngspice's command line."""
    deck = folder / "deck.cir"
    deck.write_text(text)
    subprocess.run(["ngspice", "-b", "-r", "out.raw", deck.name], cwd=folder, capture_output=True, check=False)
    head, _, data = (folder / "out.raw").read_bytes().partition(b"Binary:\n")
    lines = head.decode().splitlines()
    names = [line.split()[1] for line in lines[lines.index("Variables:") + 1 :]]
    values = np.frombuffer(data, dtype=np.complex128).reshape(-1, len(names))
    found = {name[2:-1]: values[:, k] for k, name in enumerate(names) if name.startswith("v(")}
    # the two nodes that ngspice puts into a TABLE source are not the deck's
    return values[:, 0].real, {node: value for node, value in found.items() if "_int" not in node}


def solved(circuit: Circuit, frequency: np.ndarray) -> dict[str, np.ndarray]:
    made = bench(circuit.elements, [])
    right = np.zeros(len(made.g), dtype=complex)
    for element in circuit.elements:
        if isinstance(element, Source) and element.ac:
            right[made.branch[element.name]] = element.ac
    matrix = made.g[None] + 2j * np.pi * frequency[:, None, None] * made.c[None]
    answer = np.linalg.solve(matrix, np.broadcast_to(right[:, None], (len(frequency), len(right), 1)))
    return {node: answer[:, k, 0] for node, k in made.index.items()}


@pytest.mark.engine
@pytest.mark.parametrize("name", DECKS)
def test_equivalent_is_what_ngspice_does(name: str, tmp_path: Path) -> None:
    text = f"{name}\n{MODELS}{DECKS[name]}\n.ac dec 1 1 100meg\n.end\n"
    circuit = elaborate(read_text(text))
    assert not circuit.findings
    operated = operate(circuit.deck, circuit)
    assert operated.point is not None, operated.failure
    linear = linearise(circuit, operated.point)
    assert not linear.kept
    assert linear.replaced
    assert not any(isinstance(e, Device) for e in linear.circuit.elements)
    frequency, expected = simulated(text, tmp_path)
    ours = solved(linear.circuit, frequency)
    tolerance = STORED if "pn" in name else TOLERANCE
    for node, value in expected.items():
        assert ours[node] == pytest.approx(value, rel=tolerance, abs=1e-9), node
    low = frequency < 2e3
    for node, value in expected.items():
        assert ours[node][low] == pytest.approx(value[low], rel=TOLERANCE, abs=1e-9), node


@pytest.mark.engine
@pytest.mark.parametrize(
    ("cards", "why"),
    [
        ("s1 vcc x vb 0 sw\nrx x in 1k", "closed"),
        ("d1 in n dd area=3 m=2\nrn n 0 1k", "area"),
        ("t1 in 0 n 0 z0=50 td=1n\nrn n 0 50\nd1 n 0 dd", "transmission line"),
        ("b1 o 0 v=hertz*v(in)\nro o 0 1k", "hertz"),
    ],
)
def test_what_has_no_equivalent_is_kept_and_says_why(cards: str, why: str) -> None:
    circuit = elaborate(read_text(f"kept\n{MODELS}{cards}\n.end\n"))
    operated = operate(circuit.deck, circuit)
    assert operated.point is not None, operated.failure
    linear = linearise(circuit, operated.point)
    assert any(why in reason for reason in linear.kept.values()), linear.kept
    assert any(isinstance(e, Device) for e in linear.circuit.elements)
