"""Field-effect transistors at a list of biases: ngspice's figures beside ours, and invariants.

Source of every reference figure: ngspice 39.3 run by the test itself [P: its output].
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

import ngspice
from devices.solve_point import branch_voltages
from tauledger.devices.interface import AnyDevice, Card, OperatingValues

GMIN = 1e-12
STEP_V = 1e-5
CURRENT, CONDUCTANCE, CAPACITANCE = 1e-4, 2e-3, 5e-3
"""Relative agreement asked of each."""
_TYPES = {"vdmosn": "vdmos (nchan", "vdmosp": "vdmos (pchan"}
"""The channel must stand inside the bracket: before it, ngspice 39 fills the memory and hangs."""
Bias = tuple[float, ...]
Figures = Mapping[str, tuple[str, float, float]]
"""Our figure to ngspice's name of it, the relative and the absolute tolerance."""


@dataclass(frozen=True)
class Bench:
    """One transistor with a voltage source from ground to every terminal but the source."""

    device: AnyDevice
    letter: str
    kind: str
    model: Mapping[str, Any]
    instance: Mapping[str, Any]
    temperature_c: float = 27.0

    @property
    def sign(self) -> float:
        return -1.0 if self.kind in ("pjf", "pmos", "vdmosp") else 1.0

    @property
    def nodes(self) -> str:
        return "dgsb"[: self.device.outer]

    def elements(self, bias: Bias | None = None) -> str:
        """The transistor with its sources at a bias, that of the gate with an AC value of 1 V."""
        outer = self.outer(bias) if bias else [0.0] * len(self.nodes)
        sources = "".join(
            f"v{node} {node} 0 {volts!r} ac {int(node == 'g')}\n"
            for node, volts in zip(self.nodes, outer, strict=True)
        )
        instance = " ".join(f"{name}={value!r}" for name, value in self.instance.items())
        model = " ".join(f"{name}={value!r}" for name, value in self.model.items())
        return (
            f"{sources}{self.letter}1 {' '.join(self.nodes)} m {instance}\n"
            f".model m {_TYPES.get(self.kind, self.kind + ' (')} {model})"
        )

    def outer(self, bias: Bias) -> list[float]:
        """Terminal voltages for drain, gate (and bulk) against a grounded source, N-type sign."""
        drain, gate, *bulk = bias
        return [self.sign * volts for volts in (drain, gate, 0.0, *bulk)]

    def ngspice(self, biases: Sequence[Bias], names: Sequence[str] = ()) -> list[dict[str, float]]:
        """Terminal currents ``d``, ``g`` … into the device, and ``names`` of its own figures."""
        points = [
            {f"v{node}": volts for node, volts in zip(self.nodes, self.outer(bias), strict=True)}
            for bias in biases
        ]
        own = [f"@{self.letter}1[{name}]" for name in names]
        vectors = [*own, *self._source_currents]
        found = ngspice.bias_points(self.elements(), points, vectors, self.temperature_c)
        return [
            {node: -row[f"i(v{node})"] for node in self.nodes}
            | {name: row[vector] for name, vector in zip(names, own, strict=True)}
            for row in found
        ]

    def gate_driven(self, bias: Bias, omega: float) -> dict[str, complex]:
        """Small-signal currents into the terminals, in A for 1 V at the gate, by ngspice."""
        found = ngspice.phasors(
            self.elements(bias), omega / (2.0 * np.pi), self._source_currents, self.temperature_c
        )
        return {node: -found[f"i(v{node})"] for node in self.nodes}

    @property
    def _source_currents(self) -> list[str]:
        return [f"i(v{node})" for node in self.nodes]

    def slopes(self, biases: Sequence[Bias]) -> list[tuple[float, ...]]:
        """Central differences of ngspice's drain current to drain, gate (and bulk) voltage."""
        size = len(biases[0])
        moved = [
            tuple(volts + sign * STEP_V * (k == i) for k, volts in enumerate(bias))
            for bias in biases
            for i in range(size)
            for sign in (1.0, -1.0)
        ]
        current = [self.sign * row["d"] for row in self.ngspice(moved)]
        slope = [(current[k] - current[k + 1]) / (2 * STEP_V) for k in range(0, len(current), 2)]
        return [tuple(slope[k : k + size]) for k in range(0, len(slope), size)]

    def prepared(self) -> Any:
        return self.device.prepare(
            [Card("X1", self.kind, self.model, self.instance)], self.temperature_c, 27.0
        )

    def voltages(self, biases: Sequence[Bias]) -> np.ndarray:
        """Branch voltages (biases, 1, U), the inner nodes solved for where there are any."""
        parameters = self.prepared()
        outer = [self.outer(bias) for bias in biases]
        if not self.device.merged(parameters).all():
            return np.concatenate([branch_voltages(self.device, parameters, o) for o in outer])
        index = [self.device.terminals.index(t.partition("_")[0]) for t in self.device.terminals]
        at = dict(zip(self.device.terminals, index, strict=True))
        node = np.array(outer)
        columns = [node[:, at[plus]] - node[:, at[minus]] for plus, minus in self.device.branches]
        return np.stack(columns, axis=-1)[:, None]

    def ours(self, biases: Sequence[Bias]) -> tuple[dict[str, np.ndarray], OperatingValues]:
        """Terminal currents as :meth:`ngspice` gives them, (biases,), and our figures."""
        parameters = self.prepared()
        voltages = self.voltages(biases)
        found = self.device.evaluate(parameters, voltages, GMIN)
        merged = self.device.merged(parameters)[0]
        total = {node: np.zeros(len(biases)) for node in self.nodes}
        for k, terminal in enumerate(self.device.terminals):
            if k < self.device.outer or merged[k - self.device.outer]:
                total[terminal[0]] += found.current[:, 0, k]
        total.pop("s", None)
        return total, self.device.operating(parameters, voltages, GMIN)


