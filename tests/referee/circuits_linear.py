"""Our own circuits with controlled sources, op-amp macromodels, coils and several stable states."""

_N = ".model qn npn is=6f bf=220 br=4 vaf=75 ikf=0.12 rb=90 rc=1.5 cje=14p cjc=5p tf=0.45n\n"
_OPAMP = """
.subckt opamp p n o
RI p n 2meg
G1 0 x p n 1m
RX x 0 100meg
CX x 0 160p
E1 y 0 x 0 1
RO y o 75
.ends
"""
_LATCH = (
    _N
    + """
VIN vcc 0 DC 5 AC 1
R1 vcc c1 1k
R2 vcc out 1.2k
RB1 c1 b2 10k
RB2 out b1 10k
Q1 c1 b1 0 qn
Q2 out b2 0 qn
"""
)

CIRCUITS: dict[str, str] = {
    "op-amp macromodel, inverting": _OPAMP
    + """
VIN in 0 AC 1
R1 in n 10k
R2 n out 100k
X1 0 n out opamp
RL out 0 2k
""",
    "op-amp macromodel with a transistor inside the loop": _OPAMP
    + _N
    + """
VCC vcc 0 12
VIN in 0 DC 1 AC 1
X1 in e b opamp
RB b bb 100
Q1 out bb e qn
RE e 0 1k
RC vcc out 4.7k
""",
    "current-controlled sources": """
VIN in 0 DC 1 AC 1
R1 in a 1k
VM a 0 0
F1 0 x VM 20
RX x 0 2.2k
CX x 0 1n
H1 y 0 VM 5k
RY y out 1k
RZ out x 10k
""",
    "polynomial source": """
VIN in 0 DC 0.5 AC 1
R1 in a 1k
CA a 0 10n
E1 x 0 POLY(1) a 0 0.1 2 0.5
RX x out 1k
G1 out 0 POLY(2) a 0 x 0 0 1e-4 0 2e-4 0
RL out 0 4.7k
""",
    "behavioural sources": _N
    + """
VCC vcc 0 10
VIN in 0 DC 1.2 AC 1
B1 x 0 V=tanh(v(in)-1)*3+2*exp(-v(in)/4)
RX x b 47k
Q1 out b 0 qn
RC vcc out 1k
B2 out 0 I=1e-4*v(in)^2*sqrt(abs(v(out))+1)
""",
    "multiplier of two nodes": """
VIN in 0 DC 2 AC 1
VM m 0 3
B1 out 0 I=-v(in)*v(m)*1e-4
RL out 0 5k
CL out 0 1n
""",
    "coupled coils behind a transistor": _N
    + """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 10u
R1 vcc b 47k
R2 b 0 10k
RE e 0 470
CE e 0 220u
Q1 c b e qn
L1 vcc c 2m
L2 out 0 0.5m
K1 L1 L2 0.96
RL out 0 600
RD vcc c 22k
""",
    "three coupled coils": """
VIN in 0 AC 1
RS in a 50
L1 a 0 100u
L2 x 0 400u
L3 out 0 25u
K12 L1 L2 0.9
K13 L1 L3 0.8
K23 L2 L3 0.85
RX x 0 1k
RL out 0 75
CL out 0 1n
""",
    "coil in a collector": _N
    + """
VCC vcc 0 6
VIN in 0 AC 1
RS in a 50
C1 a b 10n
R1 vcc b 33k
R2 b 0 10k
RE e 0 560
CE e 0 100n
Q1 out b e qn
L1 vcc out 22u
RP vcc out 4.7k
CP out 0 47p
""",
    "latch held one way by a node set": _LATCH + ".nodeset v(out)=0.1\n",
    "latch held the other way by a node set": _LATCH + ".nodeset v(c1)=0.1\n",
    "latch with initial conditions that an operating point ignores": _LATCH
    + ".nodeset v(out)=0.1\n.ic v(out)=5 v(c1)=0\n",
    "regenerative comparator": _N
    + """
VCC vcc 0 10
VIN in 0 DC 2 AC 1
RB in b1 10k
Q1 c1 b1 e qn
Q2 out b2 e qn
RC1 vcc c1 4.7k
RC2 vcc out 3.3k
R1 c1 b2 15k
R2 b2 0 22k
RE e 0 470
""",
    "four junctions in a loop": _N
    + """
.model qp pnp is=4f bf=80 vaf=45 cje=16p cjc=8p subs=1
VCC vcc 0 5
VIN in 0 DC 0 AC 1
RG in b 10k
RA vcc a 1k
QP b out a qp
QN out b 0 qn
RK out a 4.7k
""",
}
SEVERAL_STATES = (
    "latch held one way by a node set",
    "latch held the other way by a node set",
    "latch with initial conditions that an operating point ignores",
    "regenerative comparator",
    "four junctions in a loop",
)
