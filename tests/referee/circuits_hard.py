"""Extreme circuits, found by random search, that plain Newton does not solve: VIN is the supply."""

_MODELS = """
.model qn npn is=3e-15 bf=180 br=3 vaf=80 var=12 ikf=0.1 ise=1e-14 ne=1.6 rb=60 rc=2 re=0.4
.model qp pnp is=2e-15 bf=120 br=3 vaf=50 ikf=0.05 rb=80 rc=3
.model jn njf vto=-2.5 beta=1m lambda=8m rd=20 rs=20
.model jp pjf vto=-2.0 beta=0.7m lambda=10m
.model mn nmos vto=1.1 kp=80u gamma=0.4 phi=0.7 lambda=0.02 rd=5 rs=5
.model mp pmos vto=-1.0 kp=30u gamma=0.3 phi=0.65 lambda=0.03
"""

CIRCUITS: dict[str, str] = {
    "gmin stepping 1": _MODELS
    + """
VIN vcc 0 DC 1000.0 AC 1
M0 out b0 e0 0 mn W=100u L=2u
RU0 vcc b0 506.391
RL0 b0 0 219592.067
RC0 vcc out 292.954
RE0 e0 0 9838.665
""",
    "gmin stepping 2": _MODELS
    + """
VIN vcc 0 DC 1000.0 AC 1
M0 out b0 e0 0 mn W=100u L=2u
RU0 vcc b0 2319.626
RL0 b0 0 5895.939
RC0 vcc out 6330672.84
RE0 e0 0 951585.466
""",
    "gmin stepping 3": _MODELS
    + """
VIN vcc 0 DC 1000.0 AC 1
M0 out b0 e0 e0 mp W=100u L=2u
RU0 vcc b0 307.1
RL0 b0 0 35.937
RC0 vcc out 128338.9
RE0 e0 0 10515.65
""",
    "gmin stepping 4": _MODELS
    + """
VIN vcc 0 DC -15 AC 1
M0 out b0 e0 0 mn W=100u L=2u
RU0 vcc b0 22866.069
RL0 b0 0 966.541
RC0 vcc out 15.943
RE0 e0 0 216611.548
""",
    "source stepping 5": _MODELS
    + """
VIN vcc 0 DC 1000.0 AC 1
M0 c0 b0 e0 e0 mp W=100u L=2u
RU0 vcc b0 1863486.914
RL0 b0 0 39.785
RC0 vcc c0 13590.883
RE0 e0 0 2725517.768
M1 c1 b1 e1 e1 mp W=100u L=2u
RU1 vcc b1 5018.916
RL1 b1 0 1416040.924
RC1 vcc c1 132.936
RE1 e1 0 60.54
RX1 c0 b1 5018.916
M2 out b2 e2 e2 mn W=100u L=2u
RU2 vcc b2 12.22
RL2 b2 0 25573.474
RC2 vcc out 19041.535
RE2 e2 0 22079.294
RX2 c1 b2 12.22
""",
}
