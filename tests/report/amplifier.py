"""An invented voice amplifier for the tests of formats, its limits, and ways to break it."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from tauledger.fleet import check_targets, named_targets
from tauledger.review.check import NetlistCheck

NETLIST = """Nurse call intercom: one stage, invented for the tests
VCC vcc 0 DC 12
VIN in  0 DC 0 AC 1
RS  in   src  600
C1  base src  2.2u
R1  vcc  base 68k
R2  base 0    15k
RC  vcc  coll 3.9k
RE  emit 0    1k
CE  emit 0    100u
Q1  coll base emit NVOICE
C2  coll out  1u
RL  out  0    10k
.model NVOICE NPN (IS=15f BF=260 VAF=85 CJE=14p CJC=4.2p TF=0.42n)
.print ac v(out)
.end
"""
LIMITS = """[path.voice]
netlist = "amp.cir"
[path.voice.limits]
low_corner = { max = "120 Hz" }
midband_gain = { min = "40 dB" }
low_corner_set_by = "CE"
"""
CE_LINE = 1 + NETLIST.splitlines().index("CE  emit 0    100u")
SMALL_BYPASS = NETLIST.replace("CE  emit 0    100u", "CE  emit 0    22u ")
SATURATED = NETLIST.replace("RC  vcc  coll 3.9k", "RC  vcc  coll 39k ")
REVERSED = NETLIST.replace("C1  base src  2.2u", "C1  src  base 2.2u ELECTROLYTIC").replace(
    ".print", ".model ELECTROLYTIC C\n.print"
)
FLOATING = NETLIST.replace("RL  out  0    10k", "CL  out  0    1n ")
GARBLED = NETLIST.replace("RL  out  0    10k", "RL  out  0    10q*")


def write(folder: Path, netlist: str, limits: str = "", name: str = "amp.cir") -> Path:
    """Write a netlist, and a configuration beside it when ``limits`` are given."""
    if limits:
        (folder / "tauledger.toml").write_text(limits, encoding="utf-8")
    path = folder / name
    path.write_text(netlist, encoding="utf-8")
    return path


def checked(folder: Path, netlist: str, limits: str = "") -> list[NetlistCheck]:
    """The netlist written to ``folder`` and checked."""
    return checked_files([write(folder, netlist, limits)])


def checked_files(netlists: Sequence[Path]) -> list[NetlistCheck]:
    return check_targets(named_targets(netlists))
