"""Hand analysis on the graph: what a capacitor sees, by series, parallel and reflection rules.

The signal network at midband is walked outward from the two ends of a capacitor. Resistors add
in series and in parallel; a transistor is entered by the rules of the trade (common practice, no
source; S. Franco ch. 6 and references D1, D2 use the same):

* into a base: rπ + (β+1)·R_E;
* into an emitter: (rπ + R_B)/(β+1), which is 1/gm when R_B is small, times 1 + R_C/ro;
* into a collector: ro·(1 + gm·(R_E‖(rπ + R_B)));
* into a gate: open;  into a source: 1/gm, or (ro + R_D)/(1 + gm·ro) above a large load;
* into a drain: ro·(1 + gm·R_S);
* Cμ or Cgd: R_in + R_out + Gm·R_in·R_out;  Cπ or Cgs: rπ‖(R_B + R_E)/(1 + gm·R_E).

The walk is a tree: a branch that leads back to a node already passed is taken for open, as one
does by hand. Where that matters there is a bridge or feedback; the caller finds out by comparing
the result with the exact port resistance.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence

from tauledger.corners.symbols import (
    FACTOR,
    GROUND,
    OPEN,
    SUM,
    Term,
    boosted,
    bridging,
    divided,
    increased,
    multiplied,
    parallel,
    series,
    symbol,
)
from tauledger.records import dataclass

MAXIMUM_DEPTH = 24
MAXIMUM_STEPS = 300
"""The walk tries every way out of a node, so that a mesh of resistors must be bounded."""
LARGEST_COLLECTOR_RATIO = 0.5
"""Up to here a load on the collector raises the emitter's resistance by 1 + R_C/ro."""


class NoExpressionError(Exception):
    """The rules do not apply; the message says why."""


@dataclass(frozen=True, slots=True)
class ResistorBranch:
    name: str
    nodes: tuple[int, int]
    resistance_ohm: float


@dataclass(frozen=True, slots=True)
class ActiveDevice:
    """A transistor at its intrinsic terminals; ``mark`` is what follows its symbols, or empty."""

    name: str
    mark: str
    control: int
    """Base or gate."""
    common: int
    """Emitter or source."""
    output: int
    """Collector or drain."""
    transconductance: float
    """gm in S."""
    input_resistance_ohm: float
    """rπ; infinite for a field-effect transistor."""
    output_resistance_ohm: float
    body_transconductance: float = 0.0
    """gmb in S, where the bulk stands at AC ground; it acts with gm on the source, not the gate."""

    def s(self, text: str) -> str:
        """A symbol of this device, such as ``rπ`` or ``rπ(Q2)``."""
        return f"{text}{self.mark}"

    @property
    def source_transconductance(self) -> float:
        """gm + gmb: what the emitter or source sees."""
        return self.transconductance + self.body_transconductance

    @property
    def source_symbol(self) -> str:
        """``gm``, or ``(gm+gmb)``."""
        if self.body_transconductance == 0.0:
            return self.s("gm")
        return f"({self.s('gm')}+{self.s('gmb')})"

    @property
    def r_pi(self) -> Term:
        return symbol(self.s("rπ"), self.input_resistance_ohm)

    @property
    def r_o(self) -> Term:
        return symbol(self.s("ro"), self.output_resistance_ohm)

    def passive(self) -> list[ResistorBranch]:
        """What is left of the device when its transconductance is zero."""
        ends = (
            ("rπ", (self.control, self.common), self.input_resistance_ohm),
            ("ro", (self.output, self.common), self.output_resistance_ohm),
        )
        return [
            ResistorBranch(self.s(text), nodes, value)
            for text, nodes, value in ends
            if math.isfinite(value)
        ]

    @property
    def beta_plus_one(self) -> float:
        return self.transconductance * self.input_resistance_ohm + 1.0


