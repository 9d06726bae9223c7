"""The static small-signal admittances of each device between its terminals."""

from __future__ import annotations

from collections.abc import Mapping

from tauledger.bias.solver import BiasSolution
from tauledger.records import dataclass
from tauledger.smallsignal.network import FloatArray


@dataclass(frozen=True, slots=True)
class DeviceAdmittance:
    """One device on the first board: ``i = matrix @ v`` at its T terminals, in S."""

    terminals: tuple[str, ...]
    unknowns: tuple[int, ...]
    """Unknown index of each terminal; −1 for ground. A merged terminal repeats its twin's."""
    matrix: FloatArray
    """(T, T)."""

    def current_into(self, terminal: str, unknowns: FloatArray) -> float:
        """Signal current into an outer terminal, in A, for given node signals (N,).

        A series resistance of zero merges the inner terminal with the outer one; both carry
        the terminal's current then.
        """
        voltages = [float(unknowns[k]) if k >= 0 else 0.0 for k in self.unknowns]
        node = self.unknowns[self.terminals.index(terminal)]
        rows = [
            i
            for i, name in enumerate(self.terminals)
            if name.partition("_")[0] == terminal and self.unknowns[i] == node
        ]
        return float(sum(self.matrix[i] @ voltages for i in rows))


def device_admittances(solution: BiasSolution) -> Mapping[str, DeviceAdmittance]:
    """By device name."""
    result = {}
    gmin = solution.equations.circuit.gmin
    for group, u in zip(solution.equations.groups, solution.state.branch_voltages, strict=True):
        stamp = group.device.evaluate(group.parameters, u, gmin).jacobian @ group.incidence
        for i, name in enumerate(group.names):
            result[name] = DeviceAdmittance(
                group.device.terminals,
                tuple(int(k) for k in group.terminal_nodes[i]),
                stamp[0, i],
            )
    return result
