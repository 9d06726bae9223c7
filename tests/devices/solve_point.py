"""Find the inner nodes of one device when its outer terminals are held by voltage sources."""

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
