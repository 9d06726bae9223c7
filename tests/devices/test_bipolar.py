"""Gummel-Poon transistor against ngspice 39 and against its own derivatives.

Source of every reference figure: ngspice 39.3 run by the test itself [P: its output].
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Mapping

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import ngspice
from devices.solve_point import assert_exact_derivatives, branch_voltages
from tauledger.devices.bipolar import BIPOLAR
from tauledger.devices.interface import Card, OperatingValues

GMIN = 1e-12
SMALL_SIGNAL = {
    "is": 14.34e-15, "bf": 255.9, "vaf": 74.03, "ikf": 0.2847, "ise": 14.34e-15, "ne": 1.307,
    "br": 6.092, "var": 20.0, "ikr": 0.1, "isc": 1e-14, "nc": 1.5, "rb": 10.0, "rbm": 2.0,
    "irb": 1e-4, "re": 0.5, "rc": 1.0, "cje": 22.01e-12, "mje": 0.377, "tf": 411.1e-12,
    "xtf": 3.0, "vtf": 4.0, "itf": 0.6, "cjc": 7.306e-12, "mjc": 0.3416, "xcjc": 0.6,
    "tr": 46.91e-9, "cjs": 3e-12, "vjs": 0.6, "mjs": 0.4, "fc": 0.6, "eg": 1.12, "xti": 3.2,
    "xtb": 1.5, "iss": 1e-16, "ns": 1.1,
}  # fmt: skip
MODELS: Mapping[str, Mapping[str, float]] = {
    "textbook": {"is": 1e-15, "bf": 200.0, "vaf": 80.0},
    "every parameter": SMALL_SIGNAL,
    "resistance follows charge": {
        "is": 1e-14, "bf": 100.0, "ikf": 0.01, "nkf": 0.6, "rb": 200.0, "rbm": 20.0,
        "cje": 5e-12, "tf": 1e-9, "xtf": 2.0, "itf": 0.01, "cjc": 2e-12,
    },
    "both junction currents": {"is": 1e-15, "ibe": 3e-15, "ibc": 5e-15, "re": 2.0},
    "nominal at 50 °C": {
        "is": 1e-14, "bf": 100.0, "ise": 1e-13, "tnom": 50.0, "cje": 3e-12, "cjc": 2e-12,
        "cjs": 1e-12, "mjs": 0.3, "vaf": 60.0, "xtb": 1.2, "rc": 5.0,
    },
    "vertical whatever the polarity": {"is": 1e-15, "subs": 1.0, "iss": 1e-15, "cjs": 2e-12,
                                       "rc": 20.0},
    "lateral whatever the polarity": {"is": 1e-15, "subs": -1.0, "iss": 1e-15, "cjs": 2e-12,
                                      "mjs": 0.4, "rb": 50.0},
    "temperature coefficients": {
        "is": 1e-14, "bf": 100.0, "tbf1": 1e-3, "ikf": 0.01, "tikf1": 1e-3, "ise": 1e-13,
        "tne1": 1e-3, "rb": 200.0, "trb1": 1e-3, "rbm": 20.0, "trm1": 2e-3, "re": 1.0,
        "tre1": 4e-3, "tre2": 1e-5, "rc": 3.0, "trc": 2e-3, "tnf1": 1e-4, "vaf": 50.0,
        "tvaf1": 1e-3, "tf": 1e-9, "ttf1": 1e-3, "itf": 1e-3, "titf1": 1e-3, "xtf": 1.0,
        "cje": 3e-12, "mje": 0.4, "tmje1": 1e-3, "irb": 1e-5, "tirb1": 1e-3,
    },
}  # fmt: skip
# Collector and base voltage of an NPN, emitter grounded: active from nA to high injection,
# saturated, reverse, cut off, both junctions hard off.
BIASES = [
    (5.0, 0.7), (2.0, 0.45), (3.0, 0.85), (0.1, 0.7), (0.4, 0.8), (-0.4, 0.3), (-0.7, 0.05),
    (5.0, -2.0), (-3.0, -3.7),
]  # fmt: skip


def deck(model: Mapping[str, float], kind: str, instance: str) -> str:
    parameters = " ".join(f"{name}={value!r}" for name, value in model.items())
    return (
        f"vc c 0 0 ac 0\nvb b 0 0 ac 1\nve e 0 0 ac 0\nvs s 0 0 ac 0\n"
        f"q1 c b e s m {instance}\n.model m {kind} {parameters}"
    )


def figures(result: OperatingValues) -> dict[str, float]:
    value = {name: float(array[0, 0]) for name, array in result.values.items()}
    return {
        "gm": value["gm"],
        "gpi": 1.0 / value["r_pi"],
        "go": 1.0 / value["r_o"],
        "gmu": 1.0 / value["r_mu"],
        "gx": 1.0 / value["r_x"] if value["r_x"] else 0.0,
        "cpi": value["c_pi"],
        "cmu": value["c_mu"],
        "cbx": value["c_mu_x"],
        "csub": value["c_sub"],
    }


@pytest.mark.referee
@pytest.mark.parametrize("temperature_c", [-40.0, 27.0, 125.0])
@pytest.mark.parametrize("kind", ["npn", "pnp"])
@pytest.mark.parametrize("name", MODELS)
def test_agrees_with_ngspice(name: str, kind: str, temperature_c: float) -> None:
    model = MODELS[name]
    sign = 1.0 if kind == "npn" else -1.0
    sizes = {"area": 2.0, "areab": 1.5, "areac": 3.0, "m": 3.0} if temperature_c == 27.0 else {}
    instance = " ".join(f"{key}={value}" for key, value in sizes.items())
    parameters = BIPOLAR.prepare([Card("q1", kind, model, sizes)], temperature_c, 27.0)
    currents = [f"i(v{terminal})" for terminal in "cbes"]
    asked = ["gm", "gpi", "go", "gmu", "gx", "cpi", "cmu", "cbx", "csub"]
    points = ngspice.bias_points(
        deck(model, kind, instance),
        [{"vc": sign * vc, "vb": sign * vb, "vs": -1.0} for vc, vb in BIASES],
        [*currents, *(f"@q1[{figure}]" for figure in asked)],
        temperature_c,
    )
    for point, (vc, vb) in zip(points, BIASES, strict=True):
        voltages = branch_voltages(BIPOLAR, parameters, (sign * vc, sign * vb, 0.0, -1.0))
        result = BIPOLAR.operating(parameters, voltages, GMIN)
        terminal = [float(result.values[key][0, 0]) for key in ("ic", "ib", "ie", "isub")]
        reference = [-point[current] for current in currents]
        assert terminal == pytest.approx(reference, rel=1e-4, abs=2e-14), (vc, vb)
        power = -sign * (vc * point["i(vc)"] + vb * point["i(vb)"]) + point["i(vs)"]
        assert float(result.values["power"][0, 0]) == pytest.approx(power, rel=1e-4, abs=1e-13)
        found = figures(result)
        # ngspice's gm is a small difference of large numbers in saturation.
        loose = 2e-3 * (abs(point["@q1[gm]"]) + point["@q1[go]"])
        assert found.pop("gm") == pytest.approx(point["@q1[gm]"], abs=loose), (vc, vb)
        wanted = {figure: point[f"@q1[{figure}]"] for figure in found}
        assert found == pytest.approx(wanted, rel=2e-3, abs=1e-30), (vc, vb)


@pytest.mark.referee
@pytest.mark.parametrize("kind", ["npn", "pnp"])
@pytest.mark.parametrize("bias", [(5.0, 0.7), (1.0, 0.85), (0.3, 0.8)])
def test_input_and_transfer_admittance_agree_with_ngspice(
    kind: str, bias: tuple[float, float]
) -> None:
    """Every capacitance and the charge that Vbc puts on the emitter junction, at 100 MHz.

    RBM equals RB and the substrate is in reverse: ngspice's AC analysis takes the base resistance
    as a constant and leaves the conductance of the substrate diode out.
    """
    model = {**SMALL_SIGNAL, "rbm": 10.0}
    sign = 1.0 if kind == "npn" else -1.0
    source = deck(model, kind, "").replace("vc c 0 0", f"vc c 0 {sign * bias[0]}")
    source = source.replace("vb b 0 0", f"vb b 0 {sign * bias[1]}").replace("vs s 0 0", "vs s 0 -9")
    reference = ngspice.phasors(source, 1e8, ["i(vc)", "i(vb)"])
    parameters = BIPOLAR.prepare([Card("q1", kind, model, {})], 27.0, 27.0)
    outer = (sign * bias[0], sign * bias[1], 0.0, -9.0)
    voltages = branch_voltages(BIPOLAR, parameters, outer)
    admittance = small_signal_admittance(parameters, voltages, 2.0 * math.pi * 1e8)
    drive = np.array([0.0, 1.0, 0.0, 0.0])
    collector, base = -(admittance @ drive)[:2]
    for found, wanted in ((collector, reference["i(vc)"]), (base, reference["i(vb)"])):
        assert abs(found) == pytest.approx(abs(wanted), rel=1e-4)
        assert cmath.phase(found / wanted) == pytest.approx(0.0, abs=1e-4)


@pytest.mark.referee
@pytest.mark.parametrize("own", [{"temp": 80.0}, {"dtemp": 25.0}, {"temp": 80.0, "dtemp": 25.0}])
def test_instance_temperature_agrees_with_ngspice(own: Mapping[str, float]) -> None:
    model = MODELS["textbook"]
    instance = " ".join(f"{key}={value}" for key, value in own.items())
    (point,) = ngspice.bias_points(
        deck(model, "npn", instance), [{"vc": 5.0, "vb": 0.6}], ["i(vc)"], 40.0
    )
    parameters = BIPOLAR.prepare([Card("q1", "npn", model, own)], 40.0, 27.0)
    voltages = branch_voltages(BIPOLAR, parameters, (5.0, 0.6, 0.0, 0.0))
    current = float(BIPOLAR.operating(parameters, voltages, GMIN).values["ic"][0, 0])
    assert current == pytest.approx(-point["i(vc)"], rel=1e-4)


@pytest.mark.referee
@pytest.mark.parametrize("rolloff", [{"irb": 1e-4}, {"irb": 0.0}])
@pytest.mark.parametrize("base_v", [0.6, 0.7, 0.8])
def test_modulated_base_resistance_has_the_slope_of_ngspice_currents(
    rolloff: Mapping[str, float], base_v: float
) -> None:
    model = {**SMALL_SIGNAL, "rb": 300.0, "rbm": 20.0, **rolloff}
    step = 1e-5
    sweep = [{"vc": 5.0, "vb": base_v + side * step} for side in (-1.0, 1.0)]
    names = ["i(vc)", "i(vb)"]
    low, high = ngspice.bias_points(deck(model, "npn", ""), sweep, names)
    parameters = BIPOLAR.prepare([Card("q1", "npn", model, {})], 27.0, 27.0)
    voltages = branch_voltages(BIPOLAR, parameters, (5.0, base_v, 0.0, 0.0))
    slope = small_signal_admittance(parameters, voltages, 0.0)[:2, 1].real
    reference = [(low[name] - high[name]) / (2.0 * step) for name in names]
    assert slope == pytest.approx(reference, rel=1e-4)


def small_signal_admittance(parameters: object, voltages: np.ndarray, omega: float) -> np.ndarray:
    """Admittance of the four outer terminals, the inner ones eliminated."""
    terminals = BIPOLAR.terminals
    index = {name: position for position, name in enumerate(terminals)}
    incidence = np.zeros((6, 7))
    for row, (plus, minus) in enumerate(BIPOLAR.branches):
        incidence[row, index[plus]] += 1.0
        incidence[row, index[minus]] -= 1.0
    total = BIPOLAR.evaluate(parameters, voltages, GMIN).jacobian[0, 0] @ incidence + 0j
    result = BIPOLAR.operating(parameters, voltages, GMIN)

    def stamp(value: float, charge: tuple[str, str], control: tuple[str, str]) -> None:
        for end, sign in zip(charge, (1, -1), strict=True):
            for other, side in zip(control, (1, -1), strict=True):
                total[index[end], index[other]] += 1j * omega * value * sign * side

    for value, (_, *ends) in zip(result.capacitance[0, 0], BIPOLAR.capacitors, strict=True):
        stamp(value, (ends[0], ends[1]), (ends[0], ends[1]))
    for value, ends in zip(result.transcapacitance[0, 0], BIPOLAR.transcapacitors, strict=True):
        stamp(value, ends[:2], ends[2:])
    eliminated = total[:4, 4:] @ np.linalg.solve(total[4:, 4:], total[4:, :4])
    return total[:4, :4] - eliminated


junction_voltage = st.floats(-8.0, 0.95)
small_drop = st.floats(-0.05, 0.05)
model_name = st.sampled_from(sorted(MODELS))
polarity = st.sampled_from(["npn", "pnp"])


@given(
    name=model_name,
    kind=polarity,
    junctions=st.tuples(junction_voltage, junction_voltage, st.floats(-8.0, 0.7)),
    drops=st.tuples(small_drop, small_drop, small_drop),
)
@settings(max_examples=300, deadline=None)
def test_derivatives_are_exact_and_currents_sum_to_zero(
    name: str,
    kind: str,
    junctions: tuple[float, float, float],
    drops: tuple[float, float, float],
) -> None:
    parameters = BIPOLAR.prepare([Card("q1", kind, MODELS[name], {"area": 1.5})], 27.0, 27.0)
    sign = 1.0 if kind == "npn" else -1.0
    voltages = np.array([[[sign * v for v in junctions] + list(drops)]])
    assert_exact_derivatives(BIPOLAR, parameters, voltages)


@given(
    name=model_name,
    far=st.tuples(*[st.floats(-1e4, 1e4) for _ in range(6)]),
    before=st.tuples(*[st.floats(-5.0, 0.9) for _ in range(6)]),
)
@settings(max_examples=200, deadline=None)
def test_any_newton_step_stays_finite_and_settles(
    name: str, far: tuple[float, ...], before: tuple[float, ...]
) -> None:
    parameters = BIPOLAR.prepare([Card("q1", "npn", MODELS[name], {})], 27.0, 27.0)
    proposed, previous = np.array([[far]]), np.array([[before]])
    for voltages in (proposed, BIPOLAR.limit(parameters, proposed, previous)):
        found = BIPOLAR.evaluate(parameters, voltages, GMIN)
        assert np.isfinite(found.current).all()
        assert np.isfinite(found.jacobian).all()
    still = BIPOLAR.limit(parameters, previous, previous)
    assert still == pytest.approx(previous, abs=1e-12)


def test_limited_junctions_never_run_away() -> None:
    parameters = BIPOLAR.prepare([Card("q1", "npn", MODELS["textbook"], {})], 27.0, 27.0)
    start = BIPOLAR.initial(parameters)
    wild = start + np.array([12.0, 0.0, 0.0, 0.0, 0.0, 0.0])
    limited = BIPOLAR.limit(parameters, wild, start)
    rise = (limited - start)[0, 0, 0]
    assert 0.0 < rise < 0.25
    assert limited[0, 0, 3:] == pytest.approx(wild[0, 0, 3:])


@given(voltages=st.tuples(*[st.floats(-3.0, 0.8) for _ in range(3)]))
@settings(max_examples=50, deadline=None)
def test_pnp_is_the_mirror_of_npn(voltages: tuple[float, float, float]) -> None:
    branch = np.array([[[*voltages, 0.01, -0.02, 0.005]]])
    model = {**SMALL_SIGNAL, "subs": 1.0}
    npn = BIPOLAR.prepare([Card("q1", "npn", model, {})], 40.0, 27.0)
    pnp = BIPOLAR.prepare([Card("q1", "pnp", model, {})], 40.0, 27.0)
    right, mirrored = (
        BIPOLAR.evaluate(npn, branch, GMIN), BIPOLAR.evaluate(pnp, -branch, GMIN)
    )  # fmt: skip
    assert np.array_equal(right.current, -mirrored.current)
    assert np.array_equal(right.jacobian, mirrored.jacobian)


def test_boards_are_independent() -> None:
    gains = np.array([50.0, 100.0, 400.0])
    base = {**SMALL_SIGNAL}
    varied = [Card("q1", "npn", {**base, "bf": gains}, {}), Card("q2", "pnp", base, {})]
    together = BIPOLAR.prepare(varied, np.array([0.0, 27.0, 60.0]), 27.0)
    voltages = np.tile(BIPOLAR.initial(together), (1, 1, 1)) * np.array([0.9])
    found = BIPOLAR.operating(together, voltages, GMIN)
    for board, (gain, celsius) in enumerate(zip(gains, (0.0, 27.0, 60.0), strict=True)):
        cards = [Card("q1", "npn", {**base, "bf": float(gain)}, {}), varied[1]]
        alone = BIPOLAR.prepare(cards, celsius, 27.0)
        single = BIPOLAR.operating(alone, voltages[board : board + 1], GMIN)
        for key, array in found.values.items():
            assert array[board] == pytest.approx(single.values[key][0], rel=1e-12), key
        assert found.capacitance[board] == pytest.approx(single.capacitance[0], rel=1e-12)


def test_models_side_by_side_do_not_disturb_each_other() -> None:
    cards = [
        Card(f"q{number}{kind}", kind, model, {"area": 1.0 + number})
        for number, model in enumerate(MODELS.values())
        for kind in ("npn", "pnp")
    ]
    together = BIPOLAR.prepare(cards, 60.0, 27.0)
    forward = np.array([0.65, 0.3, -1.0, 0.01, 0.02, -0.01])
    voltages = np.array([[forward if card.kind == "npn" else -forward for card in cards]])
    found = BIPOLAR.evaluate(together, voltages, GMIN)
    figures_together = BIPOLAR.operating(together, voltages, GMIN)
    for number, card in enumerate(cards):
        alone = BIPOLAR.prepare([card], 60.0, 27.0)
        only = voltages[:, number : number + 1]
        single = BIPOLAR.evaluate(alone, only, GMIN)
        assert found.current[0, number] == pytest.approx(single.current[0, 0], rel=1e-12)
        assert found.jacobian[0, number] == pytest.approx(single.jacobian[0, 0], rel=1e-12)
        assert np.array_equal(BIPOLAR.merged(together)[number], BIPOLAR.merged(alone)[0])
        for key, array in BIPOLAR.operating(alone, only, GMIN).values.items():
            both = figures_together.values[key][0, number]
            assert both == pytest.approx(array[0, 0], nan_ok=True), key


def test_multiplier_is_devices_in_parallel() -> None:
    one = BIPOLAR.prepare([Card("q1", "npn", SMALL_SIGNAL, {})], 27.0, 27.0)
    three = BIPOLAR.prepare([Card("q1", "npn", SMALL_SIGNAL, {"m": 3.0})], 27.0, 27.0)
    voltages = np.array([[[0.72, -3.0, -5.0, 1e-3, 5e-3, -2e-3]]])
    single = BIPOLAR.evaluate(one, voltages, GMIN)
    triple = BIPOLAR.evaluate(three, voltages, GMIN)
    assert triple.current == pytest.approx(3.0 * single.current, rel=1e-12)
    assert triple.jacobian == pytest.approx(3.0 * single.jacobian, rel=1e-12)


@pytest.mark.parametrize(
    ("junctions", "region"),
    [
        ((0.7, -4.0), "active"),
        ((0.75, 0.7), "saturated"),
        ((-2.0, 0.7), "reverse"),
        ((0.2, -5.0), "cut off"),
    ],
)
def test_regions(junctions: tuple[float, float], region: str) -> None:
    parameters = BIPOLAR.prepare([Card("q1", "pnp", MODELS["textbook"], {})], 27.0, 27.0)
    voltages = -np.array([[[*junctions, 0.0, 0.0, 0.0, 0.0]]])
    assert BIPOLAR.operating(parameters, voltages, GMIN).region.tolist() == [[region]]
