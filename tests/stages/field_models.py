"""Models as vendors and engineers write them, of the project's own: the text of a deck and the pins that are right."""

from tests.stages.macromodels import definition

AROUND = """vcc vcc 0 12
vee vee 0 -12
vin in 0 0.01 ac 1
r1 in sum 10k
r2 sum out 47k
rl out 0 10k
"""
PIECE = definition("bipolar", ".subckt one 1 2 3 4 5", {"p": "1", "n": "2", "vp": "3", "vn": "4", "o": "5"}, "one")
Pins = tuple[str, str, str, str | None, str | None]
"""Non-inverting input, inverting input, output, positive and negative supply."""

DECKS: dict[str, tuple[str, dict[str, Pins], str]] = {
    # what: cards, pins by amplifier, kind
    "supplies split by a divider, stages by controlled sources": (
        """* Node Assignments
*                noninverting input
*                |   inverting input
*                |   |    positive supply
*                |   |    |   negative supply
*                |   |    |   |   output
*                |   |    |   |   |
.subckt ex2      1   2   99  50  28
i1 99 4 100u
q1 6 2 3 qp
q2 5 7 33 qp
re1 3 4 1k
re2 33 4 1k
eos 7 1 poly(1) 16 49 1e-4 1
r3 5 50 2k
r4 6 50 2k
c3 5 6 5p
dp1 1 99 dx
dp2 50 1 dx
dp3 2 99 dx
dp4 50 2 dx
ga 98 9 5 6 1m
r5 98 9 1e6
c4 9 10 30p
d1 9 99 dx
d2 50 9 dx
eh 99 98 99 49 1
ecm 16 49 poly(2) 1 49 2 49 0 2.8e-4 2.8e-4
r8 99 49 40k
r9 49 50 40k
r13 98 16 1
go 98 10 9 98 -1m
ro 98 10 100k
f5 99 50 va8 1
d3 12 99 dx
d4 50 13 dx
eb 14 98 10 98 1
va8 14 15 0
rout 15 28 60
cout 28 0 1p
d5 28 12 dz
d6 13 28 dz
.model dx d(is=1e-15)
.model dz d(is=1e-15 bv=50)
.model qp pnp(bf=200 is=1e-16)
.ends
"""
        + AROUND
        + """xu1 0 sum vcc vee out ex2
""",
        {'xu1': ('0', 'sum', 'out', 'vcc', 'vee')},
        "voltage-feedback",
    ),
    "limits that ngspice draws at random": (
        """.subckt abm inp inn vcc vee out
rin inp inn 1meg
e1 a 0 value={v(inp,inn)*1e5}
r1 a b 1k
c1 b 0 15.9u
e2 c 0 value={limit(v(b), v(vee)+0.1, v(vcc)-0.1)}
ro c out 50
.ends
"""
        + AROUND
        + """xu1 0 sum vcc vee out abm
""",
        {'xu1': ('0', 'sum', 'out', 'vcc', 'vee')},
        "voltage-feedback",
    ),
    "tables for limits": (
        """.subckt tab 3 2 7 4 6
rin 3 2 1meg
g1 0 a table {v(3,2)} = (-1,-1m) (1,1m)
ra a 0 100meg
ca a 0 159p
e2 b 0 table {v(a)} = (-11,-11) (11,11)
ro b 6 50
rq 7 4 10k
.ends
"""
        + AROUND
        + """xu1 0 sum vcc vee out tab
""",
        {'xu1': ('0', 'sum', 'out', 'vcc', 'vee')},
        "voltage-feedback",
    ),
    "bipolar transistors": (
        """.subckt bjtamp 3 2 7 4 6
* transistor level
q1 c2 3 e qp
q2 c1 2 e qp
it 7 e 20u
q3 c1 c1 4 qn
q4 c2 c1 4 qn
q5 c5 c2 e5 qn
re5 e5 4 100
i5 7 c5x 500u
d1 c5x m dd
d2 m c5 dd
q6 7 c5x eo qn
q7 4 c5 eo2 qp
r6 eo 6 25
r7 eo2 6 25
cc c2 c5 10p
.model qn npn(bf=200 is=1e-15 vaf=100 cje=1p cjc=1p tf=0.5n)
.model qp pnp(bf=100 is=1e-15 vaf=60 cje=1p cjc=1p tf=5n)
.model dd d(is=1e-15)
.ends
"""
        + AROUND
        + """xu1 0 sum vcc vee out bjtamp
""",
        {'xu1': ('0', 'sum', 'out', 'vcc', 'vee')},
        "voltage-feedback",
    ),
    "three pins, a hyperbolic tangent": (
        """.subckt op3 p n o
b1 x 0 v=10*tanh(1e4*v(p,n))
r1 x o 75
.ends
"""
        + AROUND
        + """xu1 0 sum out op3
""",
        {'xu1': ('0', 'sum', 'out', None, None)},
        "voltage-feedback",
    ),
    "an enable pin": (
        """.subckt open in+ in- v+ v- out en
rin in+ in- 1e9
b1 a 0 v=(v(en)>1)?v(in+,in-)*2e5:0
r1 a b 1k
c1 b 0 1u
b2 c 0 v=min(max(v(b),v(v-)),v(v+))
ro c out 40
ren en 0 1meg
.ends
"""
        + AROUND
        + """ven en 0 5
xu1 0 sum vcc vee out en open
""",
        {'xu1': ('0', 'sum', 'out', 'vcc', 'vee')},
        "voltage-feedback",
    ),
    "offset pins with a potentiometer": (
        """.subckt nul 1 2 3 4 5 6 7 8
* 1 null 2 in- 3 in+ 4 v- 5 null 6 out 7 v+ 8 nc
q1 c2 3 e1 qp
q2 c1 2 e2 qp
re1 e1 t 1k
re2 e2 t 1k
it 7 t 20u
q3 c1 c1 1 qn
q4 c2 c1 5 qn
rn1 1 4 1k
rn5 5 4 1k
q5 a c2 4 qn
ia 7 a 100u
ra a 4 10meg
cm a c2 1p
eo o 4 a 4 1
ro o 6 50
rnc 8 0 1g
.model qn npn(bf=200 is=1e-15 vaf=100)
.model qp pnp(bf=100 is=1e-15 vaf=60)
.ends
"""
        + AROUND
        + """xu1 n1 sum 0 vee n5 out vcc nc8 nul
rp n1 n5 10k
""",
        {'xu1': ('0', 'sum', 'out', 'vcc', 'vee')},
        "voltage-feedback",
    ),
    "a dual of two instances": (
        PIECE
        + """.subckt dual o1 n1 p1 vm p2 n2 o2 vp
xa p1 n1 vp vm o1 one
xb p2 n2 vp vm o2 one
.ends
vcc vcc 0 12
vee vee 0 -12
vin in 0 0.01 ac 1
r1 in s 10k
r2 s a 10k
xu1 a s 0 vee a b b vcc dual
rl b 0 10k
""",
        {'xu1.xa': ('0', 's', 'a', 'vcc', 'vee'), 'xu1.xb': ('a', 'b', 'b', 'vcc', 'vee')},
        "voltage-feedback",
    ),
    "a dual written flat": (
        """.subckt fd o1 n1 p1 vm p2 n2 o2 vp
g1 0 a1 p1 n1 1m
r1 a1 0 100meg
c1 a1 0 159p
d1 a1 vp dx
d2 vm a1 dx
e1 b1 0 a1 0 1
ro1 b1 o1 75
g2 0 a2 p2 n2 1m
r2 a2 0 100meg
c2 a2 0 159p
d3 a2 vp dx
d4 vm a2 dx
e2 b2 0 a2 0 1
ro2 b2 o2 75
iq vp vm 1m
.model dx d
.ends
vcc vcc 0 12
vee vee 0 -12
vin in 0 0.01 ac 1
r1 in s 10k
r2 s a 10k
xu1 a s 0 vee a b b vcc fd
rl b 0 10k
""",
        {'xu1.1': ('0', 's', 'a', 'vcc', 'vee'), 'xu1.2': ('a', 'b', 'b', 'vcc', 'vee')},
        "voltage-feedback",
    ),
    "current feedback": (
        """.subckt cfb inp inn vp vm out
* current feedback: a buffer to the inverting input, its current into the high-impedance node
rin inp 0 2meg
e1 x 0 inp 0 1
vs x y 0
rinv y inn 50
f1 0 z vs 1
rz z 0 1meg
cz z 0 2p
d1 z vp dx
d2 vm z dx
e2 w 0 z 0 1
ro w out 10
.model dx d
.ends
vcc vcc 0 12
vee vee 0 -12
vin in 0 0.01 ac 1
rf out s 1k
rg s 0 1k
xu1 in s vcc vee out cfb
rl out 0 1k
""",
        {'xu1': ('in', 's', 'out', 'vcc', 'vee')},
        "current-feedback",
    ),
    "a transconductance amplifier": (
        """.subckt ota inp inn iabc vm out vp
g1 0 out value={1m*tanh(v(inp,inn)*10)}
ro out 0 10meg
rin inp inn 26k
rb iabc vm 1k
.ends
vcc vcc 0 12
vee vee 0 -12
vin in 0 0.001 ac 1
xu1 in 0 b vee out vcc ota
rb vcc b 100k
rl out 0 10k
cl out 0 1n
""",
        {'xu1': ('in', '0', 'out', 'vcc', 'vee')},
        "transconductance",
    ),
}  # fmt: skip
