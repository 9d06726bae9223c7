"""Published corners that come from one pole alone: Miller capacitance at the input, or the output.

Such a figure is not a sum of open-circuit time constants: it leaves out every other pole and lies
above the exact corner, by 0.5 to 21 % here. ``one_pole`` holds it. The element values are
recalled [M] where the source says so; they give the recomputed sums and corners.
"""

from __future__ import annotations

from published.example import Corner, Example, Figure, high

_SEDRA_SMITH = "Sedra & Smith, Microelectronic Circuits, 5th ed., "
_NEAMEN = "Neamen, Electronic Circuit Analysis and Design, "
_RECALLED = ": results [T], element values [M]"

EXAMPLES = (
    Example(
        id="A36-4.12",
        title="common source",
        source=_SEDRA_SMITH + "Ex. 4.12" + _RECALLED,
        netlist="""
Vs in 0 AC 1
Rsig in g 100k
RG g 0 4.7meg
Cgs g 0 1p
Cgd g out 0.4p
Gm1 out 0 g 0 1m
Ro1 out 0 150k
RD out 0 15k
RL out 0 15k
""",
        seen=(high("Cgs"), high("Cgd")),
        high=Corner(
            estimate=Figure("", "379.2k"), exact=Figure("", "379.8k"), one_pole=Figure("382k")
        ),
    ),
    Example(
        id="A36-5.18",
        title="common emitter with base resistance",
        source=_SEDRA_SMITH + "Ex. 5.18" + _RECALLED,
        netlist="""
* fT 800 MHz: Cpi = gm/(2*pi*fT) - Cmu
Vs in 0 AC 1
Rsig in a 5k
RB a 0 100k
Rx1 a b 50
Rpi1 b 0 2.5k
Cpi1 b 0 6.9577p
Cmu1 b out 1p
Gm1 out 0 b 0 40m
Ro1 out 0 100k
RC out 0 8k
RL out 0 5k
""",
        seen=(high("Cpi1"), high("Cmu1")),
        # The book itself prints 754 kHz [M].
        high=Corner(
            estimate=Figure("", "748.9k"), exact=Figure("", "749.5k"), one_pole=Figure("759k")
        ),
    ),
    Example(
        id="A36-9.13",
        title="common emitter with wiring capacitances",
        source="Boylestad & Nashelsky, Electronic Devices and Circuit Theory, Ex. 9.13" + _RECALLED,
        netlist="""
Vs in 0 AC 1
Rs in b 1k
R1 b 0 40k
R2 b 0 10k
Cwi b 0 6p
Rpi1 b 0 1576
Cbe1 b 0 36p
Cbc1 b out 4p
Gm1 out 0 b 0 63.451777m
Cce1 out 0 1p
Cwo out 0 8p
RC out 0 4k
RL out 0 2.2k
""",
        seen=(high("Cwi"), high("Cbe1"), high("Cbc1"), high("Cce1"), high("Cwo")),
        high=Corner(estimate=Figure("", "638k"), exact=Figure("", "643k"), one_pole=Figure("738k")),
    ),
    Example(
        id="A36-10.10",
        title="common emitter",
        source="Floyd, Electronic Devices, Ex. 10.10: Rth, Cin and result [T], the rest [M]",
        netlist="""
* gm so that 20p + 2.4p*(1 + gm*1.1k) is the Cin of 260.6p that the page gives
Vs in 0 AC 1
Rth in b 377.8
Cbe1 b 0 20p
Cbc1 b out 2.4p
Gm1 out 0 b 0 90.22727m
RC out 0 2.2k
RL out 0 2.2k
""",
        seen=(high("Cbe1"), high("Cbc1")),
        # The page prints a wrong power of ten; 1.62 MHz is what its Rth and Cin give.
        high=Corner(exact=Figure("", "1.577M"), one_pole=Figure("1.62M")),
    ),
    Example(
        id="A36-7.14",
        title="common emitter",
        source=_NEAMEN + "Ex. 7.14" + _RECALLED,
        netlist="""
* IC 1.02 mA, VT 26 mV, beta 150
Vs in 0 AC 1
Rs in b 100
R1 b 0 40k
R2 b 0 5.72k
Rpi1 b 0 3.8235k
Cpi1 b 0 35p
Cmu1 b out 4p
Gm1 out 0 b 0 39.230769m
RC out 0 5k
RL out 0 10k
""",
        seen=(high("Cpi1"), high("Cmu1")),
        high=Corner(
            estimate=Figure("", "2.373M"), exact=Figure("", "2.397M"), one_pole=Figure("2.91M")
        ),
    ),
    Example(
        id="A38-7.16",
        title="cascode, pole by pole",
        source=_NEAMEN + "Ex. 7.16" + _RECALLED,
        netlist="""
* the page publishes 38.3 MHz at the input and 12 MHz at the output, each pole on its own
Vs in 0 AC 1
Rs in b1 100
R2 b1 0 20.5k
R3 b1 0 28.3k
Rpi1 b1 0 3.82k
Cpi1 b1 0 35p
Cmu1 b1 x 4p
Gm1 x 0 b1 0 39.2m
Rpi2 x 0 3.82k
Cpi2 x 0 35p
Gm2 out x 0 x 39.2m
Cmu2 out 0 4p
RC out 0 5k
RL out 0 10k
""",
        seen=(high("Cpi1"), high("Cmu1"), high("Cpi2"), high("Cmu2", f=Figure("12M"))),
        high=Corner(
            estimate=Figure("", "8.61M"), exact=Figure("", "10.91M"), one_pole=Figure("12M")
        ),
    ),
)
