"""MOSFET level 1 against ngspice 39 and against its own derivatives.

Source of every reference figure: ngspice 39.3 run by the test itself [P: its output].

Where ngspice differs: with the bulk forward biased it reports ``gmbs = gm·GAMMA/(2·√…)`` with the
root of the *shifted* tangent, 30 % above the slope of its own current at VBS = 0.3 V and
PHI = 0.65 V; so GMB is compared at VBS ≤ 0 here and by differences beyond.
"""

from __future__ import annotations

import dataclasses
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
from tauledger.devices.mosfet import MOSFET1

GEOMETRY = {
    "w": 20e-6, "l": 5e-6, "ad": 100e-12, "as": 200e-12, "pd": 10e-6, "ps": 30e-6, "nrd": 3.0,
    "nrs": 2.0, "m": 2,
}  # fmt: skip
MODELS = {
    "threshold and slope": {"level": 1, "vto": 1.0, "kp": 2e-5},
    "every parameter": {
        "level": 1, "vto": 1.0, "kp": 2e-5, "gamma": 0.5, "phi": 0.65, "lambda": 0.02,
        "tox": 50e-9, "ld": 0.1e-6, "cgso": 2e-10, "cgdo": 3e-10, "cgbo": 4e-10, "cj": 1e-4,
        "mj": 0.4, "cjsw": 1e-10, "mjsw": 0.3, "pb": 0.75, "fc": 0.4, "js": 1e-6, "rsh": 25.0,
    },
    "from the process": {
        "level": 1, "tox": 40e-9, "nsub": 2e15, "nss": 1e10, "tpg": 1, "uo": 500.0, "rd": 40.0,
        "rs": 20.0, "cbd": 1e-12, "cbs": 2e-12, "tnom": 50.0,
    },
    "metal gate": {"level": 1, "tox": 60e-9, "nsub": 1e15, "tpg": 0, "lambda": 0.01},
    "gate of the substrate's kind": {"level": 1, "tox": 60e-9, "nsub": 3e16, "tpg": -1,
                                     "phi": 0.7, "is": 1e-13},
}  # fmt: skip
# Drain, gate, bulk to source, N-type sign: cut off, weak, triode, active, exchanged.
BIASES = list(itertools.product((-0.4, -0.2, 0.04, 0.7, 6.0), (-1.0, 0.8, 1.15, 2.3, 5.0),
                                (-3.0, -0.9)))  # fmt: skip
FIGURES = {
    "gm": ("gm", CONDUCTANCE, 1e-13),
    "gds": ("gds", CONDUCTANCE, 1e-13),
    "gmb": ("gmbs", CONDUCTANCE, 1e-13),
    "vth": ("von", 1e-4, 1e-5),
    "vdsat": ("vdsat", 1e-3, 1e-5),
    "c_gs": ("cgs", CAPACITANCE, 1e-19),
    "c_gd": ("cgd", CAPACITANCE, 1e-19),
    "c_gb": ("cgb", CAPACITANCE, 1e-19),
    "c_bd": ("cbd", CAPACITANCE, 1e-19),
    "c_bs": ("cbs", CAPACITANCE, 1e-19),
}


def bench(model: str, kind: str = "nmos", temperature_c: float = 27.0) -> Bench:
    card = dict(MODELS[model])
    if "vto" in card and kind == "pmos":
        card["vto"] = -card["vto"]
    return Bench(MOSFET1, "m", kind, card, GEOMETRY, temperature_c=temperature_c)


@pytest.mark.referee
@pytest.mark.parametrize("temperature_c", [-40.0, 27.0, 125.0])
@pytest.mark.parametrize("kind", ["nmos", "pmos"])
@pytest.mark.parametrize("model", MODELS)
def test_currents_and_figures_agree_with_ngspice(
    model: str, kind: str, temperature_c: float
) -> None:
    device = bench(model, kind, temperature_c)
    assert_agreement(device, BIASES, FIGURES)


@pytest.mark.referee
def test_forward_biased_bulk_has_the_slope_of_ngspices_current() -> None:
    device = dataclasses.replace(bench("every parameter"), model={
        "level": 1, "vto": 1.0, "kp": 2e-5, "gamma": 0.5, "phi": 0.65, "lambda": 0.02})  # fmt: skip
    biases = [(3.0, 2.0, 0.3), (0.2, 2.0, 0.25), (1.0, 1.1, 0.35)]
    assert_agreement(device, biases, {})
    for bias, (_, _, to_bulk) in zip(biases, device.slopes(biases), strict=True):
        values = device.ours([bias])[1]
        # The drain junction's own conductance stands beside GMB.
        assert close(float(values.values["gmb"][0, 0]), to_bulk, CONDUCTANCE, 1e-10)


