"""One device by itself: its inner nodes solved for, its derivatives against differences."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from tauledger.devices.interface import AnyDevice


def branch_voltages(
    device: AnyDevice, parameters: Any, outer: Sequence[float], gmin: float = 1e-12
) -> np.ndarray:
    """Branch voltages (1, 1, U) at which no current is left over at the inner terminals.

    Plain Newton with the device's own limiting, as a solver would run it; an inner terminal
    ``xyz_…_internal`` starts at, or is merged with, terminal ``xyz``. AssertionError when 200
    iterations do not converge.
    """
    index = {name: position for position, name in enumerate(device.terminals)}
    node = np.zeros(len(index))
    node[: device.outer] = outer
    reach = np.zeros((len(index), len(index)))
    free = []
    for name, position in index.items():
        owner = name.partition("_")[0]
        merged = owner == name or device.merged(parameters)[0, position - device.outer]
        reach[position, index[owner] if merged else position] = 1.0
        node[position] = node[index[owner]]
        if not merged:
            free.append(position)
    incidence = np.zeros((len(device.branches), len(index)))
    for row, (plus, minus) in enumerate(device.branches):
        incidence[row, index[plus]] += 1.0
        incidence[row, index[minus]] -= 1.0
    incidence = incidence @ reach
    previous = device.initial(parameters)
    for _ in range(200):
        proposed = (incidence @ node)[None, None]
        limited = device.limit(parameters, proposed, previous)
        found = device.evaluate(parameters, limited, gmin)
        jacobian = found.jacobian[0, 0, free]
        residual = found.current[0, 0, free] + jacobian @ (proposed - limited)[0, 0]
        step = np.linalg.solve(jacobian @ incidence[:, free], -residual)
        settled = np.abs(proposed - limited).max() < 1e-12
        if settled and np.abs(step).max(initial=0.0) < 1e-13:
            return proposed
        node[free] += step
        previous = limited
    raise AssertionError(f"{device.name} did not settle at {outer}")


def assert_exact_derivatives(
    device: AnyDevice, parameters: Any, voltages: np.ndarray, gmin: float = 1e-12
) -> None:
    """Currents sum to zero, and the Jacobian is that of central differences over 1 µV.

    For smooth laws, at branch voltages (1, 1, U) away from any kink.
    """
    step = 1e-6
    found = device.evaluate(parameters, voltages, gmin)
    scale = np.abs(found.current).max()
    assert abs(found.current.sum()) <= 1e-14 * scale
    assert np.abs(found.jacobian.sum(axis=2)).max() <= 1e-14 * np.abs(found.jacobian).max()
    for branch in range(voltages.shape[-1]):
        moved = np.zeros_like(voltages)
        moved[..., branch] = step
        rise = device.evaluate(parameters, voltages + moved, gmin).current
        fall = device.evaluate(parameters, voltages - moved, gmin).current
        slope = (rise - fall)[0, 0] / (2.0 * step)
        exact = found.jacobian[0, 0, :, branch]
        noise = 1e-9 * scale + 1e-16
        assert np.abs(slope - exact).max() <= 1e-6 * np.abs(exact).max() + noise, branch