class SignalNetwork:
    """Resistors and transistors between nodes merged at midband; node 0 is AC ground."""

    def __init__(
        self,
        resistors: Iterable[ResistorBranch],
        devices: Iterable[ActiveDevice],
        merged: Mapping[int, int],
        opaque: Mapping[int, str],
    ) -> None:
        self._merged = merged
        self._opaque = {self._node(node): name for node, name in opaque.items()}
        self._resistors: dict[int, list[tuple[ResistorBranch, int]]] = {}
        for branch in resistors:
            a, b = branch.nodes
            a, b = merged.get(a, a), merged.get(b, b)
            if a != b:
                self._resistors.setdefault(a, []).append((branch, b))
                self._resistors.setdefault(b, []).append((branch, a))
        self.devices = tuple(devices)
        # Where each device stands, and the devices at each node: the walk asks at every step.
        self._places = {
            d.name: (self._node(d.control), self._node(d.common), self._node(d.output))
            for d in self.devices
        }
        self._attached: dict[int, list[ActiveDevice]] = {}
        for device in self.devices:
            for node in dict.fromkeys(self._places[device.name]):
                self._attached.setdefault(node, []).append(device)
        self._ground = self._node(-1)
        self._steps = 0

    def _node(self, node: int) -> int:
        return self._merged.get(node, node)

    def is_ground(self, node: int) -> bool:
        return self._node(node) == self._node(-1)

    def same(self, a: int, b: int) -> bool:
        return self._node(a) == self._node(b)

    def between(self, a: int, b: int) -> Term:
        """What a part between two nodes sees.

        Raises
        ------
        NoExpressionError
            Where the walk meets a bridge, feedback or a source it cannot see through.
        """
        if self.same(a, b):
            return GROUND
        self._steps = 0
        for device in self.devices:
            if special := self._around_device(device, a, b):
                return special
        if self.is_ground(a) or self.is_ground(b):
            return self.see(b if self.is_ground(a) else a)
        first, second = self._node(a), self._node(b)
        direct = [branch for branch, other in self._resistors.get(first, ()) if other == second]
        used = frozenset(branch.name for branch in direct)
        around = series(
            self.see(a, used, frozenset({second})), self.see(b, used, frozenset({first}))
        )
        return parallel(*(symbol(r.name, r.resistance_ohm) for r in direct), around)

    def _around_device(self, device: ActiveDevice, a: int, b: int) -> Term | None:
        ends = {self._node(a), self._node(b)}
        control, common, output = self._places[device.name]
        own = frozenset({device.name})
        if ends == {control, common} and control != common:
            outer_control = self._side(control, own, {common})
            outer_common = self._side(common, own, {control})
            if device.body_transconductance > 0.0:
                bulk = symbol(f"1/{device.s('gmb')}", 1.0 / device.body_transconductance)
                outer_common = parallel(outer_common, bulk)
            loop = series(outer_control, outer_common)
            gain = device.transconductance * outer_common.value
            if math.isinf(gain):
                seen = symbol(f"1/{device.s('gm')}", 1.0 / device.transconductance)
            elif gain < 0.01:
                seen = loop
            else:
                text = f"(1 + {device.s('gm')}·{outer_common.within(FACTOR)})"
                seen = divided(loop, 1.0 + gain, text)
            return parallel(device.r_pi, seen)
        for entry in (control, *self._behind_base(device, control)):
            if ends == {entry, output} and not ends & {self._node(-1)}:
                return self._bridge(device, entry, common, output, own)
        return None

    def _behind_base(self, device: ActiveDevice, control: int) -> list[int]:
        """The outer base, behind the transistor's own base resistance."""
        name = device.s("rb")
        return [other for r, other in self._resistors.get(control, ()) if r.name == name]

    def _bridge(
        self, device: ActiveDevice, control: int, common: int, output: int, own: frozenset[str]
    ) -> Term:
        direct = [r for r, other in self._resistors.get(control, ()) if other == output]
        used = own | {r.name for r in direct}
        below = self._side(common, used, {control, output})
        first = parallel(self._side(control, used, {output}), self._into_control(device, below))
        second = parallel(
            self._side(output, used, {control}),
            boosted(device.r_o, device.source_transconductance, device.source_symbol, below),
        )
        seen = bridging(first, second, _effective_transconductance(device, below))
        return parallel(*(symbol(r.name, r.resistance_ohm) for r in direct), seen)

    def _side(self, node: int, used: frozenset[str], visited: Iterable[int]) -> Term:
        return self.see(node, used, frozenset(visited) - {self._node(-1)})

    def see(
        self,
        node: int,
        used: frozenset[str] = frozenset(),
        visited: frozenset[int] = frozenset(),
        depth: int = 0,
    ) -> Term:
        """Resistance from a node to AC ground through all that is attached and not ``used``."""
        here = self._merged.get(node, node)
        if here == self._ground:
            return GROUND
        self._steps += 1
        if depth > MAXIMUM_DEPTH or self._steps > MAXIMUM_STEPS:
            raise NoExpressionError("too many parts hang there to write them down")
        if here in visited:
            return OPEN
        if here in self._opaque:
            raise NoExpressionError(f"{self._opaque[here]} acts on the node")
        seen = visited | {here}
        branches = [
            self._through(branch, other, used, seen, depth)
            for branch, other in self._resistors.get(here, ())
            if branch.name not in used
        ]
        branches += [
            self._into(device, here, used | {device.name}, seen, depth)
            for device in self._attached.get(here, ())
            if device.name not in used
        ]
        return parallel(*branches)

    def _through(
        self,
        branch: ResistorBranch,
        other: int,
        used: frozenset[str],
        seen: frozenset[int],
        depth: int,
    ) -> Term:
        resistor = symbol(branch.name, branch.resistance_ohm)
        return series(resistor, self.see(other, used | {branch.name}, seen, depth + 1))

    def _into(
        self,
        device: ActiveDevice,
        here: int,
        used: frozenset[str],
        seen: frozenset[int],
        depth: int,
    ) -> Term:
        control, common, output = self._places[device.name]
        if here == control == output:
            # Diode-connected: base and collector together.
            below = self.see(common, used, seen, depth + 1)
            return series(_inverse_gm(device), below)
        if here == control:
            if math.isinf(device.input_resistance_ohm):
                return OPEN
            return self._into_control(device, self.see(common, used, seen, depth + 1))
        if here == common:
            return self._into_common(device, used, seen, depth)
        if math.isinf(device.output_resistance_ohm):
            return OPEN
        below = self.see(common, used, seen, depth + 1)
        if below.value > 0.0 and math.isfinite(device.input_resistance_ohm):
            base = self.see(control, used, seen, depth + 1)
            below = parallel(below, series(device.r_pi, base))
        return boosted(device.r_o, device.source_transconductance, device.source_symbol, below)

    @staticmethod
    def _into_control(device: ActiveDevice, below: Term) -> Term:
        if math.isinf(device.input_resistance_ohm):
            return OPEN
        reflected = multiplied(device.beta_plus_one, f"({device.s('β')}+1)", below)
        return series(device.r_pi, reflected)

    def _into_common(
        self, device: ActiveDevice, used: frozenset[str], seen: frozenset[int], depth: int
    ) -> Term:
        above = self.see(device.output, used, seen, depth + 1)
        if math.isinf(above.value):
            above = GROUND
        if math.isinf(device.input_resistance_ohm):
            if above.value > 0.02 * device.output_resistance_ohm:
                gm, r_o = device.source_transconductance, device.output_resistance_ohm
                text = f"(1 + {device.source_symbol}·{device.s('ro')})"
                return divided(series(device.r_o, above), 1.0 + gm * r_o, text)
            return _inverse_gm(device)
        base = self.see(device.control, used, seen, depth + 1)
        whole = series(device.r_pi, base)
        if whole.text == device.r_pi.text:
            into = _inverse_gm(device)
        else:
            into = divided(whole, device.beta_plus_one, f"({device.s('β')}+1)")
        ratio = above.value / device.output_resistance_ohm
        text = f"{above.within(FACTOR)}/{device.s('ro')}"
        return increased(into, ratio, text) if ratio < LARGEST_COLLECTOR_RATIO else into


