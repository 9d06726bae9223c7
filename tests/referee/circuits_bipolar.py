"""Our own bipolar circuits for the comparison with ngspice: name to netlist, VIN to out."""

_N = (
    ".model qn npn is=6f bf=220 br=4 vaf=75 var=18 ikf=0.12 ise=8f ne=1.6 rb=90 rc=1.5 re=0.4 "
    "cje=14p vje=0.72 mje=0.36 cjc=5p vjc=0.6 mjc=0.32 tf=0.45n tr=40n xtb=1.4 xti=3.1 eg=1.12\n"
)
_P = (
    ".model qp pnp is=4f bf=150 br=3 vaf=45 ikf=0.08 ise=6f ne=1.5 rb=70 rc=2 re=0.5 cje=16p "
    "mje=0.34 cjc=8p mjc=0.38 tf=0.7n tr=60n xtb=1.2 subs=1\n"
)
_HIGH = (
    ".model qh npn is=40f bf=120 vaf=60 ikf=0.6 ikr=0.3 nkf=0.55 ise=0.2p ne=1.8 isc=0.5p nc=1.7 "
    "rb=4 rc=0.3 re=0.05 cje=180p cjc=70p xcjc=0.55 tf=2n xtf=4 vtf=6 itf=0.9 tr=200n xtb=1.5\n"
)
_INTEGRATED = (
    ".model qi npn is=0.2f bf=140 vaf=50 rb=250 rc=60 re=3 cje=0.5p cjc=0.4p cjs=1.1p vjs=0.6 "
    "mjs=0.42 tf=0.2n iss=0.01f xcjc=0.7\n"
    ".model ql pnp subs=-1 is=0.3f bf=45 vaf=30 ikf=0.4m rb=150 rc=80 re=8 cje=0.6p cjc=1.2p "
    "cjs=1.5p mjs=0.4 tf=25n iss=0.02f\n"
    ".model qsub pnp is=0.8f bf=60 vaf=40 rb=90 re=4 cje=1p cjc=2p tf=12n cjs=0.3p\n"
)

