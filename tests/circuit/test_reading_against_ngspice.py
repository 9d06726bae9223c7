"""The same text read by ngspice and by us: values, scopes, defaults, order of names.

Everything that must agree stands in one deck; ngspice runs it once. Readings on which we differ
on purpose (4k7, say) are not here but in test_dialects.py.
"""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import ngspice
from tauledger.circuit import flatten
from tauledger.circuit.elements import Capacitor, Inductor, Resistor, VoltageSource
from tauledger.netlist import read

DECK = """* reading test
.param base=3 twice={2*base} late={early+1}
.param early = 7
.param quoted='base*2' spaced = {base * 4}
.func cube(x) {x*x*x}
V1 1 0 1
R1 1 0 10k
R2 1 0 1Meg
R3 1 0 2.2kOhm
R4 1 0 1M
R5 1 0 {twice}
R6 1 0 'twice*2'
R7 1 0 {late}
R8 1 0 quoted
R9 1 0 {spaced}
R10 1 0 {cube(2)}
R11 1 0 r=5k
R12 1 0 1k m=4
R13 1 0 1k scale=3
R14 1 0 1k tc1=0.01 temp=37
R15 1 0 1k tc1=0.01 tc2=0.001 dtemp=20
R16 1 0 1k rmod
R17 1 0 rmod l=20u w=5u
R18 1 0 1e3
R19 1 0
+ 4.7k
R20 1 0 100mil
R21 1 0 0
R22 1 0 {base > 2 ? 11 : 22}
R23 1 0 1k tce=2 temp=47
.model rmod r(rsh=50 tc1=0.01 tnom=17)
C1 1 0 10u
C2 1 0 100pF
C3 1 0 cmod l=10u w=2u
C5 1 0 c=2u m=3
.model cmod c(cj=1e-3 cjsw=1e-9)
L1 10 0 1m
R99 1 10 1
V2 2 0 SIN(1 2 1k 0 0 30)
V3 3 0 PULSE(3 5 0 1n 1n 1m 2m)
V4 4 0 PWL(0 4 1 5)
V5 5 0 EXP(6 7 1m 1m)
V6 6 0 DC 2 SIN(9 1 1k)
V7 7 0 SFFM(1 2 1k 0.5 100 30 60)
V8 8 0 8 AC
V9 9 0 AC 1 DC 3
X1 1 outer
.subckt outer p pz=7
R1 p 0 {pz}
X1 p inner q={pz+1}
X2 p inner
.ends
.subckt inner p q=2
* base is that of the top, pz that of the caller
R1 p 0 {q*base}
R2 p 0 {pz}
.param own={q+100}
R3 p 0 own
.ends
X3 1 scoped rr=5
X4 1 scoped
.subckt scoped p params: rr=9
R1 p 0 sm
.model sm r(r={rr})
X1 p deeper
.subckt deeper p
R1 p 0 sm
.ends
.ends
R40 1 0 rtwice
.model rtwice r(r=3)
.model rtwice r(r=4)
X5 1 ntwice
.subckt ntwice p
R1 p 0 5
.ends
.subckt ntwice p
R1 p 0 6
.ends
X6 1 inside late=3
X7 1 inside
.subckt inside p late=1
R1 p 0 {late}
.param late=9
.ends
.if (base == 3)
R30 1 0 30
.else
R30 1 0 31
.endif
"""


@pytest.mark.referee
def test_values_are_those_of_ngspice(tmp_path: Path) -> None:
    path = tmp_path / "deck.cir"
    path.write_text(DECK + ".end\n")
    circuit = flatten(read(path))
    expected: dict[str, tuple[str, float]] = {}
    for part in circuit.elements:
        # ngspice calls R1 of X1 r.x1.r1, and inside a nested definition r.x3.r.x1.r1.
        name = part.name.lower()
        spice = f"{part.name.rsplit('.', 1)[-1][0].lower()}.{name}" if "." in name else name
        spice = re.sub(r"(x[34])\.x1", r"\1.r.x1", spice)
        if isinstance(part, Resistor) and part.name != "R99":
            expected[f"@{spice}[i]"] = (part.name, 1 / part.resistance_ohm)
        elif isinstance(part, Capacitor):
            expected[f"@{spice}[capacitance]"] = (part.name, part.capacitance_f)
        elif isinstance(part, Inductor):
            expected[f"@{spice}[inductance]"] = (part.name, part.inductance_h)
        elif isinstance(part, VoltageSource):
            expected[f"v({part.nodes[0]})"] = (part.name, part.dc)
    assert len(expected) >= 53
    [found] = ngspice.run(DECK, [("op", " ".join(expected))])
    wrong = {
        name: (value, float(found[quantity][0]))
        for quantity, (name, value) in expected.items()
        if float(found[quantity][0]) != pytest.approx(value, rel=1e-6)
    }
    assert wrong == {}
