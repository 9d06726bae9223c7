"""Every field-effect transistor against ngspice 39 and against its own derivatives.

Source of every reference figure: ngspice 39.3 run by the test itself [P: its output]. Where ngspice
differs, and so is not compared, is said beside the model cards in fets.py.
"""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from devices.fet_referee import (
    CAPACITANCE,
    CONDUCTANCE,
    GMIN,
    Bias,
    assert_agreement,
    assert_invariants,
    assert_slopes,
    close,
)
from devices.fets import SUBJECTS
from tauledger.devices.interface import Card

every_subject = pytest.mark.parametrize("subject", SUBJECTS)
every_model = pytest.mark.parametrize(
    ("subject", "model"), [(name, model) for name in SUBJECTS for model in SUBJECTS[name].models]
)
either_polarity = pytest.mark.parametrize("polarity", ["n", "p"])


@pytest.mark.referee
@pytest.mark.parametrize("temperature_c", [-40.0, 27.0, 125.0])
@either_polarity
@every_model
def test_currents_and_figures_agree_with_ngspice(
    subject: str, model: str, polarity: str, temperature_c: float
) -> None:
    under_test = SUBJECTS[subject]
    for instance in range(len(under_test.instances)):
        bench = under_test.bench(model, polarity, temperature_c, instance)
        assert_agreement(bench, under_test.biases, under_test.figures)


@pytest.mark.referee
@pytest.mark.parametrize("temperature_c", [27.0, 125.0])
@pytest.mark.parametrize(
    ("subject", "model"),
    [
        (name, model)
        for name in ("level 2", "level 3")
        for model, card in SUBJECTS[name].models.items()
        if "rd" not in card
    ],
)
def test_conductances_are_the_slopes_of_ngspices_current(
    subject: str, model: str, temperature_c: float
) -> None:
    bench = SUBJECTS[subject].bench(model, "n", temperature_c)
    assert_slopes(bench, SUBJECTS[subject].biases, CONDUCTANCE)


@pytest.mark.referee
@either_polarity
@pytest.mark.parametrize(
    ("subject", "model"), [(name, model) for name in SUBJECTS for model in SUBJECTS[name].exact]
)
def test_conductances_are_ngspices_own_where_those_are_slopes(
    subject: str, model: str, polarity: str
) -> None:
    conducting = [bias for bias in SUBJECTS[subject].biases if bias[0] > 0.0 and bias[1] > 2.0]
    own = {
        name: (theirs, CONDUCTANCE, 1e-12)
        for name, theirs in (("gm", "gm"), ("gds", "gds"), ("gmb", "gmbs"))
    }
    assert_agreement(SUBJECTS[subject].bench(model, polarity), conducting, own)


@pytest.mark.referee
@pytest.mark.parametrize(
    ("subject", "model", "polarity", "bias", "omega"),
    [
        ("level 1", "every parameter", "n", (4.0, 2.5, -1.0), 1e6),
        ("level 1", "every parameter", "n", (0.1, 3.0, -1.0), 1e6),
        ("level 1", "every parameter", "n", (2.0, 0.9, -1.0), 1e6),
        ("jfet", "other temperature laws", "n", (6.0, -1.0), 1e9),
        ("jfet", "other temperature laws", "p", (0.3, -0.5), 1e9),
        ("jfet", "other temperature laws", "n", (0.1, 0.45), 1e9),
        ("jfet", "enhancement", "p", (2.0, 0.4), 1e9),
        ("power", "soft threshold", "n", (20.0, 3.0), 1e3),
        ("power", "soft threshold", "n", (1.0, 6.0), 1e3),
    ],
)
@pytest.mark.parametrize("temperature_c", [-40.0, 27.0, 125.0])
def test_gate_capacitances_are_those_of_ngspices_ac_analysis(
    subject: str, model: str, polarity: str, bias: Bias, omega: float, temperature_c: float
) -> None:
    """The factor of two between what SPICE stores and what its AC analysis stamps is settled."""
    bench = SUBJECTS[subject].bench(model, polarity, temperature_c, -1)
    intrinsic = {k: v for k, v in bench.model.items() if k not in ("rd", "rs", "rsh")}
    bench = dataclasses.replace(bench, model=intrinsic)
    currents = bench.gate_driven(bias, omega)
    values = {name: float(array[0, 0]) for name, array in bench.ours([bias])[1].values.items()}
    gate = {name: values[name] for name in ("c_gs", "c_gd", "c_gb") if name in values}
    assert close(values["c_gs"], -currents["s"].imag / omega, CAPACITANCE, 1e-19)
    assert close(values["c_gd"], -currents["d"].imag / omega, CAPACITANCE, 1e-19)
    assert close(sum(gate.values()), currents["g"].imag / omega, CAPACITANCE, 1e-19)


@every_subject
@settings(max_examples=150, deadline=None)
@given(data=st.data())
def test_derivatives_are_those_of_the_currents(subject: str, data: st.DataObject) -> None:
    under_test = SUBJECTS[subject]
    model = data.draw(st.sampled_from(sorted(under_test.models)), "model")
    bench = under_test.bench(model, data.draw(st.sampled_from("np"), "polarity"))
    volts = data.draw(under_test.branch_voltages, "branch voltages of an N type")
    assert_invariants(bench, bench.sign * np.array([[volts]]), under_test.curvature)


@every_model
def test_a_wild_guess_neither_overflows_nor_warns(subject: str, model: str) -> None:
    under_test = SUBJECTS[subject]
    wild = np.array(under_test.wild)[:, None]
    parameters = under_test.bench(model).prepared()
    with np.errstate(over="raise", divide="raise", invalid="raise"):
        found = under_test.device.evaluate(parameters, wild, GMIN)
    assert np.isfinite(found.current).all()
    assert np.isfinite(found.jacobian).all()


@every_subject
def test_boards_are_solved_as_if_each_were_alone(subject: str) -> None:
    under_test = SUBJECTS[subject]
    device, boards = under_test.device, under_test.boards
    bench = under_test.bench(boards.model)

    def solve(changed: dict[str, object], count: int) -> dict[str, np.ndarray]:
        card = Card("X1", bench.kind, {**bench.model, **changed}, bench.instance)
        voltages = np.array([[boards.voltages]] * count)
        return device.operating(device.prepare([card], 27.0, 27.0), voltages, GMIN).values

    batch = solve({name: np.array(values) for name, values in boards.spread.items()}, 3)
    assert len(set(batch["gm"][:, 0])) == 3
    for board in range(3):
        alone = solve({name: values[board] for name, values in boards.spread.items()}, 1)
        for name, value in alone.items():
            np.testing.assert_array_equal(batch[name][board], value[0], err_msg=name)


@either_polarity
@pytest.mark.parametrize(
    ("subject", "region"),
    [(name, region) for name in SUBJECTS for region in SUBJECTS[name].regions],
)
def test_region_names_what_an_amplifier_needs_to_know(
    subject: str, region: str, polarity: str
) -> None:
    under_test = SUBJECTS[subject]
    found = under_test.bench(under_test.plain, polarity).ours([under_test.regions[region]])[1]
    assert found.region[0, 0] == region
