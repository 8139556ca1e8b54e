"""Nonlinear op-amp models of the project's own, by published methods, with any names for their pins.

bipolar, jfet: after Boyle, Cohn, Pederson and Solomon, Macromodeling of integrated circuit operational amplifiers, IEEE
JSSC SC-9 (1974); cmos: behavioural sources, clipped at the supplies; transistors: two gain stages of MOS transistors
with a capacitor by Miller; railed: a linear op-amp with diodes to the supplies.
"""

BODIES = {
    "bipolar": """c1 i11 i12 8.66e-12
c2 i6 i7 30e-12
dc {o} i53 dy
de i54 {o} dy
dlp i90 i91 dx
dln i92 i90 dx
dp {vn} {vp} dx
egnd i99 0 poly(2) ({vp},0) ({vn},0) 0 .5 .5
fb i7 i99 poly(5) vb vc ve vlp vln 0 10.61e6 -10e6 10e6 10e6 -10e6
ga i6 0 i11 i12 188.5e-6
gcm 0 i6 i10 i99 5.961e-9
iee i10 {vn} dc 15.16e-6
hlim i90 0 vlim 1k
q1 i11 {n} i13 qx
q2 i12 {p} i14 qx
r2 i6 i9 100e3
rc1 {vp} i11 5.305e3
rc2 {vp} i12 5.305e3
re1 i13 i10 1.836e3
re2 i14 i10 1.836e3
ree i10 i99 13.19e6
ro1 i8 {o} 50
ro2 i7 i99 25
rp {vp} {vn} 18.16e3
vb i9 0 dc 0
vc {vp} i53 dc 1
ve i54 {vn} dc 1
vlim i7 i8 dc 0
vlp i91 0 dc 40
vln 0 i92 dc 40
.model dx d(is=800e-18 rs=1)
.model dy d(is=800e-18 rs=1m cjo=10p)
.model qx npn(is=800e-18 bf=93.75)
""",
    "jfet": """c1 i11 i12 3.5e-12
c2 i6 i7 15e-12
dc {o} i53 dx
de i54 {o} dx
dlp i90 i91 dx
dln i92 i90 dx
dp {vn} {vp} dx
egnd i99 0 poly(2) ({vp},0) ({vn},0) 0 .5 .5
fb i7 i99 poly(5) vb vc ve vlp vln 0 4.715e6 -5e6 5e6 5e6 -5e6
ga i6 0 i11 i12 282.8e-6
gcm 0 i6 i10 i99 8.942e-9
iss {vp} i10 dc 195e-6
hlim i90 0 vlim 1k
j1 i11 {n} i10 jx
j2 i12 {p} i10 jx
r2 i6 i9 100e3
rd1 {vn} i11 3.536e3
rd2 {vn} i12 3.536e3
ro1 i8 {o} 50
ro2 i7 i99 50
rp {vp} {vn} 2.143e3
rss i10 i99 1.026e6
vb i9 0 dc 0
vc {vp} i53 dc 2.2
ve i54 {vn} dc 2.2
vlim i7 i8 dc 0
vlp i91 0 dc 25
vln 0 i92 dc 25
.model dx d(is=800e-18)
.model jx pjf(is=15e-15 beta=270.1e-6 vto=-1 cgs=3p cgd=2p)
""",
    "cmos": """rin {p} {n} 1e12
cin {p} {n} 4p
bg1 0 g i=100u*tanh((v({p})-v({n}))*10)
rg g mid 1meg
cg g mid 15.9p
emid mid 0 {vp} {vn} 0.5
bout ox 0 v=min(max(v(mid)+(v(g)-v(mid))*10, v({vn})+20m), v({vp})-20m)
ro ox {o} 120
iq {vp} {vn} 1m
""",
    "transistors": """m1 d1 {n} t t mp w=200u l=2u
m2 d2 {p} t t mp w=200u l=2u
m3 d1 d1 {vn} {vn} mn w=50u l=4u
m4 d2 d1 {vn} {vn} mn w=50u l=4u
m5 t bb {vp} {vp} mp w=50u l=2u
m6 bb bb {vp} {vp} mp w=50u l=2u
ib bb {vn} 20u
m7 {o} d2 {vn} {vn} mn w=200u l=4u
m8 {o} bb {vp} {vp} mp w=100u l=2u
cc d2 z 10p
rz z {o} 2k
.model mn nmos level=1 vto=0.7 kp=1e-4 lambda=0.02 gamma=0.4 tox=2e-8 cgso=2e-10 cgdo=2e-10
.model mp pmos level=1 vto=-0.8 kp=4e-5 lambda=0.03 gamma=0.5 tox=2e-8 cgso=2e-10 cgdo=2e-10
""",
    "railed": """rid {p} {n} 2meg
cid {p} {n} 1.4p
gm 0 k1 {p} {n} 1m
ra k1 0 200meg
ca k1 0 159p
d1 k1 k3 dx
vc1 {vp} k3 1.4
d2 k4 k1 dx
vc2 k4 {vn} 1.4
e2 k2 0 k1 0 1
rb k2 k5 1k
cb k5 0 31.8p
e3 k6 0 k5 0 1
ro k6 {o} 75
iq {vp} {vn} 1.5m
.model dx d(is=1e-14 n=0.5)
""",
}
"""By kind of model: the body of a subcircuit, its pins to be put in."""


def definition(kind: str, header: str, pins: dict[str, str], name: str = "part") -> str:
    """A subcircuit of some kind; header: its `.subckt` card and the comments around it; pins: what each role ('p', 'n',
    'o', 'vp', 'vn') is called."""
    return f"{header}\n{BODIES[kind].format(**pins)}.ends {name}\n"
