"""Our own field-effect circuits for the comparison with ngspice: name to netlist, VIN to out."""

_JN = (
    ".model jn njf vto=-2.2 beta=1.1m lambda=9m rd=15 rs=18 cgs=5p cgd=2.5p pb=0.85 is=20f "
    "fc=0.45\n"
)
_JP = ".model jp pjf vto=-1.8 beta=0.8m lambda=14m rd=25 rs=20 cgs=7p cgd=4p is=30f b=0.8\n"
_M1 = (
    ".model mn nmos level=1 vto=0.9 kp=60u gamma=0.45 phi=0.68 lambda=0.03 tox=40n ld=0.15u "
    "cgso=0.2n cgdo=0.2n cgbo=0.3n cj=0.2m mj=0.45 cjsw=0.3n mjsw=0.3 pb=0.8 rd=12 rs=10 js=1u\n"
    ".model mp pmos level=1 vto=-1.0 kp=22u gamma=0.4 phi=0.7 lambda=0.04 tox=40n ld=0.15u "
    "cgso=0.25n cgdo=0.25n cj=0.3m mj=0.5 pb=0.85 rsh=30\n"
)
_M2 = (
    ".model mn nmos level=2 vto=0.8 tox=45n uo=520 nsub=3e15 ucrit=8e3 uexp=0.15 cgso=0.2n "
    "cgdo=0.25n cj=0.15m\n"
    ".model mp pmos level=2 vto=-0.9 tox=45n uo=200 gamma=0.5 phi=0.65 lambda=0.03 cgso=0.2n "
    "cgdo=0.2n cbd=20f cbs=30f\n"
)
_M3 = (
    ".model mn nmos level=3 vto=0.75 tox=40n uo=480 gamma=0.45 phi=0.66 cgso=0.22n cgdo=0.22n "
    "cj=0.2m\n"
    ".model mp pmos level=3 vto=-0.85 tox=40n uo=180 gamma=0.5 phi=0.7 cgso=0.2n cgdo=0.3n\n"
)
_SHORT2 = (
    ".model mn nmos level=2 vto=0.8 tox=40n nsub=5e15 xj=0.3u ld=0.1u vmax=5e4 neff=2 nfs=2e11 "
    "uo=500 cgso=0.2n cgdo=0.2n\n"
)
_SHORT3 = (
    ".model mn nmos level=3 vto=0.8 tox=40n nsub=5e15 xj=0.3u ld=0.1u vmax=1.5e5 theta=0.06 "
    "eta=0.2 kappa=0.6 delta=0.8 cgso=0.2n cgdo=0.2n\n"
)
_VD = (
    ".model vn vdmos (nchan vto=2.4 kp=4 lambda=5m rd=0.08 rs=0.04 rg=6 cgs=0.7n cgdmax=1.2n "
    "cgdmin=40p a=0.45 is=2p n=1.3 rb=0.03 cjo=0.6n vj=0.7 m=0.4 ksubthres=0.1 tt=40n)\n"
    ".model vp vdmos (pchan vto=-2.8 kp=2 lambda=8m rd=0.15 rs=0.07 rg=9 cgs=0.9n cgdmax=1.5n "
    "cgdmin=60p a=0.4 is=4p rb=0.05 cjo=0.8n)\n"
)


def _common_source(model: str, polarity: str, geometry: str) -> str:
    rail = "5" if polarity == "n" else "-5"
    return (
        model
        + f"""
VDD vdd 0 {rail}
VIN in 0 AC 1
C1 in g 100n
R1 vdd g 1meg
R2 g 0 680k
RD vdd out 22k
RS s 0 6.8k
CS s 0 10u
M1 out g s 0 m{polarity} {geometry}
CL out 0 3p
"""
    )


