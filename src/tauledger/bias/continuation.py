"""What the solver tries when plain Newton fails: easier equations, made true step by step.

Gmin stepping starts with a large conductance from every node to ground and takes it away; source
stepping brings the supplies up from zero; pseudo-transient continuation gives every node a
capacitor and lets the circuit settle in time steps that grow while they succeed. Sources: gmin and
source stepping are SPICE's (common practice); pseudo-transient continuation after C. T. Kelley and
D. E. Keyes, "Convergence analysis of pseudo-transient continuation", SIAM J. Numer. Anal. 35 (1998)
508-523 (from memory, not re-read).

Each takes the boards that still need help together. A step is repeated, smaller, when it loses a
board that had followed so far.
"""

from __future__ import annotations

import dataclasses

import numpy as np

from tauledger.bias.equations import Equations
from tauledger.bias.newton import Helps, State, solve_newton, starting_state

STEP_ITERATIONS = 60
LARGEST_GMIN_S = 1e-2
SMALLEST_GMIN_S = 1e-14
FIRST_STEP_S = 1e-1
"""Conductance of the node capacitors in the first time step: C/Δt."""
LAST_STEP_S = 1e-13
MOST_TIME_STEPS = 300


def gmin_stepping(equations: Equations, start: State) -> State:
    """Ten-fold steps from 10 mS down, the step shortened when one fails."""
    exponent, step = float(np.log10(LARGEST_GMIN_S)), 1.0
    state = solve_newton(equations, start, Helps(node_conductance_s=LARGEST_GMIN_S))
    if not state.converged.any():
        return state
    while step > 0.02 and exponent > np.log10(SMALLEST_GMIN_S):
        helps = Helps(node_conductance_s=float(10.0 ** (exponent - step)))
        trial = solve_newton(equations, state, helps, STEP_ITERATIONS)
        if trial.converged.sum() >= state.converged.sum():
            state, exponent, step = trial, exponent - step, min(1.0, 1.5 * step)
        else:
            step /= 4.0
    return solve_newton(equations, state)


def source_stepping(equations: Equations, start: State) -> State:
    """Supplies from zero to full, the step adapted to what converges."""
    scale, step = 0.0, 0.1
    state = solve_newton(equations, start, Helps(source_scale=0.0))
    while scale < 1.0 and step > 1e-4:
        target = min(1.0, scale + step)
        trial = solve_newton(equations, state, Helps(source_scale=target), STEP_ITERATIONS)
        if trial.converged.sum() >= max(1, state.converged.sum()):
            state, scale, step = trial, target, 2.0 * step
        else:
            step /= 4.0
    return dataclasses.replace(state, converged=state.converged & (scale >= 1.0))


def pseudo_transient(equations: Equations, start: State) -> State:
    """Settle from all nodes at zero, every node held to its last voltage by C/Δt."""
    nodes = len(equations.nodes)
    state, hold = starting_state(equations), FIRST_STEP_S
    for _ in range(MOST_TIME_STEPS):
        helps = Helps(pull_conductance_s=hold, pull_targets=state.unknowns[:, :nodes])
        trial = solve_newton(equations, state, helps, STEP_ITERATIONS)
        if trial.converged.sum() >= max(1, state.converged.sum()):
            moved = _largest_move(trial, state, nodes)
            state = trial
            # Large swings are followed closely; near rest the steps grow fast.
            hold /= 2.0 if moved > 0.1 else 8.0
        else:
            hold *= 4.0
        if hold < LAST_STEP_S or hold > 1e9:
            break
    return solve_newton(equations, state)


def _largest_move(new: State, old: State, nodes: int) -> float:
    moved = np.abs(new.unknowns[:, :nodes] - old.unknowns[:, :nodes])[new.converged]
    return float(moved.max(initial=0.0))
