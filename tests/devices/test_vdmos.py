"""Vertical power MOSFET against ngspice 39 and against its own derivatives.

Source of every reference figure: ngspice 39.3 run by the test itself [P: its output].

Where ngspice differs: CGS, CGD and IBV do not follow ``m`` there (m=2 shows 1 nF for CGS=1n and
so does its AC analysis); here they do. Its small-signal analysis holds the drain resistance of RQ
constant; here its slope counts.
"""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from devices.fet_referee import (
    CAPACITANCE,
    CONDUCTANCE,
    GMIN,
    Bench,
    assert_agreement,
    assert_invariants,
    close,
)
from devices.ngspice_point import alternating_currents
from tauledger.devices.interface import Card
from tauledger.devices.vdmos import VDMOS

BODY = {
    "is": 1e-12, "n": 1.2, "bv": 60.0, "ibv": 1e-4, "nbv": 1.5, "cjo": 1e-9, "vj": 0.7, "m": 0.4,
    "fc": 0.4, "tt": 1e-8, "rds": 1e5, "cgs": 1e-9, "cgdmax": 2e-9, "cgdmin": 5e-11, "a": 0.4,
}  # fmt: skip
MODELS = {
    "square law": {"vto": 2.0, "kp": 3.0},
    "soft threshold": BODY | {
        "vto": 2.0, "kp": 3.0, "theta": 0.08, "mtriode": 1.6, "ksubthres": 0.15, "subshift": 0.1,
        "lambda": 0.02, "tcvth": 3e-3, "tksubthres1": 2e-3, "mu": -1.2, "xti": 2.5, "eg": 1.15,
    },
    "with resistances": BODY | {
        "vto": 3.5, "kp": 8.0, "lambda": 0.01, "rd": 0.2, "rs": 0.1, "rg": 5.0, "rb": 0.05,
        "trd1": 4e-3, "trs1": 2e-3, "trs2": 1e-5, "trb1": 1e-3, "trg1": 1e-3, "tnom": 50.0,
    },
    "quasi-saturation": BODY | {
        "vto": 2.0, "kp": 3.0, "rd": 0.4, "rs": 0.1, "rb": 0.05, "rq": 1.5, "vq": 4.0,
        "texp0": 1.7, "texp1": 0.4,
    },
}  # fmt: skip
# Drain and gate to source, N-type sign: exchanged, body diode, cut off, soft, triode, active,
# breakdown.
BIASES = [
    *itertools.product((-0.45, 0.05, 0.5, 3.0, 40.0), (-3.0, 1.6, 2.1, 2.6, 4.0, 8.0)), (60.2, 0.0),
]  # fmt: skip
FIGURES = {
    "gm": ("gm", CONDUCTANCE, 1e-12),
    "gds": ("gds", CONDUCTANCE, 1e-12),
    "vth": ("von", 1e-6, 1e-9),
    "c_gs": ("cgs", CAPACITANCE, 1e-17),
    "c_gd": ("cgd", CAPACITANCE, 1e-17),
    "c_ds": ("cds", CAPACITANCE, 1e-17),
}


def bench(model: str, kind: str = "vdmosn", temperature_c: float = 27.0) -> Bench:
    card = dict(MODELS[model])
    if kind == "vdmosp":
        card["vto"] = -card["vto"]
    return Bench(VDMOS, "m", kind, card, {}, temperature_c=temperature_c)


@pytest.mark.referee
@pytest.mark.parametrize("temperature_c", [-40.0, 27.0, 125.0])
@pytest.mark.parametrize("kind", ["vdmosn", "vdmosp"])
@pytest.mark.parametrize("model", MODELS)
def test_currents_and_figures_agree_with_ngspice(
    model: str, kind: str, temperature_c: float
) -> None:
    assert_agreement(bench(model, kind, temperature_c), BIASES, FIGURES)


