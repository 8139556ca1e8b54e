"""Nonlinear op-amp models of the project's own, by published methods, with any names for their pins.

bipolar, jfet: after Boyle, Cohn, Pederson and Solomon, Macromodeling of integrated circuit operational amplifiers, IEEE
JSSC SC-9 (1974); cmos: behavioural sources, clipped at the supplies; transistors: two gain stages of MOS transistors
with a capacitor by Miller; railed: a linear op-amp with diodes to the supplies.
"""

BODIES = {
    "bipolar": """c1 11 12 8.66e-12
c2 6 7 30e-12
dc {o} 53 dy
de 54 {o} dy
dlp 90 91 dx
dln 92 90 dx
dp {vn} {vp} dx
egnd 99 0 poly(2) ({vp},0) ({vn},0) 0 .5 .5
fb 7 99 poly(5) vb vc ve vlp vln 0 10.61e6 -10e6 10e6 10e6 -10e6
ga 6 0 11 12 188.5e-6
gcm 0 6 10 99 5.961e-9
iee 10 {vn} dc 15.16e-6
hlim 90 0 vlim 1k
q1 11 {n} 13 qx
q2 12 {p} 14 qx
r2 6 9 100e3
rc1 {vp} 11 5.305e3
rc2 {vp} 12 5.305e3
re1 13 10 1.836e3
re2 14 10 1.836e3
ree 10 99 13.19e6
ro1 8 {o} 50
ro2 7 99 25
rp {vp} {vn} 18.16e3
vb 9 0 dc 0
vc {vp} 53 dc 1
ve 54 {vn} dc 1
vlim 7 8 dc 0
vlp 91 0 dc 40
vln 0 92 dc 40
.model dx d(is=800e-18 rs=1)
.model dy d(is=800e-18 rs=1m cjo=10p)
.model qx npn(is=800e-18 bf=93.75)
""",
    "jfet": """c1 11 12 3.5e-12
c2 6 7 15e-12
dc {o} 53 dx
de 54 {o} dx
dlp 90 91 dx
dln 92 90 dx
dp {vn} {vp} dx
egnd 99 0 poly(2) ({vp},0) ({vn},0) 0 .5 .5
fb 7 99 poly(5) vb vc ve vlp vln 0 4.715e6 -5e6 5e6 5e6 -5e6
ga 6 0 11 12 282.8e-6
gcm 0 6 10 99 8.942e-9
iss {vp} 10 dc 195e-6
hlim 90 0 vlim 1k
j1 11 {n} 10 jx
j2 12 {p} 10 jx
r2 6 9 100e3
rd1 {vn} 11 3.536e3
rd2 {vn} 12 3.536e3
ro1 8 {o} 50
ro2 7 99 50
rp {vp} {vn} 2.143e3
rss 10 99 1.026e6
vb 9 0 dc 0
vc {vp} 53 dc 2.2
ve 54 {vn} dc 2.2
vlim 7 8 dc 0
vlp 91 0 dc 25
vln 0 92 dc 25
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
m5 t b {vp} {vp} mp w=50u l=2u
m6 b b {vp} {vp} mp w=50u l=2u
ib b {vn} 20u
m7 {o} d2 {vn} {vn} mn w=200u l=4u
m8 {o} b {vp} {vp} mp w=100u l=2u
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