def _effective_transconductance(device: ActiveDevice, below: Term) -> Term:
    """gm reduced by what stands below the emitter or source; a Term in S."""
    gm, text = device.transconductance, device.s("gm")
    gain = device.source_transconductance * below.value
    if math.isinf(gain):
        return symbol("0", 0.0)
    if gain < 0.01:
        return symbol(text, gm)
    reduced = gm / (1.0 + gain * (1.0 + 1.0 / (device.beta_plus_one - 1.0)))
    return Term(reduced, f"{text}/(1 + {device.source_symbol}·{below.within(FACTOR)})", binding=SUM)


def _inverse_gm(device: ActiveDevice) -> Term:
    return symbol(f"1/{device.source_symbol}", 1.0 / device.source_transconductance)


def merge_nodes(pairs: Sequence[tuple[int, int]]) -> dict[int, int]:
    """Union of tied nodes: node to representative; ground (−1) represents its own set."""
    parent: dict[int, int] = {}

    def root(node: int) -> int:
        while (up := parent.setdefault(node, node)) != node:
            node = up
        return node

    for a, b in pairs:
        ra, rb = root(a), root(b)
        if ra != rb:
            # Ground stays a root, so that the set it belongs to is known by it.
            parent[rb if ra == -1 else ra] = ra if ra == -1 else rb
    return {node: root(node) for node in parent}
