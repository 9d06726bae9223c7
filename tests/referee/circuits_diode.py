"""Our own diode circuits for the comparison with ngspice: name to netlist, VIN to out."""

_D = ".model dx d is=3n n=1.8 rs=0.6 cjo=4p vj=0.65 m=0.4 tt=6n xti=3 eg=1.11\n"

CIRCUITS: dict[str, str] = {
    "attenuator in forward bias": _D
    + """
VB sup 0 5
VIN in 0 AC 1
RS in a 1k
C1 a out 1u
RB sup out 4.7k
D1 out 0 dx
""",
    "string of three": _D
    + """
VB sup 0 9
VIN in 0 AC 1
C1 in a 10u
RB sup out 2.2k
D1 out a dx
D2 a b dx
D3 b 0 dx
""",
    "reverse biased as a varactor": """
.model dv d is=1p n=1.1 cjo=60p vj=0.8 m=0.48 rs=1.2
VB sup 0 8
VIN in 0 AC 1
RS in a 10k
RB sup k 100k
C1 a k 10n
D1 0 k dv area=2
C2 k out 22p
RL out 0 1meg
""",
    "regulator in breakdown": """
.model dz d is=2f n=1.05 bv=5.6 ibv=5m rs=2 cjo=90p vj=0.75 m=0.33
VB sup 0 12
VIN in 0 AC 1
RS in a 100
C1 a out 10u
RB sup out 680
D1 0 out dz
""",
    "stiff breakdown": """
.model dz d is=1f bv=12 ibv=1m nbv=1.6 cjo=30p
VB sup 0 -20
VIN in 0 AC 1
C1 in out 1u
RB sup out 1.5k
D1 out 0 dz
""",
    "high injection": """
.model dh d is=0.1n n=1.2 ikf=20m rs=0.2 cjo=40p tt=50n
VB sup 0 5
VIN in 0 AC 1
C1 in out 47u
RB sup out 33
D1 out 0 dh
""",
    "recombination": """
.model dr d is=0.5p n=1.02 isr=2n nr=2 vj=0.7 m=0.4 rs=1 cjo=10p
VB sup 0 1.2
VIN in 0 AC 1
C1 in out 1u
RB sup out 1meg
D1 out 0 dr
""",
    "sidewall": """
.model ds d is=1f n=1.05 jsw=0.2f cjo=1p cjsw=0.3p vjsw=0.6 mjsw=0.25 rs=20
VB sup 0 2
VIN in 0 AC 1
C1 in out 100n
RB sup out 47k
D1 out 0 ds area=2 pj=4
""",
    "several in parallel, hot": _D
    + """
VB sup 0 3.3
VIN in 0 AC 1
C1 in out 10u
RB sup out 220
D1 out 0 dx m=3 area=0.5 dtemp=30
""",
    "bridge between two sources": _D
    + """
VP p 0 6
VN n 0 -6
VIN in 0 AC 1
RS in a 600
RP p x 5.6k
RN y n 5.6k
D1 x a dx
D2 x out dx
D3 a y dx
D4 out y dx
RL out 0 10k
""",
    "photocurrent": """
.model df d is=10p n=1.4 cjo=70p vj=0.6 m=0.45 rs=5
IPH k a DC 40u
VB k 0 5
D1 a k df
VIN in 0 AC 1
C1 in a 1n
RL a 0 47k
RF a out 1k
CO out 0 10p
""",
    "zero bias": _D
    + """
VIN in 0 AC 1
RS in out 10meg
D1 out 0 dx
D2 0 out dx
""",
}
