"""The rows every report is made from: plain frozen values, nothing to compute.

Field names carry the unit. A figure that does not exist (no high corner, say) is None, and a
note says why.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from tauledger.problems import Problem
from tauledger.records import dataclass

if TYPE_CHECKING:  # a comparison is rare, and its classes take a while to make
    from tauledger.review.changes import Comparison


REGION_CODE = "region-unsuited"
"""Code of the warning about a transistor that is not where an amplifier needs it."""


@dataclass(frozen=True, slots=True)
class NamedValue:
    """A figure with its symbol and unit, such as gm = 38.2 mS."""

    symbol: str
    value: float
    unit: str


@dataclass(frozen=True, slots=True)
class NodeRow:
    node: str
    voltage_v: float


@dataclass(frozen=True, slots=True)
class TransistorRow:
    name: str
    type: str
    """``NPN``, ``PNP``, ``N-JFET``, ``P-JFET``, ``N-MOSFET``, ``P-MOSFET``."""
    model: str
    configuration: str
    """``common emitter``, ``emitter follower``, ``current mirror`` …"""
    region: str
    current_a: float
    """Collector or drain current, with the sign of the current into the terminal."""
    voltage_v: float
    """Collector-emitter or drain-source voltage."""
    values: tuple[NamedValue, ...]
    """gm, rπ, ro, β, Cπ, Cμ, or their FET equivalents, in that order."""
    power_w: float | None = None
    """Dissipated at the operating point, without signal."""
    beta_dc: float | None = None
    """Collector over base current; None for field-effect transistors."""


@dataclass(frozen=True, slots=True)
class DividerRow:
    """The emitter current of one transistor by hand, beside the solved one."""

    transistor: str
    source_v: float
    """Thévenin voltage of the divider at its base, against ground."""
    source_ohm: float
    emitter_ohm: float
    hand_a: float
    solved_a: float
    difference: float
    """hand/solved − 1."""
    reason: str
    """Why they differ by more than 10 %; empty when they do not."""
    method: str


@dataclass(frozen=True, slots=True)
class HeadroomRow:
    """How far the output of a path can move before a transistor leaves its region."""

    up_v: float | None
    """Upwards, V; None when nothing limits it."""
    up_limit: str
    """``Q2 cuts off`` …"""
    down_v: float | None
    """Downwards, V, as a positive number."""
    down_limit: str
    method: str


@dataclass(frozen=True, slots=True)
class StageRow:
    number: int
    transistors: tuple[str, ...]
    configuration: str
    input_node: str
    output_node: str
    gain: float | None
    """Loaded voltage gain from input_node to output_node at midband, signed, V/V."""
    input_resistance_ohm: float | None
    """Looking into the terminal that the signal enters."""
    output_resistance_ohm: float | None
    """At the output node, with everything attached to it."""
    formula: str = ""
    """Its gain by inspection, in symbols and with numbers put in; empty when no rule holds."""
    formula_value: float | None = None
    formula_reason: str = ""
    """Why there is no formula."""


@dataclass(frozen=True, slots=True)
class TimeConstantRow:
    """One capacitor or inductor at one end of the band."""

    name: str
    nodes: tuple[str, str]
    value: float
    unit: str
    """``F`` or ``H``."""
    role: str
    end: str
    """``low``, ``high``, ``in-band`` or ``no effect``."""
    resistance_ohm: float | None
    """Seen with the others of its end shorted (low) or open (high)."""
    tau_s: float | None
    corner_hz: float | None
    share: float | None
    """Part of the sum at its end, 0…1; None when not counted."""
    zero_hz: float | None
    """The zero it makes on its own, where that is finite and not zero."""
    dc_voltage_v: float | None
    """From nodes[0] to nodes[1]; None for device capacitances, inductors and the load that the
    configuration attaches, which is no part of the board."""
    reason: str
    """Why it stands at this end, with the figures compared."""
    expression: str = ""
    """The resistance it sees in symbols, as a hand analysis writes it; empty when none holds."""
    expression_deviation: float | None = None
    """Value of the expression over resistance_ohm, minus one."""
    expression_reason: str = ""
    """Why there is no expression, where one was looked for."""
    exact_move: float | None = None
    """d ln(exact corner of its end) / d ln(value); −1 for the only capacitor of a corner."""


@dataclass(frozen=True, slots=True)
class CornerRow:
    end: str
    """``low`` or ``high``."""
    estimate_hz: float | None
    """By the sum of time constants."""
    exact_hz: float | None
    """−3 dB frequency of the whole linear network."""
    estimate_error: float | None
    """estimate/exact − 1."""
    set_by: tuple[str, ...]
    """The capacitor that sets it; several when they tie."""
    poles_hz: tuple[complex, ...]
    """Poles of this end, in Hz, slowest first; negative real part is stable."""
    zeros_hz: tuple[complex, ...]
    notes: tuple[str, ...]
    improved_hz: float | None = None
    """By the best estimate whose conditions hold."""
    improved_method: str = ""
    improved_error: float | None = None
    """improved/exact − 1."""
    lowest_hz: float | None = None
    highest_hz: float | None = None
    """Rigorous bounds of this end alone, where they hold."""
    changes: tuple[str, ...] = ()
    """What doubling or halving the leading parts does to the corner."""
    timing: tuple[str, ...] = ()
    """Rise time, droop and settling, each with its condition."""


@dataclass(frozen=True, slots=True)
class ComparisonRow:
    """One figure three ways: by hand analysis, by our linear network, by a simulator."""

    figure: str
    """``midband gain``, ``low corner``, ``high corner`` or ``gm``."""
    part: str
    """The transistor whose figure it is; empty for one of the path."""
    unit: str
    estimate: float | None
    exact: float | None
    simulated: float | None
    difference: float | None
    """simulated/exact − 1."""


@dataclass(frozen=True, slots=True)
class SimulatedRow:
    """What a circuit simulator made of the same path."""

    simulator: str
    """Name and version."""
    figures: tuple[ComparisonRow, ...]


@dataclass(frozen=True, slots=True)
class ResponsePoint:
    """One point of the exact response."""

    frequency_hz: float
    gain: float
    """Magnitude, in the path's ``gain_unit``."""


