"""Diode against ngspice 39 and against its own derivatives.

Source of every reference figure: ngspice 39.3 run by the test itself [P: its output].
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import ngspice
from devices.solve_point import assert_exact_derivatives, branch_voltages
from tauledger.devices.diode import DIODE
from tauledger.devices.interface import Card

GMIN = 1e-12
MODELS: Mapping[str, Mapping[str, float]] = {
    "saturation current only": {"is": 1e-14},
    "signal": {"is": 2.52e-9, "rs": 0.568, "n": 1.752, "cjo": 4e-12, "m": 0.4, "tt": 20e-9},
    "reference": {
        "is": 1e-12, "n": 1.2, "bv": 5.6, "ibv": 5e-3, "rs": 3.0, "cjo": 10e-12, "vj": 0.8,
        "m": 0.33, "nbv": 1.5,
    },
    "breakdown with defaults": {"is": 1e-13, "n": 1.1, "bv": 11.0, "rs": 1.0},
    "leaky": {"is": 1e-6, "bv": 10.0, "ibv": 1e-6, "rs": 1.0},
    "breakdown moves with temperature": {"is": 1e-14, "bv": 6.0, "ibv": 1e-3, "tcv": 2e-3,
                                         "rs": 1.0},
    "high injection": {"is": 1e-12, "ikf": 1e-3, "ikr": 1.0, "bv": 5.0, "rs": 0.1},
    "recombination": {"is": 1e-12, "isr": 1e-9, "nr": 2.0, "vj": 0.7, "m": 0.4, "cjo": 3e-12},
    "recombination and knee": {"is": 1e-13, "isr": 1e-10, "ikf": 1e-3, "rs": 0.5},
    "sidewall joined": {"is": 1e-12, "jsw": 1e-12, "cjsw": 2e-12, "php": 0.8, "mjsw": 0.3,
                        "fcs": 0.4, "n": 1.1, "bv": 6.0, "ibv": 1e-3, "rs": 2.0},
    "sidewall apart": {"is": 1e-12, "jsw": 1e-12, "ns": 1.5, "cjp": 2e-12, "n": 1.1, "bv": 6.0,
                       "ibv": 1e-3, "rs": 2.0},
    "temperature coefficients": {
        "is": 1e-12, "rs": 2.0, "trs1": 1e-3, "trs2": 1e-5, "cjo": 3e-12, "m": 0.4, "tm1": 1e-3,
        "tt": 3e-9, "ttt1": 2e-3, "eg": 0.69, "xti": 2.0, "n": 1.05, "tnom": 40.0,
    },
}  # fmt: skip
ANODE_V = [0.9, 0.7, 0.55, 0.3, 0.05, 0.0, -0.1, -1.0, -4.0, -5.5, -5.8, -6.3, -11.5]


@pytest.mark.referee
@pytest.mark.parametrize("temperature_c", [-40.0, 27.0, 125.0])
@pytest.mark.parametrize("name", MODELS)
def test_agrees_with_ngspice(name: str, temperature_c: float) -> None:
    model = MODELS[name]
    sizes = {"pj": 2.0, **({"area": 2.0, "m": 3.0} if temperature_c == 27.0 else {})}
    instance = " ".join(f"{key}={value}" for key, value in sizes.items())
    card = " ".join(f"{key}={value!r}" for key, value in model.items())
    points = ngspice.bias_points(
        f"va a 0 0\nd1 a 0 m {instance}\n.model m d {card}",
        [{"va": volt} for volt in ANODE_V],
        ["i(va)", "@d1[gd]", "@d1[cd]"],
        temperature_c,
    )
    parameters = DIODE.prepare([Card("d1", "d", model, sizes)], temperature_c, 27.0)
    for volt, point in zip(ANODE_V, points, strict=True):
        voltages = branch_voltages(DIODE, parameters, (volt, 0.0))
        values = DIODE.operating(parameters, voltages, GMIN).values
        found = {key: float(array[0, 0]) for key, array in values.items()}
        # Below 1e-13 A ngspice's own last iteration shows.
        assert found["id"] == pytest.approx(-point["i(va)"], rel=4e-4, abs=1e-13), volt
        assert found["vd"] == pytest.approx(volt, abs=1e-12)
        assert found["power"] == pytest.approx(volt * found["id"], abs=1e-15)
        if "isr" not in model:
            assert found["gd"] == pytest.approx(point["@d1[gd]"], rel=2e-3, abs=1e-14), volt
            assert found["cd"] == pytest.approx(point["@d1[cd]"], rel=2e-3, abs=1e-30), volt


@pytest.mark.referee
@pytest.mark.parametrize("name", [name for name, model in MODELS.items() if "isr" in model])
def test_conductance_with_recombination_is_the_slope_of_ngspice_currents(name: str) -> None:
    """ngspice's own gd is not the slope of its current there, see the module docstring."""
    model = {key: value for key, value in MODELS[name].items() if key != "rs"}
    card = " ".join(f"{key}={value!r}" for key, value in model.items())
    step = 1e-5
    anodes = [0.05, 0.3, 0.55, 0.7]
    points = ngspice.bias_points(
        f"va a 0 0\nd1 a 0 m\n.model m d {card}",
        [{"va": volt + side * step} for volt in anodes for side in (-1.0, 1.0)],
        ["i(va)"],
    )
    parameters = DIODE.prepare([Card("d1", "d", model, {})], 27.0, 27.0)
    for index, volt in enumerate(anodes):
        low, high = (-point["i(va)"] for point in points[2 * index : 2 * index + 2])
        voltages = branch_voltages(DIODE, parameters, (volt, 0.0))
        conductance = DIODE.operating(parameters, voltages, GMIN).values["gd"]
        assert float(conductance[0, 0]) == pytest.approx((high - low) / (2.0 * step), rel=1e-4)


