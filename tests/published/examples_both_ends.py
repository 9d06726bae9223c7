"""Examples with both corners, and two feedback pairs of our own.

No published feedback pair with numbers was found, so U1 and U2 are ours, unpublished; their
recomputed figures agree with ngspice 39 to the digits given.

Exact corners carry one digit fewer than elsewhere: the last one depends on whether −3 dB is
counted from the gain at the midband frequency or with every capacitor ideal (0.01 % apart).
"""

from __future__ import annotations

from published.example import HIGH, LOW, Corner, Example, Figure, high, low, pole, zero

_PAIR = """
Vs in 0 AC 1
Rs in a 1k
C1 a b1 1u
RB b1 0 100k
Rpi1 b1 e1 10k
Cpi1 b1 e1 10p
Cmu1 b1 c1 2p
Gm1 c1 e1 b1 e1 10m
RE1 e1 0 100
RC1 c1 0 10k
Rpi2 c1 e2 2.5k
Cpi2 c1 e2 20p
Cmu2 c1 c2 2p
Gm2 c2 e2 c1 e2 40m
RE2 e2 0 1k
CE2 e2 0 100u
RC2 c2 0 4.7k
C2 c2 out 10u
RL out 0 10k
"""

_OURS = "own circuit, unpublished; confirmed with ngspice 39"
_NEAMEN = "Neamen, Electronic Circuit Analysis and Design, "

EXAMPLES = (
    Example(
        id="A10",
        title="FET follower into bypassed common source",
        source="Kumar & Jain, Electronic Devices and Circuits, Ex. 10.20, p. 556 [T]",
        netlist="""
Vs in 0 AC 1
RS in a 200
C1 a g1 1u
RG1 g1 0 50k
Cgs1 g1 s1 5p
Cgd1 g1 0 2p
Gm1 0 s1 g1 s1 10m
RS1 s1 0 250
Cgs2 s1 s2 5p
Cgd2 s1 d2 2p
Gm2 d2 s2 s1 s2 10m
RS2 s2 0 150
C3 s2 0 5.3u
RD2 d2 0 5k
C2 d2 out 10u
RL out 0 10k
""",
        seen=(
            low("C1", Figure("", "50.2k"), Figure("", "3.170")),
            low("C2", Figure("", "15.00k"), Figure("", "1.061")),
            low("C3", Figure("", "60.00"), Figure("", "500.49")),
            high("Cgd1", Figure("", "199.2")),
            high("Cgs1", Figure("", "128.34")),
            high("Cgs2", Figure("", "71.43")),
            high("Cgd2", Figure("", "5785.7")),
        ),
        low=Corner(estimate=Figure("504.72", "504.72"), exact=Figure("", "412.7")),
        high=Corner(
            estimate=Figure("12.27M", "12.272M"),
            exact=Figure("", "13.68M"),
            tau_sum=Figure("", "12.969n"),
        ),
        roots=(zero(LOW, Figure("", "-200.19")),),
        diagnosis=((LOW, "zero"),),
    ),
    Example(
        id="A38",
        title="coupling capacitor and load capacitor",
        source=_NEAMEN + "Ex. 7.7: results [T]; element values [M], they give the recomputed "
        "figures",
        netlist="""
Vs in 0 AC 1
Rs in a 100
CC a b 10u
R1 b 0 40k
R2 b 0 5.7k
* IC 0.99 mA, VT 26 mV, beta 100
Rpi1 b e 2.626k
Gm1 out e b e 38.077m
RE e 0 500
RC out 0 5k
RL out 0 10k
CL out 0 15p
""",
        seen=(
            low("CC", tau=Figure("46.6m", "46.61m"), f=Figure("", "3.4148")),
            high("CL", tau=Figure("50n", "50.00n"), f=Figure("", "3.183M")),
        ),
        low=Corner(estimate=Figure("", "3.4148")),
        high=Corner(estimate=Figure("", "3.183M")),
        gain=Figure("-6.14", "-6.140"),
    ),
    Example(
        id="U1",
        title="pair of common emitters without feedback",
        source=_OURS,
        netlist=_PAIR,
        seen=(
            low("C1", f=Figure("", "8.973")),
            low("CE2", f=Figure("", "14.451")),
            low("C2", f=Figure("", "1.083")),
            high("Cpi1"),
            high("Cmu1"),
            high("Cpi2"),
            high("Cmu2"),
        ),
        low=Corner(estimate=Figure("", "24.51"), exact=Figure("", "18.35")),
        high=Corner(
            estimate=Figure("", "268.9k"),
            exact=Figure("", "272.4k"),
            tau_sum=Figure("", "591.8n"),
        ),
        gain=Figure("", "1200.8"),
        diagnosis=((LOW, "interacting poles"),),
    ),
    Example(
        id="U2",
        title="the same pair with feedback, peaking at both ends",
        source=_OURS,
        netlist=_PAIR + "CF c2 f 10u\nRf f e1 2k\n",
        seen=(
            low("C1"),
            low("CE2"),
            low("C2"),
            low("CF"),
            high("Cpi1"),
            high("Cmu1"),
            high("Cpi2"),
            high("Cmu2"),
        ),
        low=Corner(estimate=Figure("", "5.72"), exact=Figure("", "1.124")),
        high=Corner(
            estimate=Figure("", "11.93M"),
            exact=Figure("", "17.58M"),
            tau_sum=Figure("", "13.341n"),
        ),
        gain=Figure("", "19.94"),
        roots=(
            pole(LOW, Figure("", "-1.034"), Figure("", "2.441")),
            pole(HIGH, Figure("", "-13.54M"), Figure("", "12.38M")),
        ),
        diagnosis=((LOW, "complex"), (HIGH, "complex")),
    ),
)
