"""JFET level 1 against ngspice 39 and against its own derivatives.

Source of every reference figure: ngspice 39.3 run by the test itself [P: its output]. ngspice
does not print a JFET's capacitances, so they are read from its AC analysis.
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
from tauledger.devices.jfet import JFET

MODELS = {
    "square law": {"vto": -2.0, "beta": 1e-3},
    "every parameter": {
        "vto": -2.3, "beta": 1.2e-3, "lambda": 0.01, "b": 0.7, "pb": 0.8, "fc": 0.4, "is": 1e-13,
        "xti": 2.5, "eg": 1.15, "tcv": 2e-3, "bex": -1.5, "rd": 20.0, "rs": 30.0, "cgs": 5e-12,
        "cgd": 3e-12,
    },
    "other temperature laws": {
        "vto": -3.1, "beta": 0.4e-3, "lambda": 0.03, "b": 1.3, "vtotc": -2.5e-3, "betatce": -0.5,
        "cgs": 4e-12, "cgd": 4e-12, "tnom": 50.0, "fc": 0.97, "eg": 1.3,
    },
    "enhancement": {"vto": 0.2, "beta": 2e-3, "rs": 5.0, "cgs": 1e-12},
}  # fmt: skip
INSTANCES = {"one": {}, "wide": {"area": 2.5, "m": 3}}
# Drain and gate to source, N-type sign: reverse gate, cut off, triode, active, exchanged, and
# a gate that conducts.
BIASES = [
    *itertools.product((-0.3, 0.06, 0.6, 5.0), (-4.0, -1.4, -0.9, 0.0)),
    (3.0, 0.55), (0.1, 0.5), (-0.2, 0.35), (-2.0, -2.5),
]  # fmt: skip
FIGURES = {"gm": ("gm", CONDUCTANCE, 1e-12), "gds": ("gds", CONDUCTANCE, 1e-12)}


def bench(
    model: str, kind: str = "njf", temperature_c: float = 27.0, instance: str = "one"
) -> Bench:
    return Bench(JFET, "j", kind, MODELS[model], INSTANCES[instance], temperature_c=temperature_c)


@pytest.mark.referee
@pytest.mark.parametrize("temperature_c", [-40.0, 27.0, 125.0])
@pytest.mark.parametrize("kind", ["njf", "pjf"])
@pytest.mark.parametrize("model", MODELS)
def test_currents_and_figures_agree_with_ngspice(
    model: str, kind: str, temperature_c: float
) -> None:
    for instance in INSTANCES:
        device = bench(model, kind, temperature_c, instance)
        assert_agreement(device, BIASES, FIGURES)


@pytest.mark.referee
@pytest.mark.parametrize("temperature_c", [-40.0, 27.0, 125.0])
@pytest.mark.parametrize(
    ("model", "kind", "bias"),
    [
        ("other temperature laws", "njf", (6.0, -1.0)),
        ("other temperature laws", "pjf", (0.3, -0.5)),
        ("other temperature laws", "njf", (0.1, 0.45)),
        ("enhancement", "pjf", (2.0, 0.4)),
    ],
)
def test_capacitances_are_those_of_ngspices_ac_analysis(
    model: str, kind: str, bias: tuple[float, float], temperature_c: float
) -> None:
    device = Bench(
        JFET,
        "j",
        kind,
        {name: value for name, value in MODELS[model].items() if name not in ("rd", "rs")},
        INSTANCES["wide"],
        temperature_c=temperature_c,
    )
    omega = 1e9
    deck = device.deck(small_signal="g")
    for node, volts in zip(device.nodes, device.outer(bias), strict=True):
        deck = deck.replace(f"v{node} {node} 0 0", f"v{node} {node} 0 {volts!r}")
    phasors = alternating_currents(
        deck, omega / (2 * np.pi), ["vs#branch", "vd#branch"], temperature_c
    )
    values = device.ours([bias])[1].values
    for name, source in (("c_gs", "vs#branch"), ("c_gd", "vd#branch")):
        ours = float(values[name][0, 0])
        assert close(ours, phasors[source].imag / omega, CAPACITANCE, 1e-17), name


@settings(max_examples=150, deadline=None)
@given(
    st.sampled_from(sorted(MODELS)),
    st.sampled_from(["njf", "pjf"]),
    st.tuples(st.floats(-8.0, 0.8), st.floats(-8.0, 0.8)),
    st.floats(-0.5, 0.5),
)
def test_derivatives_are_those_of_the_currents(
    model: str, kind: str, volts: tuple[float, float], series: float
) -> None:
    device = bench(model, kind)
    assert_invariants(device, device.sign * np.array([[[*volts, series, -series]]]))


def test_a_wild_guess_neither_overflows_nor_warns() -> None:
    device = bench("every parameter")
    wild = np.array([[[1e3, -1e4, 10.0, -10.0]], [[-1e4, 1e4, 0.0, 0.0]]])
    with np.errstate(over="raise", divide="raise", invalid="raise"):
        found = JFET.evaluate(device.prepared(), wild, GMIN)
        near = JFET.limit(device.prepared(), wild, np.zeros_like(wild))
    assert np.isfinite(found.current).all()
    assert np.abs(near[..., :2]).max() < 20.0


def test_boards_are_solved_as_if_each_were_alone() -> None:
    spread = {"beta": np.array([1e-3, 2e-3, 3e-3]), "vto": np.array([-1.0, -2.0, -3.0])}
    model = MODELS["every parameter"]
    voltages = np.array([[[-0.5, -4.0, 0.0, 0.0]]] * 3)
    together = JFET.prepare([Card("J1", "njf", model | spread, {})], 27.0, 27.0)
    batch = JFET.operating(together, voltages, GMIN)
    for board in range(3):
        alone = model | {name: float(values[board]) for name, values in spread.items()}
        one = JFET.prepare([Card("J1", "njf", alone, {})], 27.0, 27.0)
        single = JFET.operating(one, voltages[:1], GMIN)
        for name, value in single.values.items():
            np.testing.assert_array_equal(batch.values[name][board], value[0], err_msg=name)


@pytest.mark.parametrize(
    ("bias", "region"), [((5.0, -3.0), "cut off"), ((0.2, -0.5), "triode"), ((5.0, -0.5), "active")]
)
def test_region_names_what_an_amplifier_needs_to_know(
    bias: tuple[float, float], region: str
) -> None:
    for kind in ("njf", "pjf"):
        assert bench("square law", kind).ours([bias])[1].region[0, 0] == region


def test_drain_current_by_hand() -> None:
    """BETA·(VGS − VTO)² with the sign of the polarity, and gm = 2·BETA·(VGS − VTO)."""
    for kind, sign in (("njf", 1.0), ("pjf", -1.0)):
        found = bench("square law", kind).ours([(5.0, -1.0)])[1]
        assert float(found.values["id"][0, 0]) == pytest.approx(sign * 1e-3, rel=1e-6)
        assert float(found.values["gm"][0, 0]) == pytest.approx(2e-3)
        assert float(found.values["r_o"][0, 0]) == np.inf