model_name = st.sampled_from(sorted(MODELS))


@given(name=model_name, junction=st.floats(-12.0, 0.95), drop=st.floats(-0.1, 0.1))
@settings(max_examples=300, deadline=None)
def test_derivatives_are_exact_and_currents_sum_to_zero(
    name: str, junction: float, drop: float
) -> None:
    parameters = DIODE.prepare([Card("d1", "d", MODELS[name], {"pj": 1.0})], 27.0, 27.0)
    for edge in (-float(parameters.breakdown_v[0, 0]), -3.0 * float(parameters.thermal_v[0, 0])):
        if abs(junction - edge) < 2e-6:
            junction += 1e-5
    assert_exact_derivatives(DIODE, parameters, np.array([[[junction, drop]]]))


@given(
    name=model_name,
    supply=st.floats(-60.0, 60.0),
    resistance=st.floats(1.0, 1e6),
)
@settings(max_examples=150, deadline=None)
def test_newton_with_limiting_settles_from_any_supply(
    name: str, supply: float, resistance: float
) -> None:
    """A supply, a resistor and the diode: the loop every bias network contains."""
    model = {key: value for key, value in MODELS[name].items() if key != "rs"}
    parameters = DIODE.prepare([Card("d1", "d", model, {})], 27.0, 27.0)
    previous = DIODE.initial(parameters)
    volt = 0.0
    for _ in range(40):
        proposed = np.array([[[volt, 0.0]]])
        limited = DIODE.limit(parameters, proposed, previous)
        found = DIODE.evaluate(parameters, limited, GMIN)
        slope = float(found.jacobian[0, 0, 2, 0])
        offset = float(found.current[0, 0, 2]) - slope * float(limited[0, 0, 0])
        new = (supply / resistance - offset) / (slope + 1.0 / resistance)
        if abs(new - volt) < 1e-12 + 1e-12 * abs(new) and np.array_equal(limited, proposed):
            break
        volt, previous = new, limited
    else:
        raise AssertionError(f"no convergence: {volt} V")
    through = float(found.current[0, 0, 2])
    noise = 1e-11 * (1.0 + abs(supply)) / resistance
    assert through == pytest.approx((supply - volt) / resistance, rel=1e-6, abs=noise)


@given(name=model_name, far=st.floats(-1e4, 1e4), before=st.floats(-20.0, 1.0))
@settings(max_examples=100, deadline=None)
def test_any_step_stays_finite(name: str, far: float, before: float) -> None:
    parameters = DIODE.prepare([Card("d1", "d", MODELS[name], {})], 27.0, 27.0)
    proposed, previous = np.array([[[far, 0.0]]]), np.array([[[before, 0.0]]])
    for voltages in (proposed, DIODE.limit(parameters, proposed, previous)):
        found = DIODE.evaluate(parameters, voltages, GMIN)
        assert np.isfinite(found.current).all()
        assert np.isfinite(found.jacobian).all()


def test_boards_and_instances_are_independent() -> None:
    saturation = np.array([1e-14, 1e-12])
    cards = [
        Card("d1", "d", {**MODELS["reference"], "is": saturation}, {}),
        Card("d2", "d", MODELS["signal"], {"m": 2.0}),
    ]
    together = DIODE.prepare(cards, 27.0, 27.0)
    voltages = np.array([[[0.6, 0.01], [0.4, 0.0]], [[-5.5, -0.01], [-3.0, 0.0]]])
    found = DIODE.evaluate(together, voltages, GMIN)
    for board in range(2):
        model = {**MODELS["reference"], "is": float(saturation[board])}
        alone = DIODE.prepare([Card("d1", "d", model, {}), cards[1]], 27.0, 27.0)
        single = DIODE.evaluate(alone, voltages[board : board + 1], GMIN)
        assert found.current[board] == pytest.approx(single.current[0], rel=1e-13)
        assert found.jacobian[board] == pytest.approx(single.jacobian[0], rel=1e-13)


@pytest.mark.parametrize(
    ("volt", "region"),
    [(0.7, "forward"), (0.1, "cut off"), (-2.0, "reverse"), (-5.7, "breakdown")],
)
def test_regions(volt: float, region: str) -> None:
    parameters = DIODE.prepare([Card("d1", "d", MODELS["reference"], {})], 27.0, 27.0)
    voltages = np.array([[[volt, 0.0]]])
    assert DIODE.operating(parameters, voltages, GMIN).region.tolist() == [[region]]