@pytest.mark.referee
@pytest.mark.parametrize("bias", [(4.0, 2.5, -1.0), (0.1, 3.0, -1.0), (2.0, 0.9, -1.0)])
def test_gate_capacitances_are_those_of_ngspices_ac_analysis(
    bias: tuple[float, float, float],
) -> None:
    """The factor of two between what SPICE stores and what its AC analysis stamps is settled."""
    model = {name: value for name, value in MODELS["every parameter"].items() if name != "rsh"}
    device = dataclasses.replace(bench("every parameter"), model=model)
    frequency = 1e6 / (2 * np.pi)
    deck = device.deck(small_signal="g")
    for node, volts in zip(device.nodes, device.outer(bias), strict=True):
        deck = deck.replace(f"v{node} {node} 0 0", f"v{node} {node} 0 {volts!r}")
    phasors = alternating_currents(deck, frequency, ["vg#branch", "vs#branch", "vd#branch"])
    values = device.ours([bias])[1].values
    measured = {
        "c_gs": phasors["vs#branch"].imag / 1e6,
        "c_gd": phasors["vd#branch"].imag / 1e6,
    }
    for name, farads in measured.items():
        assert close(float(values[name][0, 0]), farads, CAPACITANCE, 1e-19), (name, farads)
    total = sum(float(values[name][0, 0]) for name in ("c_gs", "c_gd", "c_gb"))
    assert close(total, -phasors["vg#branch"].imag / 1e6, CAPACITANCE, 0.0)


@settings(max_examples=150, deadline=None)
@given(
    st.sampled_from(sorted(MODELS)),
    st.sampled_from(["nmos", "pmos"]),
    st.tuples(*[st.floats(-6.0, 6.0)] * 3),
    st.floats(-0.5, 0.5),
)
def test_derivatives_are_those_of_the_currents(
    model: str, kind: str, volts: tuple[float, float, float], series: float
) -> None:
    gate, drain, bulk = volts
    device = bench(model, kind)
    bulk = min(bulk, 0.9 + min(drain, 0.0))
    voltages = device.sign * np.array([[[gate, drain, bulk, series, -series]]])
    assert_invariants(device, voltages)


def test_a_wild_guess_neither_overflows_nor_warns() -> None:
    device = bench("every parameter")
    wild = np.array([[[1e3, -1e4, 1e4, 10.0, -10.0]], [[-1e4, 1e4, -1e3, 0.0, 0.0]]])
    with np.errstate(over="raise", divide="raise", invalid="raise"):
        found = MOSFET1.evaluate(device.prepared(), wild, GMIN)
    assert np.isfinite(found.current).all()
    assert np.isfinite(found.jacobian).all()


def test_boards_are_solved_as_if_each_were_alone() -> None:
    spread = {"kp": np.array([1e-5, 2e-5, 3e-5]), "vto": np.array([0.9, 1.0, 1.1])}
    model = MODELS["every parameter"]
    voltages = np.array([[[2.0, 3.0, -1.0, 0.0, 0.0]]] * 3)
    together = MOSFET1.prepare([Card("M1", "nmos", model | spread, GEOMETRY)], 27.0, 27.0)
    batch = MOSFET1.operating(together, voltages, GMIN)
    for board in range(3):
        alone = model | {name: float(values[board]) for name, values in spread.items()}
        one = MOSFET1.prepare([Card("M1", "nmos", alone, GEOMETRY)], 27.0, 27.0)
        single = MOSFET1.operating(one, voltages[:1], GMIN)
        for name, value in single.values.items():
            np.testing.assert_array_equal(batch.values[name][board], value[0], err_msg=name)


@pytest.mark.parametrize(
    ("bias", "region"),
    [((5.0, 0.5, 0.0), "cut off"), ((0.2, 3.0, 0.0), "triode"), ((5.0, 3.0, 0.0), "active")],
)
def test_region_names_what_an_amplifier_needs_to_know(
    bias: tuple[float, float, float], region: str
) -> None:
    for kind in ("nmos", "pmos"):
        assert bench("threshold and slope", kind).ours([bias])[1].region[0, 0] == region


def test_dissipation_is_current_times_voltage_with_the_drain_in_place() -> None:
    """Hand calculation: KP/2·W/L·m·(VGS − VTO)²·VDS."""
    by_hand = 0.5 * 2e-5 * 4.0 * 2 * (3.0 - 1.0) ** 2 * 5.0
    for kind in ("nmos", "pmos"):
        values = bench("threshold and slope", kind).ours([(5.0, 3.0, 0.0)])[1]
        assert float(values.values["power"][0, 0]) == pytest.approx(by_hand, rel=1e-6)
        assert float(values.values["id"][0, 0]) * (1 if kind == "nmos" else -1) > 0
