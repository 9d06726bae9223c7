"""Invented circuits that between them hold every kind of element a deck can have."""

from __future__ import annotations

import re

EVERY_KIND = """Every kind of element, DC-coupled or by capacitor, invented
VCC vcc 0 15
VIN in 0 DC 0 AC 1
I9 0 q9 1m
R9 q9 0 1k
RS in a 1k
C1 a b 1u
R1 vcc b 100k
R2 b 0 22k
Q1 c b e sub QN 2 temp=40
RC vcc c 4.7k
RE e 0 1k
CE e 0 100u
RSUB sub 0 100
Q2 c2 c e2 QP area=1.5 m=2
RE2 vcc e2 2k
RC2 c2 0 3k
C3 c2 g1 100n
RG1 g1 0 1Meg
J1 d1 g1 s1 JN 2
RS1 s1 0 470
RD1 vcc d1 1k
CS1 s1 0 47u
C4 d1 g2 100n
RG2 g2 0 1Meg
J2 d2 g2 s2 JP
RS2 vcc s2 1k
RD2 d2 0 1k
CD2 d2 g3 100n
RG3A vcc g3 1Meg
RG3B g3 0 470k
M1 d3 g3 s3 0 NM w=100u l=2u ad=1n as=1n pd=100u ps=100u
RD3 vcc d3 1k
RS3 s3 0 500
C5 d3 g4 100n
RG4A vcc g4 1Meg
RG4B g4 0 470k
M2 d4 g4 s4 0 NM2 w=100u l=2u
RD4 vcc d4 1k
RS4 s4 0 500
C6 d4 g5 100n
RG5A vcc g5 470k
RG5B g5 0 1Meg
M3 d5 g5 s5 vcc PM3 w=200u l=2u m=2
RD5 d5 0 1k
RS5 vcc s5 500
M4 vcc d5 s6 VN m=2
RS6 s6 0 1k
M5 0 s6 s7 VP
RS7 vcc s7 1k
D1 d5 dd DM area=2
RDD dd 0 10k
D2 0 dz DZ
RDZ vcc dz 2k
L1 d5 l1 1m
L2 l2 0 2m
L3 l3 0 2m
K1 L1 L2 0.8
K2 L1 L3 -0.5
RL1 l1 0 100k
RL2 l2 0 1k
RL3 l3 0 1k
E1 e1n 0 l2 0 2
RE1 e1n f 1k
VS f 0 0
F1 0 fo VS 3
RFO fo 0 1k
H1 ho 0 VS 100
RHO ho 0 1k
G1 0 go fo ho 1m
RGO go 0 1k
B1 bo 0 v=v(go)*(1+tanh(v(go)))+atan(v(go,ho))+i(VS)*3
B2 0 bi i=1m*v(bo)
RBI bi 0 1k
E2 po 0 POLY(2) bi 0 go 0 0 1 0.5 0.1
RPO po out 1k
CL out 0 100p
.model QN npn (is=10f bf=200 vaf=80 cje=10p cjc=3p tf=0.3n rb=50 cjs=2p kf=1e-15)
.model QP pnp (is=10f bf=150 vaf=60 cje=10p cjc=3p tf=0.5n rb=50)
.model JN njf (vto=-2 beta=1m lambda=10m cgs=5p cgd=2p)
.model JP pjf (vto=-2 beta=1m lambda=10m cgs=5p cgd=2p)
.model NM nmos (level=1 vto=1 kp=50u gamma=0.5 lambda=0.02 cgso=1n cgdo=1n tox=50n cj=1e-4)
.model NM2 nmos (level=2 vto=1 uo=600 tox=50n nsub=1e15 cgso=1n cgdo=1n lambda=0.02)
.model PM3 pmos (level=3 vto=-1 uo=250 tox=50n nsub=1e15 theta=0.05 eta=0.02 kappa=0.2)
.model VN vdmos (nchan vto=2 kp=0.5 lambda=0.01 rd=0.1 rs=0.1 rg=10 cgs=200p cgdmin=5p cgdmax=90p)
.model VP vdmos (pchan vto=-2 kp=0.5 lambda=0.01 rd=0.1 rs=0.1 rg=10 cgs=200p cgdmax=90p a=1)
.model DM d (is=1e-14 rs=1 cjo=4p tt=5n)
.model DZ d (is=1e-14 bv=5.1 ibv=1m rs=10)
.nodeset v(c)=10
.options gmin=1e-11 temp=35
.print ac v(out)
.end
"""

LEVEL_ONE = re.sub(
    # Without the vertical MOSFETs, their output resistors and their models.
    r"(?m)^(M4|M5|RS6|RS7|\.model V).*\n",
    "",
    EVERY_KIND.replace("level=2", "level=1")
    .replace("level=3", "level=1")
    .replace(" theta=0.05 eta=0.02 kappa=0.2", ""),
)
"""The same with MOSFETs of level 1 only."""

BAND_PASS = """Band pass of two independent first-order sections, invented
V1 in 0 DC 3 AC 1
C1 in a 1u
R1 a 0 1k
E1 b 0 a 0 2
R2 b out 10k
C2 out 0 100p
.end
"""


def band_pass(frequency_hz: float) -> complex:
    """v(out)/v(in) of :data:`BAND_PASS`, whose corners lie near 159 Hz and 159 kHz."""
    s = 2j * 3.141592653589793 * frequency_hz
    return 2 * (s * 1e-3 / (1 + s * 1e-3)) / (1 + s * 1e-6)