def _follower(model: str, polarity: str) -> str:
    rail = "6" if polarity == "n" else "-6"
    return (
        model
        + f"""
VDD vdd 0 {rail}
VIN in 0 AC 1
RS in a 10k
C1 a g 47n
R1 vdd g 470k
R2 g 0 1meg
M1 vdd g out 0 m{polarity} w=80u l=3u ad=400p as=400p pd=90u ps=90u
RL out 0 10k
CL out 0 10p
"""
    )


def _inverter(model: str) -> str:
    return (
        model
        + """
VDD vdd 0 4
VIN in 0 AC 1
C1 in g 1u
RF out g 4.7meg
MN out g 0 0 mn w=12u l=2u ad=60p as=60p pd=22u ps=22u
MP out g vdd vdd mp w=30u l=2u ad=150p as=150p pd=40u ps=40u
CL out 0 0.5p
"""
    )


CIRCUITS: dict[str, str] = {
    "jfet common source n": _JN
    + """
VDD vdd 0 15
VIN in 0 AC 1
RS1 in a 100k
C1 a g 10n
RG g 0 1meg
J1 out g s jn
RD vdd out 3.9k
RS s 0 820
CS s 0 47u
""",
    "jfet common source p": _JP
    + """
VDD vdd 0 -12
VIN in 0 AC 1
C1 in g 22n
RG g 0 2.2meg
J1 out g s jp
RD vdd out 4.7k
RS s 0 1.2k
CS s 0 22u
""",
    "jfet follower with a current sink": _JN
    + """
VDD vdd 0 9
VSS vss 0 -9
VIN in 0 AC 1
RG in g 1meg
J1 vdd g out jn
J2 out k vss jn
RK x vss 330
J3 k vss x jn
RKK k vss 10k
CL out 0 47p
""",
    "jfet common gate": _JN
    + """
VDD vdd 0 12
VIN in 0 AC 1
C1 in s 10u
RS s 0 470
J1 out 0 s jn
RD vdd out 2.2k
""",
    "jfet as a resistor": _JN
    + """
VIN in 0 AC 1
VC c 0 -1.1
RG c g 100k
RS in a 10k
C1 a out 10u
RB out 0 47k
VD d 0 0.1
RD d out 33k
J1 out g 0 jn
""",
    "jfet cut off": _JP
    + """
VDD vdd 0 -10
VIN in 0 DC 4 AC 1
J1 out in 0 jp
RD vdd out 100k
""",
    "jfet with a conducting gate": _JN
    + """
VDD vdd 0 6
VIN in 0 DC 1.5 AC 1
RG in g 47k
J1 out g 0 jn area=2 m=2
RD vdd out 220
""",
    "jfet with drain and source exchanged": _JN
    + """
VDD vdd 0 -3
VIN in 0 DC -3.5 AC 1
RG in g 10k
J1 out g 0 jn
RD vdd out 1k
""",
    "jfet and bipolar cascode": _JN
    + """
.model qn npn is=6f bf=220 vaf=75 rb=90 cje=14p cjc=5p tf=0.45n
VDD vdd 0 18
VIN in 0 AC 1
C1 in g 100n
RG g 0 1meg
J1 x g s jn
RS s 0 560
CS s 0 100u
Q1 out b x qn
R1 vdd b 100k
R2 b 0 68k
CB b 0 1u
RD vdd out 2.7k
""",
    "jfet with temperature coefficients": """
.model jt njf vto=-1.5 beta=2m lambda=5m cgs=6p cgd=3p vtotc=-2.2m betatce=-0.5 rs=10
VDD vdd 0 10
VIN in 0 AC 1
RG in 0 1meg
J1 out in s jt
RS s 0 390
RD vdd out 2.2k
""",
    "mos 1 common source n": _common_source(_M1, "n", "w=60u l=4u ad=300p as=300p pd=70u ps=70u"),
    "mos 1 common source p": _common_source(_M1, "p", "w=90u l=4u ad=500p as=500p nrd=0.4 nrs=0.4"),
    "mos 1 follower n with body effect": _follower(_M1, "n"),
    "mos 1 follower p with body effect": _follower(_M1, "p"),
    "mos 1 inverter as an amplifier": _inverter(_M1),
    "mos 1 in triode": _M1
    + """
VDD vdd 0 5
VIN in 0 DC 4 AC 1
RG in g 10k
RD vdd out 100k
M1 out g 0 0 mn w=40u l=2u m=2
""",
    "mos 1 cut off": _M1
    + """
VDD vdd 0 5
VIN in 0 DC 0.3 AC 1
RG in g 10k
RD vdd out 1meg
M1 out g 0 0 mn w=40u l=2u ad=200p pd=50u
""",
    "mos 1 cascode with mirror": _M1
    + """
VDD vdd 0 8
VIN in 0 DC 1.35 AC 1
VB b 0 3
M1 x in 0 0 mn w=50u l=3u
M2 out b x 0 mn w=50u l=3u
M3 r r vdd vdd mp w=100u l=3u
M4 out r vdd vdd mp w=100u l=3u
IR r 0 150u
RL out 0 200k
""",
    "mos 1 differential pair": _M1
    + """
VDD vdd 0 5
VSS vss 0 -5
VIN in 0 AC 1
M1 m in s vss mn w=100u l=3u
M2 out 0 s vss mn w=100u l=3u
M3 m m vdd vdd mp w=60u l=3u
M4 out m vdd vdd mp w=60u l=3u
M5 s r vss vss mn w=40u l=3u
M6 r r vss vss mn w=40u l=3u
RR 0 r 47k
CL out 0 2p
""",
    "mos 2 common source n": _common_source(_M2, "n", "w=60u l=5u ad=300p as=300p"),
    "mos 2 common source p": _common_source(_M2, "p", "w=90u l=5u"),
    "mos 2 follower n with body effect": _follower(_M2, "n"),
    "mos 2 inverter as an amplifier": _inverter(_M2),
    "mos 2 short channel": _common_source(_SHORT2, "n", "w=40u l=2u"),
    "mos 3 common source n": _common_source(_M3, "n", "w=60u l=5u ad=300p as=300p"),
    "mos 3 common source p": _common_source(_M3, "p", "w=90u l=5u"),
    "mos 3 follower p with body effect": _follower(_M3, "p"),
    "mos 3 inverter as an amplifier": _inverter(_M3),
    "mos 3 short channel": _common_source(_SHORT3, "n", "w=40u l=2u"),
    "power mos common source n": _VD
    + """
VDD vdd 0 24
VIN in 0 AC 1
RS1 in a 600
C1 a g 1u
R1 vdd g 560k
R2 g 0 100k
RD vdd out 22
RS s 0 2.2
M1 out g s vn
""",
    "power mos common source p": _VD
    + """
VDD vdd 0 24
VIN in 0 AC 1
C1 in g 1u
R1 vdd g 100k
R2 g 0 470k
RS vdd s 2.7
RD out 0 27
M1 out g s vp
""",
    "power mos complementary followers": _VD
    + """
VP vp 0 20
VM vm 0 -20
VIN in 0 AC 1
RG in m 100
VB1 gn m 2.75
VB2 m gp 3.2
M1 vp gn sn vn
M2 vm gp sp vp
R1 sn out 0.33
R2 sp out 0.33
RL out 0 8
""",
    "power mos in triode": _VD
    + """
VDD vdd 0 12
VIN in 0 DC 10 AC 1
RG in g 47
RD vdd out 10
M1 out g 0 vn
""",
    "power mos off, body diode reverse": _VD
    + """
VDD vdd 0 30
VIN in 0 DC 0 AC 1
RG in g 1k
RD vdd out 10k
M1 out g 0 vn
""",
    "power mos with its body diode conducting": _VD
    + """
VDD vdd 0 -5
VIN in 0 DC 0 AC 1
RG in g 100
RD vdd out 47
M1 out g 0 vn
""",
}
STATIC_ONLY = ("mos 2 short channel", "mos 3 short channel")
"""ngspice's AC analysis takes its own figures, which are not slopes of its current there."""
