"""ngspice solves a sample of the boards of a tolerance spread again: bias, gain and corners."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import ngspice
from decide.circuits import PAIR, TRANSISTOR, run
from tauledger.circuit.elements import Capacitor, Resistor
from tauledger.decide.asked import parse_asked
from tauledger.decide.bench import bench_of, measure
from tauledger.decide.spread import Plan, board_deviations
from tauledger.decide.varied import board_values, variety_of

pytestmark = pytest.mark.referee

ASKED = (
    "R*=10%", "C*=-20..+80%", "Q*.current_gain=-50..+100%", "Q*.base_emitter_voltage=30mV",
    "supply=10%", "temperature=-10..60",
)  # fmt: skip
BOARDS = 1000
SAMPLE = (0, 333, 666, 999)


def test_boards_of_a_spread_are_what_ngspice_makes_of_them(tmp_path: Path) -> None:
    analysis = run(PAIR)
    bench = bench_of(analysis)
    variety = variety_of(
        analysis.circuit, bench.source, None, [parse_asked(text) for text in ASKED]
    )
    plan = Plan(bench, variety, BOARDS, 11, "uniform")
    varied, temperature = board_values(analysis.circuit, variety, board_deviations(plan, 0, BOARDS))
    assert temperature is not None
    found = measure(bench, varied, temperature)
    assert found.measured.all()
    for board in SAMPLE:
        values = {name: float(value[board]) for name, value in varied.items()}
        netlist = tmp_path / f"board{board}.cir"
        netlist.write_text(_netlist(values, float(temperature[board])))
        band = ngspice.band(netlist, "out", bench.midband_hz)
        assert found.gain[board] == pytest.approx(abs(band.gain), rel=5e-3)
        assert found.low_hz[board] == pytest.approx(band.low_hz, rel=5e-3)
        assert found.high_hz[board] == pytest.approx(band.high_hz, rel=5e-3)
    assert np.ptp(found.low_hz[list(SAMPLE)]) > 0.1 * found.low_hz[0]

    def _names() -> set[str]:
        return {
            e.name.lower() for e in analysis.circuit.elements if isinstance(e, Resistor | Capacitor)
        }

    assert _names() <= set(varied)


def _netlist(values: dict[str, float], temperature_c: float) -> str:
    """The circuit with the values of one board, each transistor with a model of its own."""
    lines = []
    for line in PAIR.splitlines():
        words = line.split()
        name = words[0].lower()
        if name == ".model":
            continue
        if name == ".end":
            break
        if name in values:
            words[-1] = repr(values[name])
        if name.startswith("q"):
            words[-1] = f"m{name}"
        lines.append(" ".join(words))
    for name in ("q1", "q2"):
        card = TRANSISTOR.replace("bf=240", f"bf={values[f'{name}.bf']!r}")
        card = card.replace("is=12f", f"is={values[f'{name}.is']!r}")
        lines.append(f".model m{name} {card}")
    lines += [f".temp {temperature_c!r}", ".end", ""]
    return "\n".join(lines)
