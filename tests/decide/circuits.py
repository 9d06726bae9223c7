"""Circuits of these tests, all invented, as netlists; and the ways to read them."""

from __future__ import annotations

from tauledger.analysis import Analysis, analyze
from tauledger.netlist import parse

TRANSISTOR = "npn (is=12f bf=240 vaf=90 cje=12p cjc=4p tf=0.4n rb=80)"

STAGE = f"""one stage
VCC vcc 0 12
VS in 0 AC 1
RS in a 1k
C1 a b 10u
R1 vcc b 47k
R2 b 0 10k
RC vcc c 4.7k
RE e 0 1k
CE e 0 100u
C2 c out 1u
RL out 0 10k
Q1 c b e qx
.model qx {TRANSISTOR}
.end
"""

PAIR = f"""two stages
VCC vcc 0 15
VS in 0 AC 1
RS in a 2.2k
C1 a b1 4.7u
R1 vcc b1 220k
R2 b1 0 47k
RC1 vcc c1 15k
RE1 e1 0 3.3k
CE1 e1 0 100u
Q1 c1 b1 e1 qx
C2 c1 b2 2.2u
R3 vcc b2 100k
R4 b2 0 22k
RC2 vcc c2 3.9k
RE2 e2 0 1.2k
CE2 e2 0 220u
Q2 c2 b2 e2 qx
C3 c2 out 10u
RL out 0 10k
.model qx {TRANSISTOR}
.end
"""

# Grounded-emitter stage of references A3 [T]: Rsig 5k, RB 100k, gm 40 mA/V, rpi 2.5k, RC 8k,
# RL 5k, the emitter fed by a current source, so that CE alone carries its signal current.
A3 = """bypassed stage of reference A3
VS in 0 AC 1
RSIG in a 5k
CC1 a b 1u
RB b 0 100k
RPI b e 2.5k
GM c e b e 40m
RX e 0 1e12
CE e 0 1u
RC c 0 8k
CC2 c out 1u
RL out 0 5k
.end
"""

# References A11 [T]: Rs 600, rpi 1k, beta 100, RE 1.5k; the collector load does not matter.
A11 = """bypassed stage of reference A11
VS in 0 AC 1
RS in a 600
CB a b 1u
RPI b e 1k
GM c e b e 100m
RE e 0 1.5k
CE e 0 100u
RC out 0 1k
VM out c 0
.end
"""


def run(text: str, output: str = "out") -> Analysis:
    """Analyse a netlist."""
    return analyze(parse(text), output=output)
