"""Published upper corners of FET stages: small capacitors alone, coupling capacitors shorted.

Transistors stand as Gm, Gmb (body effect) and Ro. A name ends in the number of its transistor
where there is more than one.
"""

from __future__ import annotations

from published.example import HIGH, Corner, Example, Figure, Root, high, pole, zero

_SEDRA_SMITH = "Sedra & Smith, Microelectronic Circuits, 5th ed., "
_FRANCO = "Franco, Analog Circuit Design: Discrete and Integrated, "
_CARUSONE = "Carusone, Johns & Martin, Analog Integrated Circuit Design, "
_ROUNDED = "the source rounds on the way"

EXAMPLES = (
    Example(
        id="A14",
        title="common source, two capacitances",
        source=_SEDRA_SMITH + "Ex. 6.6, p. 576 [T]",
        netlist="""
Vs in 0 AC 1
Rsig in g 100k
Rin g 0 420k
Cgs g 0 1p
Cgd g out 1p
Gm1 out 0 g 0 4m
RL out 0 3.33k
""",
        seen=(high("Cgs", Figure("", "80.77k")), high("Cgd", Figure("", "1.160M"))),
        high=Corner(estimate=Figure("128.3k", "128.277k"), exact=Figure("", "128.30k")),
        gain=Figure("-10.8"),
    ),
    Example(
        id="A15",
        title="common source with active load",
        source=_SEDRA_SMITH + "Ex. 6.9, p. 593 [T]",
        netlist="""
* gm = sqrt(2 * 387u * 20 * 100u); the 387 uA/V2 is from memory, the page prints gm 1.244 mA/V
Vs in 0 AC 1
Rsig in g 10k
Cgs g 0 20f
Cgd g out 5f
Gm1 out 0 g 0 1.2441865m
RL out 0 9.82k
CL out 0 25f
""",
        seen=(
            high("Cgs", tau=Figure("200p", "200.0p")),
            high("Cgd", tau=Figure("709p", "710.0p", 0.002, _ROUNDED)),
            high("CL", tau=Figure("246p", "245.5p")),
        ),
        high=Corner(
            estimate=Figure("137M", "137.74M", 0.006, _ROUNDED),
            exact=Figure("", "145.47M"),
            tau_sum=Figure("1155p", "1155.5p"),
            second_coefficient=Figure("0.0712e-18", "0.07120e-18"),
        ),
        roots=(
            zero(HIGH, Figure("40G")),
            pole(HIGH, Figure("-145.4M", "-145.99M", 0.005, _ROUNDED)),
            # 2.45 GHz is from memory [M].
            pole(HIGH, Figure("-2.45G", "-2.437G", 0.006, _ROUNDED)),
        ),
    ),
    Example(
        id="A16",
        title="common gate",
        source=_SEDRA_SMITH + "Ex. 6.11, p. 609 [T]",
        netlist="""
Vs in 0 AC 1
Rsig in s 10k
Cgs s 0 20f
Gm1 out s 0 s 1.25m
Gmb1 out s 0 s 0.25m
Ro1 out s 18k
Cgd out 0 5f
RL out 0 100k
""",
        seen=(high("Cgs", Figure("", "2.965k")), high("Cgd", Figure("", "74.87k"))),
        high=Corner(
            estimate=Figure("366M", "366.997M", 0.003, _ROUNDED), exact=Figure("", "376.0M")
        ),
        gain=Figure("7.0"),
    ),
    Example(
        id="A17-cs",
        title="common source, to compare with the cascode",
        source=_SEDRA_SMITH + "Ex. 6.12, p. 620 [T]",
        netlist="""
Vs in 0 AC 1
Rsig in g 10k
Cgs g 0 20f
Cgd g out 5f
Gm1 out 0 g 0 1.25m
Ro1 out 0 20k
Cdb out 0 5f
CL out 0 5f
RL out 0 20k
""",
        seen=(high("Cgs"), high("Cgd"), high("Cdb"), high("CL")),
        high=Corner(
            estimate=Figure("155.3M", "155.27M"),
            exact=Figure("", "160.6M"),
            tau_sum=Figure("1025p", "1025.0p"),
        ),
    ),
    Example(
        id="A18-cs",
        title="common source",
        source="Sedra & Smith, Microelectronic Circuits, 8th ed., Ex. 10.5, as summarised in "
        "EEE 335 course notes [P]",
        netlist="""
Vs in 0 AC 1
Rsig in g 20k
Cgs g 0 20f
Cgd g out 5f
Gm1 out 0 g 0 2m
RL out 0 10k
CL out 0 25f
""",
        seen=(
            high("Cgs", tau=Figure("", "400p")),
            high("Cgd", tau=Figure("", "2150p")),
            high("CL", tau=Figure("", "250p")),
        ),
        high=Corner(
            estimate=Figure("56.8M", "56.841M"),
            exact=Figure("", "57.91M"),
            tau_sum=Figure("2800p", "2800.0p"),
        ),
        gain=Figure("-20"),
    ),
    Example(
        id="A18-cg",
        title="common gate",
        source="Sedra & Smith, Microelectronic Circuits, 8th ed., Ex. 10.6, as summarised in "
        "EEE 335 course notes: results [P], ro and RL [M]",
        netlist="""
Vs in 0 AC 1
Rsig in s 20k
Cgs s 0 20f
Gm1 out s 0 s 2m
Ro1 out s 20k
Cgd out 0 5f
CL out 0 25f
RL out 0 20k
""",
        seen=(high("Cgs"), high("Cgd"), high("CL")),
        high=Corner(estimate=Figure("263M", "263.22M"), exact=Figure("", "267.3M")),
        gain=Figure("0.95", "0.9535"),
    ),
    Example(
        id="A18-cd",
        title="source follower with a zero",
        source="Sedra & Smith, Microelectronic Circuits, 8th ed., Ex. 10.8, as summarised in "
        "EEE 335 course notes: results [P], element values [M]",
        netlist="""
Vs in 0 AC 1
Rsig in g 10k
Cgd g 0 5f
Cgs g out 20f
Gm1 0 out g out 2m
Gmb1 0 out 0 out 0.4m
Ro1 out 0 20k
RL out 0 20k
CL out 0 15f
""",
        seen=(high("Cgd"), high("Cgs"), high("CL")),
        high=Corner(estimate=Figure("", "1.530G"), exact=Figure("1.9G", "1.862G")),
        gain=Figure("0.8", "0.800"),
        roots=(
            zero(HIGH, Figure("-15.9G", "-15.9G")),
            pole(HIGH, Figure("-1.99G", "-1.981G", 0.005, _ROUNDED)),
            pole(HIGH, Figure("-6.7G", "-6.731G")),
        ),
    ),
    Example(
        id="A19-cs",
        title="common source",
        source="EEE 335 practice problems 5 to 7, course material [P]",
        netlist="""
Vs in 0 AC 1
Rsig in g 5k
Cgs g 0 100f
Cgd g out 30f
Gm1 out 0 g 0 2m
Ro1 out 0 100k
RD out 0 50k
RL out 0 50k
CL out 0 50f
""",
        seen=(
            high("Cgs", Figure("5k", "5.000k"), Figure("500p", "500p")),
            high("Cgd", Figure("225k", "225.0k"), Figure("6750p", "6750p")),
            high("CL", Figure("20k", "20.00k"), Figure("1000p", "1000p")),
        ),
        high=Corner(estimate=Figure("19.3M", "19.3M"), exact=Figure("", "19.56M")),
        gain=Figure("-40", "-40.00"),
    ),
    Example(
        id="A20",
        title="generic stage, two capacitors",
        source="EE-114 exam check, course material [P]",
        netlist="""
Vs in 0 AC 1
Rs in a 15k
Ra a 0 3k
Ca a out 3p
Gm1 out 0 a 0 15m
RL out 0 1k
CL out 0 2p
""",
        seen=(high("Ca", Figure("41k", "41.000k")), high("CL", Figure("", "1.000k"))),
        high=Corner(
            estimate=Figure("8.0M", "8.000M", radians=True),
            exact=Figure("", "1.27447M"),
            tau_sum=Figure("125n", "125.00n"),
        ),
        gain=Figure("-2.5", "-2.500"),
        roots=(
            pole(HIGH, Figure("-8.0077M", "-8.0077M", radians=True)),
            zero(HIGH, Figure("5G", "5.000G", radians=True)),
        ),
    ),
    Example(
        id="A23",
        title="two common sources with drain-source capacitances",
        source="Kumar & Jain, Electronic Devices and Circuits, Ex. 10.21, p. 559 [T]",
        netlist="""
Vs in 0 AC 1
RS in g1 5k
Cgs1 g1 0 5p
Cgd1 g1 d1 1p
Gm1 d1 0 g1 0 1m
Rds1 d1 0 40k
Cds1 d1 0 1p
RD1 d1 0 40k
Cgs2 d1 0 5p
Cgd2 d1 out 1p
Gm2 out 0 d1 0 1m
Rds2 out 0 40k
Cds2 out 0 1p
RD2 out 0 10k
""",
        seen=(
            high("Cgs1"),
            high("Cgd1"),
            high("Cds1"),
            high("Cgs2"),
            high("Cgd2"),
            high("Cds2"),
        ),
        high=Corner(
            estimate=Figure("0.34M", "341.5k"),
            exact=Figure("", "365.2k"),
            tau_sum=Figure("", "466.00n"),
            second_coefficient=Figure("", "1.3980e-14"),
            next_pole=Figure("5.31M", "5.305M"),
        ),
        gain=Figure("160"),
    ),
    Example(
        id="A26",
        title="common source with degeneration and body effect",
        source=_FRANCO + "Ex. 6.19 [P]",
        netlist="""
Vs in 0 AC 1
Rsig in g 10k
Cgb g 0 7.5f
Cgs g s 100f
Csb s 0 7.5f
Cgd g out 7.5f
Cdb out 0 7.5f
Gm1 out s g s 2m
Gmb1 out s 0 s 0.25m
Ro1 out s 25k
RS s 0 1k
RD out 0 20k
""",
        seen=(
            high("Cgb", Figure("10k", "10.000k")),
            high("Csb", Figure("0.44k", "440.1")),
            high("Cgd", Figure("125k", "123.9k", 0.009, "the book's formula is approximate")),
            high("Cgs", Figure("5.55k", "5.550k")),
            high("Cdb", Figure("16.1k", "16.09k")),
        ),
        high=Corner(
            estimate=Figure("94.1M", "94.56M", 0.005, "the book's formula for Cgd is approximate"),
            exact=Figure("", "99.30M"),
        ),
        gain=Figure("-9.78", "-9.780"),
    ),
    Example(
        id="A26-6.16",
        title="common source",
        source=_FRANCO + "Ex. 6.16 [P]",
        netlist="""
Vs in 0 AC 1
R1 in g 10k
Cgs g 0 1.17p
Cgd g out 0.1p
Gm1 out 0 g 0 4m
R2 out 0 4.55k
Cdb out 0 0.2p
""",
        seen=(
            high("Cgs"),
            high("Cgd", Figure("196k", "196.55k", 0.003, "the book cuts the last digit off")),
            high("Cdb"),
        ),
        high=Corner(estimate=Figure("4.9M", "4.933M"), exact=Figure("", "5.014M")),
    ),
    Example(
        id="A29-cs",
        title="common source with an ideal load",
        source=_FRANCO + "Ex. 6.22, corner also by the book's own simulation [P]",
        netlist="""
Vs in 0 AC 1
Rsig in g 10k
Cgs g 0 100f
Cgd g out 20f
Gm1 out 0 g 0 1m
Ro1 out 0 25k
Cdb out 0 20f
""",
        seen=(high("Cgs"), high("Cgd", Figure("285k", "285.0k")), high("Cdb")),
        high=Corner(
            estimate=Figure("22M", "22.105M"),
            exact=Figure("22.3M", "22.58M", 0.013, "read by the book from its simulation"),
        ),
        gain=Figure("-25", "-25.00"),
    ),
    Example(
        id="A30",
        title="common source",
        source=_CARUSONE + "Ex. 4.10, course material [P]",
        netlist="""
* gm = sqrt(2 * 92u * 62.5 * 100u); the 92 uA/V2 is from memory, the book prints gm 1.07 mA/V
Vs in 0 AC 1
Rs in g 180k
Cgs g 0 0.2p
Cgd g out 15f
Gm1 out 0 g 0 1.0723805m
R2 out 0 77k
C2 out 0 0.378p
""",
        seen=(high("Cgs"), high("Cgd"), high("C2")),
        # Published as 0.26 us of the gate side plus 0.03 us of the drain side.
        high=Corner(
            estimate=Figure("550k", "545k", 0.01, "published from the rounded 0.29 µs"),
            exact=Figure("", "552.8k"),
            tau_sum=Figure("0.29u"),
        ),
    ),
    Example(
        id="A32",
        title="source follower with complex poles",
        source=_CARUSONE + "Ex. 4.16 [P]",
        netlist="""
* the book drives Rin as a current source; here its voltage equivalent
Vs in 0 AC 1
Rin in g 18k
Cin g 0 10.7f
Cgs g out 3f
Gm1 0 out g out 0.735m
* Gs1 0.18 mS
Rs1 out 0 5.5555556k
Cs out 0 0.201p
""",
        seen=(high("Cin"), high("Cgs"), high("Cs")),
        high=Corner(estimate=Figure("", "373.5M"), exact=Figure("", "499.4M")),
        roots=(
            Root(
                HIGH,
                "pole",
                magnitude=Figure("4.27G", "4.272G", radians=True),
                quality=Figure("0.554", "0.549", 0.01, "the formula as stored leaves out Gin·Cgs1"),
            ),
            zero(HIGH, Figure("-39G", "-39.0G")),
        ),
    ),
)
