"""Published upper corners of cascodes, MOS and bipolar: small capacitors alone.

Transistor 1 takes the signal at its gate or base, transistor 2 at its source or emitter, node x.
"""

from __future__ import annotations

from published.example import HIGH, NO_EFFECT, Corner, Example, Figure, Seen, high

_SEDRA_SMITH = "Sedra & Smith, Microelectronic Circuits, 5th ed., "
_FRANCO = "Franco, Analog Circuit Design: Discrete and Integrated, "
_ROUNDED = "the source rounds on the way"

_FRANCO_CASCODE = """
Vs in 0 AC 1
Rsig in a 1k
Rb1 a b1 200
Rpi1 b1 0 5.2k
Cpi1 b1 0 12p
Cmu1 b1 x 0.5p
Gm1 x 0 b1 0 38.4615385m
Ro1 x 0 50k
Cs1 x 0 1p
Rb2 b2 0 200
Rpi2 b2 x 5.2k
Cpi2 b2 x 12p
Cmu2 b2 out 0.5p
Gm2 out x b2 x 38.4615385m
Ro2 out x 50k
Cs2 out 0 1p
"""

EXAMPLES = (
    Example(
        id="A17-cascode",
        title="cascode",
        source=_SEDRA_SMITH + "Ex. 6.12, p. 620 [T]",
        netlist="""
Vs in 0 AC 1
Rsig in g 10k
Cgs1 g 0 20f
Cgd1 g x 5f
Gm1 x 0 g 0 1.25m
Ro1 x 0 20k
Cdb1 x 0 5f
Cgs2 x 0 20f
Gm2 out x 0 x 1.25m
Gmb2 out x 0 x 0.25m
Ro2 out x 20k
Cgd2 out 0 5f
Cdb2 out 0 5f
CL out 0 5f
RL out 0 20k
""",
        seen=(
            high("Cgs1"),
            high("Cgd1"),
            high("Cdb1"),
            high("Cgs2"),
            high("Cgd2"),
            high("Cdb2"),
            high("CL"),
        ),
        high=Corner(
            estimate=Figure("", "243.7M"),
            exact=Figure("", "311.9M"),
            tau_sum=Figure("653p", "653.03p"),
        ),
        gain=Figure("-23.5", "-23.485"),
    ),
    Example(
        id="A17-cascode-640k",
        title="cascode driven by an ideal source, large load",
        source=_SEDRA_SMITH + "Ex. 6.12, p. 620 [T]",
        netlist="""
* Cgs1 stands across the source and has no say
Vs in 0 AC 1
Cgs1 in 0 20f
Cgd1 in x 5f
Gm1 x 0 in 0 1.25m
Ro1 x 0 20k
Cdb1 x 0 5f
Cgs2 x 0 20f
Gm2 out x 0 x 1.25m
Gmb2 out x 0 x 0.25m
Ro2 out x 20k
Cgd2 out 0 5f
Cdb2 out 0 5f
CL out 0 5f
RL out 0 640k
""",
        seen=(
            Seen("Cgs1", NO_EFFECT),
            high("Cgd1"),
            high("Cdb1"),
            high("Cgs2"),
            high("Cgd2"),
            high("Cdb2"),
            high("CL"),
        ),
        high=Corner(
            estimate=Figure("31.1M", "31.150M", 0.002, _ROUNDED),
            exact=Figure("", "31.257M"),
            tau_sum=Figure("5110p", "5109.4p", 0.0005, _ROUNDED),
        ),
        gain=Figure("-387.5", "-387.5"),
    ),
    Example(
        id="A19-cascode",
        title="cascode of two such transistors",
        source="EEE 335 practice problems 5 to 7, course material [P]",
        netlist="""
Vs in 0 AC 1
Rsig in g 5k
Cgs1 g 0 100f
Cgd1 g x 30f
Gm1 x 0 g 0 2m
Ro1 x 0 100k
Cdb1 x 0 20f
Cgs2 x 0 100f
Gm2 out x 0 x 2m
Ro2 out x 100k
Cgd2 out 0 30f
CL out 0 50f
RL out 0 50k
""",
        seen=(
            high("Cgs1"),
            high("Cgd1"),
            high("Cdb1", Figure("0.746k", "740.7", 0.008, _ROUNDED)),
            high("Cgs2", Figure("0.746k", "740.7", 0.008, _ROUNDED)),
            high("Cgd2"),
            high("CL"),
        ),
        high=Corner(
            estimate=Figure("31.8M", "32.0M", 0.007, "published rounds 4977.5 ps to 5 ns"),
            exact=Figure("", "37.28M"),
            tau_sum=Figure("4977.5p", "4973.5p", 0.001, _ROUNDED),
        ),
        gain=Figure("-99.8", "-99.26", 0.006, _ROUNDED),
    ),
    Example(
        id="A29-cascode",
        title="cascode with an ideal load",
        source=_FRANCO + "Ex. 6.22, corner also by the book's own simulation [P]",
        netlist="""
Vs in 0 AC 1
Rsig in g 10k
Cgs1 g 0 100f
Cgd1 g x 20f
Gm1 x 0 g 0 1m
Ro1 x 0 25k
Cdb1 x 0 20f
Cgs2 x 0 100f
Gm2 out x 0 x 1m
Gmb2 out x 0 x 0.1m
Ro2 out x 25k
Cgd2 out 0 20f
Cdb2 out 0 20f
""",
        seen=(
            high("Cgs1", Figure("10k", "10.000k")),
            high("Cgd1", Figure("285k", "285.0k")),
            high("Cdb1", Figure("25k", "25.00k")),
            high("Cgs2", Figure("25k", "25.00k")),
            high("Cgd2", Figure("737.5k", "737.5k")),
            high("Cdb2", Figure("737.5k", "737.5k")),
        ),
        high=Corner(
            estimate=Figure("4.1M", "4.060M"),
            exact=Figure("4.1M", "4.191M", 0.023, "read by the book from its simulation"),
            tau_sum=Figure("", "39.20n"),
        ),
        gain=Figure("-712.5", "-712.5"),
    ),
    Example(
        id="A31",
        title="cascode",
        source="Carusone, Johns & Martin, Analog Integrated Circuit Design, Ex. 4.13 [P]",
        netlist="""
Vs in 0 AC 1
Rs in g 180k
Cgs1 g 0 0.2p
Cgd1 g x 15f
Gm1 x 0 g 0 1m
Rds1 x 0 100k
Cs2 x 0 0.26p
Gm2 out x 0 x 1m
Rds2 out x 100k
Cout out 0 5.055p
RL out 0 10meg
""",
        seen=(
            high("Cgs1", tau=Figure("36n", "36.0n")),
            high(
                "Cgd1",
                tau=Figure("75n", "138n", 0.85, "the book drops a factor: it sets Rs ~ rds"),
            ),
            high("Cs2", tau=Figure("13n", "13.0n")),
            high(
                "Cout",
                tau=Figure("25.3u", "25.53u", 0.01, "the book rounds Rout to gm·rds²/2"),
            ),
        ),
        high=Corner(
            estimate=Figure("6.3k", "6.190k", 0.018, "the book rounds Rout to gm·rds²/2"),
            exact=Figure("", "6.200k"),
        ),
    ),
    Example(
        id="A27",
        title="cascode with base resistance, complex poles",
        source=_FRANCO + "Ex. 6.20, corner and gain also by the book's own simulation [P]",
        netlist=_FRANCO_CASCODE + "RC out 0 5k\n",
        seen=(
            high("Cpi1", Figure("975", "975"), Figure("11.7n")),
            high("Cmu1", Figure("2111", "2110.9"), Figure("1.06n")),
            high("Cs1", Figure("29.5", "29.50"), Figure("0.03n")),
            high(
                "Cpi2",
                Figure("26", "28.63", 0.11, "the book puts re for the resistance into the emitter"),
                Figure("0.31n", "", 0.12, "from the book's 26 Ω"),
            ),
            high(
                "Cmu2",
                Figure("5k", "5217", 0.05, "the book leaves out the 200 Ω of base 2"),
                Figure("2.5n", "", 0.05, "from the book's 5 kΩ"),
            ),
            high("Cs2", Figure("5k", "4997"), Figure("5n")),
        ),
        high=Corner(
            estimate=Figure("7.7M", "7.676M"),
            exact=Figure("10.2M", "10.199M"),
            tau_sum=Figure("", "20.734n"),
        ),
        gain_db=Figure("43.8", "43.82"),
        diagnosis=((HIGH, "complex"),),
    ),
    Example(
        id="A28",
        title="cascode with an ideal load",
        source=_FRANCO + "Ex. 6.21, corner and gain also by the book's own simulation [P]",
        netlist=_FRANCO_CASCODE,
        seen=(
            high("Cpi1"),
            high("Cmu1", Figure("188k", "188.6k", 0.004, "the book rounds on the way")),
            high("Cs1", Figure("4.87k", "4.874k")),
            high("Cpi2", Figure("4.95k", "4.712k", 0.051, "the book approximates this one")),
            high("Cmu2", Figure("9.1M", "9.116M")),
            high("Cs2", Figure("9.1M", "9.080M")),
        ),
        high=Corner(
            estimate=Figure("11.5k", "11.528k"),
            exact=Figure("11.4k", "11.540k", 0.013, "read by the book from its simulation"),
        ),
        gain_db=Figure("109", "109.0"),
    ),
    Example(
        id="A33",
        title="cascode",
        source="Kumar & Jain, Electronic Devices and Circuits, Ex. 10.13 [T]",
        netlist="""
Vs in 0 AC 1
RS in b1 300
Rpi1 b1 0 2k
Cpi1 b1 0 19.5p
Cmu1 b1 x 0.5p
Gm1 x 0 b1 0 0.05
RC1 x 0 1.5k
Rpi2 x 0 2k
Cpi2 x 0 19.5p
Gm2 out x 0 x 0.05
Cmu2 out 0 0.5p
RC2 out 0 1.5k
""",
        seen=(high("Cpi1"), high("Cmu1"), high("Cpi2"), high("Cmu2")),
        high=Corner(
            estimate=Figure("24.51M", "24.54M", 0.0015, "the page leaves out RC1 at the emitter"),
            exact=Figure("", "29.03M"),
        ),
    ),
)
