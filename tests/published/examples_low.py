"""Published lower corners: coupling and bypass capacitors alone, device capacitances left out.

Transistors stand as hybrid-π elements (Gm, Rpi, Ro). Every capacitor here belongs to the low end.
"""

from __future__ import annotations

from published.example import LOW, Corner, Example, Figure, low, pole, zero

_FIVE_K_STAGE = """
Vs in 0 AC 1
Rsig in a 5k
CC1 a b {cc1}
RB b 0 100k
Rpi1 b e 2.5k
Gm1 c e b e 40m
CE e 0 {ce}
RC c 0 8k
CC2 c out {cc2}
RL out 0 5k
"""

_PARTS_ROUNDED = "the source rounds the parts it has designed"

EXAMPLES = (
    Example(
        id="A1",
        title="common source, three capacitors",
        source="Sedra & Smith, Microelectronic Circuits, 5th ed., Ex. 4.13, p. 335 [T]",
        netlist="""
Vs in 0 AC 1
Rsig in a 100k
CC1 a g 3.3n
RG g 0 4.7meg
Gm1 d s g s 1m
* the source is biased by a current source: no RS
CS s 0 1.6u
RD d 0 15k
CC2 d out 0.53u
RL out 0 15k
""",
        seen=(
            low("CC1", Figure("", "4.800M"), Figure("10", "10.048", 0.005, _PARTS_ROUNDED)),
            low("CS", Figure("", "1.000k"), Figure("100", "99.47", 0.006, _PARTS_ROUNDED)),
            low("CC2", Figure("", "30.00k"), Figure("10", "10.010", 0.005, _PARTS_ROUNDED)),
        ),
        low=Corner(estimate=Figure("", "119.5"), exact=Figure("", "101.4")),
    ),
    Example(
        id="A2",
        title="common emitter biased by a current source",
        source="Sedra & Smith, Microelectronic Circuits, 5th ed., Exercise 5.52, "
        "course solution sheet [P]",
        netlist=_FIVE_K_STAGE.format(cc1="1u", ce="1u", cc2="1u"),
        seen=(
            low("CC1", Figure("7.44k", "7439.0"), Figure("21.4", "21.395")),
            low(
                "CE",
                Figure("71.9", "71.900"),
                Figure("2210", "2213.6", 0.002, "the sheet rounds to three digits"),
            ),
            low("CC2", Figure("", "13000"), Figure("12.2", "12.243")),
        ),
        low=Corner(
            estimate=Figure("2.24k", "2247.2", 0.004, "sum of corners the sheet had rounded"),
            exact=Figure("", "2233.5"),
        ),
    ),
    Example(
        id="A3",
        title="capacitors designed for 100 Hz, split 80/10/10 %",
        source="Sedra & Smith, Microelectronic Circuits, 5th ed., Ex. 5.19, p. 502 [T]",
        netlist=_FIVE_K_STAGE.format(cc1="2.1u", ce="27.6u", cc2="1.2u"),
        seen=(
            low("CC1", Figure("", "7439.0"), Figure("10", "", 0.025, _PARTS_ROUNDED)),
            low(
                "CE",
                Figure("72.1", "71.9", 0.004, "the book takes re = 25 Ω instead of gm and rπ"),
                Figure("80", "", 0.006, _PARTS_ROUNDED),
            ),
            low("CC2", Figure("", "13000"), Figure("10", "", 0.025, _PARTS_ROUNDED)),
        ),
        low=Corner(
            estimate=Figure("100", "100.6", 0.007, _PARTS_ROUNDED),
            exact=Figure("", "90.9"),
        ),
    ),
    Example(
        id="A4",
        title="degenerated common emitter, input coupling",
        source="Neamen, Electronic Circuit Analysis and Design, Ex. 7.3, p. 400 [T]",
        netlist="""
Vs in 0 AC 1
Rsi in a 100
CC a b 1u
R1 b 0 51.2k
R2 b 0 9.6k
* IC 1.81 mA, VT 26 mV, beta 100
Rpi1 b e 1436.464
Gm1 out e b e 69.61538m
RE e 0 400
RC out 0 2k
""",
        seen=(
            low(
                "CC",
                Figure("", "6875.0"),
                Figure("23.17", "23.150", 0.001, "the book rounds Ri to 6.78 kΩ and τ to 6.87 ms"),
                tau=Figure("6.87m", "", 0.001, "from Ri rounded to 6.78 kΩ and added to 0.1 kΩ"),
            ),
        ),
        low=Corner(estimate=Figure("", "23.150"), exact=Figure("", "23.150")),
        gain=Figure("-4.71", "-4.711"),
    ),
    Example(
        id="A5",
        title="emitter follower, output coupling",
        source="Neamen, Electronic Circuit Analysis and Design, Ex. 7.5, p. 403 [T]",
        netlist="""
Vs in 0 AC 1
Rs in b 500
RB b 0 100k
Rpi1 b e 3.1k
Gm1 0 e b e 32.2m
Ro1 e 0 143k
RE e 0 10k
CC2 e out 1u
RL out 0 10k
""",
        seen=(
            low(
                "CC2",
                Figure(
                    "10035.48",
                    "10035.5",
                    1e-5,
                    "published as Ro 35.48 Ω plus RL; β is 100 in the book and gm·rπ = 99.8 here",
                ),
                Figure("15.86", "15.859"),
            ),
        ),
        low=Corner(estimate=Figure("15.86", "15.859"), exact=Figure("", "15.859")),
        gain=Figure("", "0.9877"),
    ),
    Example(
        id="A6",
        title="emitter bypass alone: its pole and its zero",
        source="Neamen, Electronic Circuit Analysis and Design, Ex. 7.8, p. 412 [T]",
        netlist="""
Vs in 0 AC 1
Rs in b 500
* IC 1.06 mA, VT 26 mV, beta 100
Rpi1 b e 2452.830
Gm1 out e b e 40.76923m
RE e 0 4k
CE e 0 1u
RC out 0 2k
""",
        seen=(
            low(
                "CE",
                Figure("", "29.024"),
                Figure("5.49k", "5483.6", 0.002, "the book rounds τ to 29 µs"),
                tau=Figure("29u", "29.024u"),
            ),
        ),
        low=Corner(estimate=Figure("", "5483.6"), exact=Figure("", "5483.3")),
        gain=Figure("-67.73", "-67.73"),
        roots=(
            zero(LOW, Figure("-39.79", "-39.789")),
            pole(LOW, Figure("-5.49k", "-5483.6", 0.002, "the book rounds τ to 29 µs")),
        ),
    ),
    Example(
        id="A7",
        title="common emitter, three capacitors, voltage divider",
        source="Boylestad & Nashelsky, Electronic Devices and Circuit Theory, Ex. 9.11 [T]",
        netlist="""
Vs in 0 AC 1
Rs in a 1k
Cs a b 10u
R1 b 0 40k
R2 b 0 10k
* re 15.76 ohm, beta 100: rpi = beta*re, gm = 1/re
Rpi1 b e 1576
Gm1 c e b e 63.451777m
RE e 0 2k
CE e 0 20u
RC c 0 4k
CC c out 1u
RL out 0 2.2k
""",
        seen=(
            low("Cs", Figure("", "2316.6"), Figure("6.87", "6.870")),
            low(
                "CC",
                Figure("", "6200"),
                Figure("25.68", "25.670", 0.0005, "the transcription takes π as 3.14"),
            ),
            low(
                "CE",
                Figure("", "24.111"),
                Figure(
                    "327.0",
                    "330.05",
                    0.01,
                    "the book sees Rs'/β from the emitter instead of (Rs' + rπ)/(β + 1)",
                ),
            ),
        ),
        low=Corner(estimate=Figure("", "362.6"), exact=Figure("", "337.03")),
        roots=(pole(LOW, Figure("", "-1.802")),),
    ),
    Example(
        id="A8",
        title="common-source JFET, three capacitors, zero of the bypass",
        source="Boylestad & Nashelsky, Electronic Devices and Circuit Theory, Ex. 9.12 [T]",
        netlist="""
Vs in 0 AC 1
Rsig in a 10k
CG a g 0.01u
RG g 0 1meg
Gm1 d s g s 2m
RS s 0 1k
CS s 0 2u
RD d 0 4.7k
CC d out 0.5u
RL out 0 2.2k
""",
        seen=(
            low("CG", f=Figure("15.77", "15.758", 0.001, "the page takes π as 3.14")),
            low("CC", f=Figure("46.16", "46.132", 0.001, "the page takes π as 3.14")),
            low("CS", f=Figure("238.9", "238.73", 0.001, "the page takes π as 3.14")),
        ),
        # Exact lies below the largest single corner, because of the zero of the bypass.
        low=Corner(estimate=Figure("", "300.6"), exact=Figure("", "222.4")),
        roots=(zero(LOW, Figure("", "-79.58")),),
        diagnosis=((LOW, "zero"),),
    ),
    Example(
        id="A9",
        title="common emitter, two corners nearly equal",
        source="Floyd, Electronic Devices, Ex. 10.9 [T]",
        netlist="""
Vs in 0 AC 1
Rs in a 600
C1 a b 0.1u
R1 b 0 62k
R2 b 0 22k
* r'e 16 ohm, beta 100: rpi = beta*r'e, gm = 1/r'e
Rpi1 b e 1600
Gm1 c e b e 62.5m
RE e 0 1k
C2 e 0 10u
RC c 0 2.2k
C3 c out 0.1u
RL out 0 10k
""",
        seen=(
            low("C1", f=Figure("773.9", "773.92")),
            low("C2", f=Figure("746.4", "753.75", 0.011, "the book divides by β, not β + 1")),
            low("C3", f=Figure("130.5", "130.45")),
        ),
        low=Corner(estimate=Figure("", "1658"), exact=Figure("", "1485")),
        gain_db=Figure("38.04", "38.04"),
        shares=(
            ("C1", Figure("", "46.7")),
            ("C2", Figure("", "45.5")),
            ("C3", Figure("", "7.9")),
        ),
    ),
    Example(
        id="A11",
        title="common emitter designed for two equal corners",
        source="Kumar & Jain, Electronic Devices and Circuits, Ex. 10.15, p. 548 [T]",
        netlist="""
Vs in 0 AC 1
Rs in a 600
CB a b 3.98u
Rpi1 b e 1k
Gm1 out e b e 100m
RE e 0 1.5k
CE e 0 406.1u
* the load does not enter the corners; its value is ours
RC out 0 2k
""",
        seen=(
            low("CB", Figure("", "1600"), Figure("25", "24.993")),
            low("CE", Figure("", "15.676"), Figure("25", "25.000")),
        ),
        low=Corner(estimate=Figure("50", "49.99"), exact=Figure("", "49.86")),
    ),
    Example(
        id="A12-coupling",
        title="output coupling alone",
        source="multiple-choice page bissoy 269850 [P]",
        netlist="""
* the page gives RC, RL and CC; transconductance and input resistance are ours
Vs in 0 AC 1
RB in 0 10k
Gm1 c 0 in 0 40m
RC c 0 2k
CC c out 1u
RL out 0 5k
""",
        seen=(
            low(
                "CC",
                Figure("", "7.000k"),
                Figure("22.73", "22.736", 0.0005, "the page cuts the last digit off"),
            ),
        ),
        low=Corner(estimate=Figure("", "22.736"), exact=Figure("", "22.736")),
    ),
    Example(
        id="A12-bypass",
        title="emitter bypass alone, base driven by the source",
        source="multiple-choice page bissoy 269850 [P]",
        netlist="""
* IC 2 mA, VT 26 mV; with 25 mV it would be 636.6 Hz (the page does not say its VT)
* the load does not enter the corner; its value is ours
Vs in 0 AC 1
Gm1 out e in e 76.923077m
CE e 0 20u
RC out 0 2k
""",
        seen=(low("CE", Figure("", "13.000"), Figure("612", "612.1")),),
        low=Corner(estimate=Figure("", "612.1"), exact=Figure("", "612.1")),
    ),
)