def close(ours: float, theirs: float, relative: float, absolute: float) -> bool:
    return abs(ours - theirs) <= relative * abs(theirs) + absolute


def assert_agreement(bench: Bench, biases: Sequence[Bias], names: Figures) -> None:
    """Every terminal current and the figures named against ngspice's.

    Currents to 1e-4, 1e-13 A of leakage, and what 1 µV of threshold makes.
    """
    rows = bench.ngspice(biases, [their_name for their_name, _, _ in names.values()])
    currents, figures = bench.ours(biases)
    for k, (bias, theirs) in enumerate(zip(biases, rows, strict=True)):
        where = f"{bench.kind} {bias} {bench.temperature_c} °C"
        absolute = 1e-13 + 1e-6 * abs(float(figures.values["gm"][k, 0]))
        for node, ours in currents.items():
            assert close(float(ours[k]), theirs[node], CURRENT, absolute), (
                f"{where}: current into {node} {ours[k]} A, ngspice {theirs[node]} A"
            )
        for name, (their_name, relative, least) in names.items():
            value = float(figures.values[name][k, 0])
            assert close(value, theirs[their_name], relative, least), (
                f"{where}: {name} {value}, ngspice {theirs[their_name]}"
            )


def assert_slopes(bench: Bench, biases: Sequence[Bias], relative: float) -> None:
    """The drain row of the Jacobian of a MOSFET without RD and RS against :meth:`Bench.slopes`."""
    found = bench.device.evaluate(bench.prepared(), bench.voltages(biases), GMIN)
    rows = found.jacobian[:, 0, bench.device.terminals.index("drain_internal")]
    for bias, inner, theirs in zip(biases, rows, bench.slopes(biases), strict=True):
        # Branches are gate, drain, bulk to source; terminals come as drain, gate, bulk. What the
        # difference cannot resolve beside the greatest slope counts as nothing.
        floor = 1e-12 + 1e-8 * float(np.abs(inner).max())
        for name, ours, slope in zip("dgb", inner[[1, 0, 2]], theirs, strict=True):
            assert close(float(ours), slope, relative, floor), (
                f"{bench.kind} {bias} {bench.temperature_c} °C: slope to {name} {ours} S, "
                f"ngspice's current {slope} S"
            )


def assert_invariants(bench: Bench, voltages: np.ndarray, curvature: float = 0.0) -> None:
    """Kirchhoff, the Jacobian against differences, limiting at rest; no floating-point fault.

    At a kink of the law the derivative may be that of either side; ``curvature`` in A/V² is how
    fast a slope may change within the step of the difference.
    """
    parameters = bench.prepared()
    device = bench.device
    with np.errstate(over="raise", divide="raise", invalid="raise"):
        found = device.evaluate(parameters, voltages, GMIN)
        device.operating(parameters, voltages, GMIN)
        rest = device.limit(parameters, voltages, voltages)
    np.testing.assert_allclose(rest, voltages, rtol=1e-12, atol=1e-12)
    scale = np.abs(found.current).max() + 1e-30
    assert abs(found.current.sum(axis=-1)).max() <= 1e-9 * scale
    size = np.abs(found.jacobian).max()
    assert abs(found.jacobian.sum(axis=-2)).max() <= 1e-9 * size
    step = 1e-6
    for branch in range(voltages.shape[-1]):
        moved = np.zeros_like(voltages)
        moved[..., branch] = step
        right = device.evaluate(parameters, voltages + moved, GMIN).current - found.current
        left = found.current - device.evaluate(parameters, voltages - moved, GMIN).current
        analytic = found.jacobian[..., branch]
        low, high = np.minimum(left, right) / step, np.maximum(left, right) / step
        # Rounding of the current, and curvature within the step.
        slack = (
            curvature * step
            + 1e-3 * np.abs(analytic)
            + 1e-9 * size
            + 1e-9 * scale
            + 4e-16 * scale / step
        )
        assert (analytic >= low - slack).all(), (branch, analytic, low, high)
        assert (analytic <= high + slack).all(), (branch, analytic, low, high)