@dataclass(frozen=True, slots=True)
class PathRow:
    """One signal path: input source to output node."""

    input: str
    output: str
    midband_hz: float | None
    gain: float | None
    """Exact gain at midband_hz, output over input, V/V (or Ω when the input is a current); the
    sign is that of its real part."""
    gain_unit: str
    gain_db: float | None
    input_resistance_ohm: float | None
    output_resistance_ohm: float | None
    stages: tuple[StageRow, ...]
    time_constants: tuple[TimeConstantRow, ...]
    low: CornerRow | None
    high: CornerRow | None
    notes: tuple[str, ...]
    unstable_hz: float | None = None
    """Magnitude of a natural frequency that grows, when there is one."""
    gain_by_formulas: float | None = None
    """Product of the stages' formulas and the divisions round them; None unless all hold."""
    gain_by_inspection: float | None = None
    """Signed gain with low-end parts short and high-end parts open, as a hand analysis has it."""
    simulated: SimulatedRow | None = None
    """Filled when the user asked for a simulator beside."""
    response: tuple[ResponsePoint, ...] = ()
    """The exact response over the band and its edges, in equal steps of log frequency."""
    headroom: HeadroomRow | None = None
    """None without a transistor that the signal passes, or without a midband."""


@dataclass(frozen=True, slots=True)
class Review:
    """Everything a report shows."""

    title: str
    netlist: str
    """Path of the netlist as given."""
    version: str
    temperature_c: float
    nodes: tuple[NodeRow, ...]
    transistors: tuple[TransistorRow, ...]
    paths: tuple[PathRow, ...]
    problems: tuple[Problem, ...]
    supply_power_w: float | None
    comparison: Comparison | None = None
    """Filled when the user asked for the changes since another revision."""
    dividers: tuple[DividerRow, ...] = ()
    """Transistors biased by a divider and an emitter resistor, by hand."""