@pytest.mark.referee
@pytest.mark.parametrize("bias", [(20.0, 3.0), (1.0, 6.0)])
def test_capacitances_are_those_of_ngspices_ac_analysis(bias: tuple[float, float]) -> None:
    device = bench("soft threshold")
    omega = 1e3
    deck = device.deck(small_signal="g")
    for node, volts in zip(device.nodes, device.outer(bias), strict=True):
        deck = deck.replace(f"v{node} {node} 0 0", f"v{node} {node} 0 {volts!r}")
    phasors = alternating_currents(deck, omega / (2 * np.pi), ["vg#branch", "vd#branch"])
    values = device.ours([bias])[1].values
    total = float(values["c_gs"][0, 0] + values["c_gd"][0, 0])
    assert close(total, -phasors["vg#branch"].imag / omega, CAPACITANCE, 0.0)
    assert close(float(values["c_gd"][0, 0]), phasors["vd#branch"].imag / omega, CAPACITANCE, 0.0)


def test_two_devices_in_parallel_have_twice_everything() -> None:
    single, double = (
        Bench(VDMOS, "m", "vdmosn", MODELS["soft threshold"], {"m": m}).ours([(10.0, 3.0)])
        for m in (1, 2)
    )
    assert double[0]["d"][0] == pytest.approx(2.0 * single[0]["d"][0], rel=1e-9)
    for name in ("gm", "gds", "c_gs", "c_gd", "c_ds", "power"):
        expected = 2.0 * float(single[1].values[name][0, 0])
        assert float(double[1].values[name][0, 0]) == pytest.approx(expected, rel=1e-9), name


@settings(max_examples=150, deadline=None)
@given(
    st.sampled_from(sorted(MODELS)),
    st.sampled_from(["vdmosn", "vdmosp"]),
    st.tuples(st.floats(-4.0, 8.0), st.floats(-0.8, 61.0)),
    st.lists(st.floats(-0.3, 0.3), min_size=4, max_size=4),
)
def test_derivatives_are_those_of_the_currents(
    model: str, kind: str, volts: tuple[float, float], series: list[float]
) -> None:
    gate, drain = volts
    device = bench(model, kind)
    in_drain, in_gate, in_source, in_body = series
    branches = [gate, drain, in_drain, in_gate, in_source, -drain, in_body, drain + in_drain]
    # A device of amperes bends by its KP; its slopes are siemens, the slack is 10 µS.
    assert_invariants(device, device.sign * np.array([[branches]]), curvature=10.0)


def test_a_wild_guess_neither_overflows_nor_warns() -> None:
    device = bench("soft threshold")
    wild = np.array([[[1e3, -1e4, 1.0, 1.0, 1.0, 1e4, 1.0, -1e4]]])
    with np.errstate(over="raise", divide="raise", invalid="raise"):
        for voltages in (wild, -wild):
            found = VDMOS.evaluate(device.prepared(), voltages, GMIN)
            assert np.isfinite(found.current).all()
            assert np.isfinite(found.jacobian).all()


def test_boards_are_solved_as_if_each_were_alone() -> None:
    spread = {"kp": np.array([2.0, 3.0, 4.0]), "vto": np.array([1.8, 2.0, 2.2])}
    model = MODELS["soft threshold"]
    voltages = np.array([[[3.0, 10.0, 0.0, 0.0, 0.0, -10.0, 0.0, 10.0]]] * 3)
    together = VDMOS.prepare([Card("M1", "vdmosn", model | spread, {})], 27.0, 27.0)
    batch = VDMOS.operating(together, voltages, GMIN)
    for board in range(3):
        alone = model | {name: float(values[board]) for name, values in spread.items()}
        one = VDMOS.prepare([Card("M1", "vdmosn", alone, {})], 27.0, 27.0)
        single = VDMOS.operating(one, voltages[:1], GMIN)
        for name, value in single.values.items():
            np.testing.assert_array_equal(batch.values[name][board], value[0], err_msg=name)


@pytest.mark.parametrize(
    ("bias", "region"),
    [
        ((20.0, 1.0), "cut off"),
        ((0.2, 5.0), "triode"),
        ((20.0, 4.0), "active"),
        ((60.5, 0.0), "breakdown"),
    ],
)
def test_region_names_what_an_amplifier_needs_to_know(
    bias: tuple[float, float], region: str
) -> None:
    for kind in ("vdmosn", "vdmosp"):
        assert bench("soft threshold", kind).ours([bias])[1].region[0, 0] == region