CIRCUITS: dict[str, str] = {
    "common emitter npn": _N
    + """
VCC vcc 0 12
VIN in 0 DC 0 AC 1
C1 in b 4.7u
R1 vcc b 82k
R2 b 0 18k
RC vcc out 4.7k
RE e 0 1k
CE e 0 47u
Q1 out b e qn
RL out 0 47k
""",
    "common emitter pnp on a negative rail": _P
    + """
VEE vee 0 -15
VIN in 0 AC 1
C1 in b 2.2u
R1 vee b 120k
R2 b 0 27k
RC vee out 5.6k
RE e 0 1.2k
CE e 0 100u
Q1 out b e qp
""",
    "emitter follower npn": _N
    + """
VCC vcc 0 9
VIN in 0 AC 1
RS in a 10k
C1 a b 1u
R1 vcc b 220k
R2 b 0 270k
Q1 vcc b e qn
RE e 0 3.3k
C2 e out 10u
RL out 0 1k
""",
    "emitter follower pnp": _P
    + """
VCC vcc 0 9
VIN in 0 AC 1
RS in a 4.7k
C1 a b 1u
R1 vcc b 180k
R2 b 0 180k
Q1 0 b out qp
RE vcc out 4.7k
CL out 0 220p
""",
    "common base npn": _N
    + """
VCC vcc 0 15
VIN in 0 AC 1
RS in a 50
C1 a e 22u
RE e 0 1.8k
R1 vcc b 56k
R2 b 0 15k
CB b 0 10u
RC vcc out 3.3k
Q1 out b e qn
CL out 0 15p
""",
    "common base pnp": _P
    + """
VCC vcc 0 15
VIN in 0 AC 1
C1 in e 22u
RE vcc e 2.2k
R1 vcc b 18k
R2 b 0 47k
CB b 0 10u
RC out 0 2.7k
Q1 out b e qp
""",
    "cascode": _N
    + """
VCC vcc 0 18
VIN in 0 AC 1
RS in a 1k
C1 a b1 4.7u
R1 vcc b2 33k
R2 b2 b1 12k
R3 b1 0 8.2k
CB b2 0 10u
RE e 0 820
CE e 0 100u
Q1 c1 b1 e qn
Q2 out b2 c1 qn
RC vcc out 3.3k
""",
    "darlington follower": _N
    + """
VCC vcc 0 20
VIN in 0 AC 1
C1 in b 220n
R1 vcc b 1meg
R2 b 0 1.5meg
Q1 vcc b m qn
Q2 vcc m out qn
RM m out 22k
RE out 0 680
""",
    "complementary feedback pair": _N
    + _P
    + """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 1u
R1 vcc b 150k
R2 b 0 120k
Q1 c b out qn
RQ vcc c 1k
Q2 out c vcc qp
RE out 0 560
""",
    "long-tailed pair": _N
    + """
VCC vcc 0 12
VEE vee 0 -12
VIN in 0 AC 1
RB1 in b1 1k
RB2 b2 0 1k
Q1 c1 b1 e qn
Q2 out b2 e qn
RC1 vcc c1 6.8k
RC2 vcc out 6.8k
RT e vee 5.6k
""",
    "differential pair with mirrors": _N
    + _P
    + """
VCC vcc 0 10
VEE vee 0 -10
VIN in 0 AC 1
Q1 m in e qn
Q2 out b2 e qn
RB2 b2 0 100
Q3 m m vcc qp
Q4 out m vcc qp
RREF 0 r 10k
Q5 r r vee qn
Q6 e r vee qn
RL out 0 22k
CL out 0 30p
""",
    "wilson mirror as a load": _N
    + _P
    + """
VCC vcc 0 15
VIN in 0 DC 0 AC 1
C1 in b 10u
RREF r 0 12k
Q1 r r x qp
Q3 x y vcc qp
Q4 y y vcc qp
Q2 out r y qp
Q5 out b e qn
RE e 0 220
RF out b 470k
RB b 0 47k
RL out 0 100k
""",
    "class ab output with a multiplier": _N
    + _P
    + """
VCC vcc 0 12
VEE vee 0 -12
VIN in 0 AC 1
C1 in bn 10u
R1 vcc bp 4.7k
R2 bn vee 4.7k
QM bp x bn qn
RX1 bp x 1.2k
RX2 x bn 1.2k
CM bp bn 10u
QN vcc bp en qn
QP vee bn ep qp
REN en out 4.7
REP ep out 4.7
RL out 0 220
""",
    "saturated npn": _N
    + """
VCC vcc 0 5
VIN in 0 DC 3 AC 1
RB in b 10k
RC vcc out 2.2k
Q1 out b 0 qn
CL out 0 100p
""",
    "saturated pnp": _P
    + """
VCC vcc 0 5
VIN in 0 DC 1 AC 1
RB in b 12k
RC out 0 1k
Q1 out b vcc qp
""",
    "cut-off npn": _N
    + """
VCC vcc 0 5
VIN in 0 DC -1 AC 1
RB in b 10k
RC vcc out 47k
Q1 out b 0 qn
""",
    "reverse active npn": _N
    + """
VCC vcc 0 5
VIN in 0 DC 0.9 AC 1
RB in b 3.3k
RC vcc out 1k
Q1 0 b out qn
""",
    "reverse active pnp": _P
    + """
VCC vcc 0 5
VIN in 0 DC 4.1 AC 1
RB in b 4.7k
RC out 0 1.5k
Q1 vcc b out qp
""",
    "high injection with area and m": _HIGH
    + """
VCC vcc 0 24
VIN in 0 AC 1
C1 in b 100u
R1 vcc b 820
R2 b 0 100
Q1 out b e qh area=1.5 m=2
RC vcc out 15
RE e 0 2.2
""",
    "transit time that grows with current": _HIGH
    + """
VCC vcc 0 12
VIN in 0 AC 1
RS in a 50
C1 a b 100u
R1 vcc b 1.5k
R2 b 0 330
Q1 out b e qh
RC vcc out 22
RE e 0 5.6
CE e 0 470u
""",
    "integrated follower and mirror, substrate wired": _INTEGRATED
    + """
VCC vcc 0 5
VSUB sub 0 -1
VIN in 0 DC 2.5 AC 1
RS in b 5k
Q1 vcc b out sub qi
Q2 out r 0 sub qi
Q3 r r 0 sub qi
RREF vcc r 22k
CL out 0 2p
""",
    "lateral pnp mirror": _INTEGRATED
    + """
VCC vcc 0 5
VIN in 0 DC 1.2 AC 1
Q1 r r vcc 0 ql
Q2 out r vcc 0 ql
Q3 r in e 0 qi
RE e 0 4.7k
RL out 0 15k
""",
    "pnp that ngspice takes as lateral": _INTEGRATED
    + """
VCC vcc 0 6
VIN in 0 DC 3 AC 1
RS in b 20k
Q1 0 b out qsub
RE vcc out 12k
""",
    "collector feedback": _N
    + """
VCC vcc 0 3
VIN in 0 AC 1
C1 in b 1u
RF out b 330k
RC vcc out 2.2k
Q1 out b 0 qn
""",
    "microampere stage": _N
    + """
VCC vcc 0 1.5
VIN in 0 AC 1
C1 in b 100n
RF out b 22meg
RC vcc out 680k
Q1 out b 0 qn
""",
    "two stages with overall feedback": _N
    + """
VCC vcc 0 24
VIN in 0 AC 1
C1 in b1 1u
RB e2 b1 220k
RC1 vcc c1 47k
Q1 c1 b1 e1 qn
RE1 e1 0 390
Q2 out c1 e2 qn
RC2 vcc out 4.7k
RE2 e2 0 1k
CE2 e2 0 100u
RF out f 10k
CF f e1 10u
""",
    "bootstrapped follower": _N
    + """
VCC vcc 0 15
VIN in 0 AC 1
RS in a 100k
C1 a b 100n
R1 vcc m 100k
R2 m 0 100k
R3 m b 100k
CB out m 10u
Q1 vcc b out qn
RE out 0 4.7k
""",
    "phase splitter": _N
    + """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 470n
R1 vcc b 270k
R2 b 0 100k
Q1 out b e qn
RC vcc out 2.7k
RE e 0 2.7k
C2 e x 1u
RX x 0 10k
""",
    "device warmer than the board": _N
    + """
.options tnom=40 gmin=1e-11
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 4.7u
R1 vcc b 82k
R2 b 0 18k
RC vcc out 4.7k
RE e 0 1k
Q1 out b e qn dtemp=25
Q2 vcc b e2 qn temp=80
RE2 e2 0 2.2k
""",
    "crowded base": """
.model qc npn is=10f bf=90 ikf=5m rb=200 rbm=15 irb=20u cje=3p cjc=2p tf=0.5n vaf=60
VCC vcc 0 12
VIN in 0 AC 1
RS in a 1k
C1 a b 10u
R1 vcc b 27k
R2 b 0 6.8k
RC vcc out 820
RE e 0 220
Q1 out b e qc
""",
}
