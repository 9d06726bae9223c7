"""What the decisions are reported from: plain frozen values, units in the names."""

from __future__ import annotations

from tauledger.problems import Problem
from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class DrawRow:
    """One thing that differs from board to board."""

    label: str
    low: float
    """Relative, or in ``unit``, from nominal."""
    high: float
    unit: str


@dataclass(frozen=True, slots=True)
class Percentile:
    percent: float
    value: float


@dataclass(frozen=True, slots=True)
class WorstCase:
    """A figure with every draw at the end that is worst for it, solved anew."""

    value: float
    ends: tuple[str, ...]
    """The leading draws and their ends, such as ``CE low``, strongest first; or that a board
    inside the tolerances was worse than their ends."""


@dataclass(frozen=True, slots=True)
class Contribution:
    """What one draw does to one figure."""

    label: str
    share: float
    """Squared correlation with the logarithm of the figure over the boards, 0…1."""
    sensitivity: float | None
    """d ln(figure)/d ln(value) at the nominal board; None for a shift. Of a linear figure
    d(figure)/d ln(value), in its unit."""
    at_low: float
    """Relative change of the figure with this draw alone at its low end; of a linear figure the
    change in its unit."""
    at_high: float


@dataclass(frozen=True, slots=True)
class Yield:
    """Boards that keep a limit, with the 95 % confidence interval of their share (Wilson)."""

    minimum: str
    """As written in the configuration; empty when that end is open."""
    maximum: str
    passed: int
    boards: int
    share: float
    lowest: float
    highest: float
    least: float | None = None
    """``minimum`` in the unit of the figure, a gain as a ratio; None when that end is open."""
    most: float | None = None


@dataclass(frozen=True, slots=True)
class Histogram:
    """Equal bins in the logarithm of the figure, or in a linear figure itself."""

    edges: tuple[float, ...]
    counts: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class FigureSpread:
    """How one figure differs over the boards."""

    figure: str
    """``gain``, ``low corner`` or ``high corner``; then those with limits, under the names that
    ``check`` gives them, such as ``voltage of coll``."""
    unit: str
    nominal: float
    mean: float
    deviation: float
    """Standard deviation over the boards."""
    linear_deviation: float
    """By propagation of the sensitivities alone."""
    percentiles: tuple[Percentile, ...]
    worst_low: WorstCase
    worst_high: WorstCase
    missing: int
    """Boards without this figure."""
    contributions: tuple[Contribution, ...]
    """Strongest first."""
    histogram: Histogram
    kept: Yield | None = None
    """Against the limits of the configuration, where there are any."""
    linear: bool = False
    """Whether its changes are differences in its unit rather than ratios, as of a voltage, which
    may be zero or negative."""


@dataclass(frozen=True, slots=True)
class DemandRow:
    """Something asked of every board that is no figure with a spread: ``low corner set by CE``."""

    demand: str
    kept: Yield


@dataclass(frozen=True, slots=True)
class LeaderRow:
    """How often one capacitor or inductor sets a corner."""

    end: str
    part: str
    share: float
    """Of the boards that have this corner."""


@dataclass(frozen=True, slots=True)
class Spread:
    """Everything ``tauledger spread`` shows."""

    title: str
    netlist: str
    version: str
    boards: int
    seed: int
    distribution: str
    failed: int
    """Boards without an operating point."""
    draws: tuple[DrawRow, ...]
    fixed: tuple[str, ...]
    """Parts for which no tolerance is known."""
    figures: tuple[FigureSpread, ...]
    leaders: tuple[LeaderRow, ...]
    total: Yield | None = None
    """Boards that keep all limits."""
    notes: tuple[str, ...] = ()
    problems: tuple[Problem, ...] = ()
    demands: tuple[DemandRow, ...] = ()


@dataclass(frozen=True, slots=True)
class FittedRow:
    """One capacitor of a choice."""

    part: str
    old_f: float
    new_f: float
    ideal_f: float | None
    """By the closed form, before a standard value; None where it does not apply."""
    series: str
    """Series the value is from, or ``available`` or ``unchanged``."""


@dataclass(frozen=True, slots=True)
class Alternative:
    """One way to meet the target."""

    rule: str
    """What it is best by: ``least total capacitance``, ``fewest changes``; several with ``; ``."""
    parts: tuple[FittedRow, ...]
    corner_hz: float
    """Exact −3 dB frequency with these values."""
    worst_hz: float | None
    """With every capacitor at the worse end of its tolerance; None without tolerances."""
    margin: float
    """How far the corner (the worst one, when asked for) is on the right side of the target,
    relative to it; never less than the margin asked for."""
    peak_db: float
    """How far the response rises above midband on its way to the corner."""
    settling_s: float | None
    """To 1 % after switch-on, from the slowest pole."""
    total_f: float
    """Of the capacitors it may change."""
    values: int
    """Different values among them."""
    settling_ratio: float | None = None
    """``settling_s`` over that of the netlist as it stands; None when one of them is none."""


@dataclass(frozen=True, slots=True)
class Choice:
    """Everything ``tauledger choose`` shows."""

    title: str
    netlist: str
    version: str
    end: str
    target_hz: float
    margin_asked: float | None
    with_tolerance: bool
    now_hz: float | None
    """The corner as the netlist stands."""
    now_settling_s: float | None
    alternatives: tuple[Alternative, ...]
    infeasible: str = ""
    """Which constraint binds, when there is no alternative."""
    notes: tuple[str, ...] = ()
    problems: tuple[Problem, ...] = ()


@dataclass(frozen=True, slots=True)
class CapacitorStress:
    """One capacitor at the operating point."""

    part: str
    nodes: tuple[str, str]
    capacitance_f: float
    voltage_v: float
    """From the first node to the second."""
    polarised: str
    """What says so; empty when nothing does."""
    rated_v: float | None
    required_v: float
    """Rating needed for the voltage with the margin asked for."""
    effective_f: float | None
    """At its voltage and temperature, by the curves of the configuration."""
    basis: str
    """Where ``effective_f`` comes from; empty without it."""
    discharge: str
    """Parts through which it discharges after switch-off; empty when there is no path."""
    discharge_tau_s: float | None


@dataclass(frozen=True, slots=True)
class ResistorStress:
    part: str
    power_w: float
    rated_w: float | None
    load: float | None
    """Power over rating."""


@dataclass(frozen=True, slots=True)
class DeviceStress:
    """One transistor or diode at the operating point."""

    part: str
    model: str
    power_w: float
    """Into all its terminals, turned into heat."""
    rated_w: float | None
    """Of all its ``m`` devices in parallel."""
    load: float | None
    """Power over rating."""
    basis: str
    """What states the rating: a class of the configuration or a model card; empty without one."""


@dataclass(frozen=True, slots=True)
class Stress:
    """Everything ``tauledger stress`` shows."""

    title: str
    netlist: str
    version: str
    temperature_c: float
    margin: float
    """Asked for between rating and voltage, relative to the rating."""
    capacitors: tuple[CapacitorStress, ...]
    resistors: tuple[ResistorStress, ...]
    settling_s: float | None
    slowest_pole_hz: float | None
    low_hz: float | None
    low_effective_hz: float | None
    """With the effective capacitances."""
    high_hz: float | None
    high_effective_hz: float | None
    notes: tuple[str, ...] = ()
    problems: tuple[Problem, ...] = ()
    devices: tuple[DeviceStress, ...] = ()
    """Transistors and diodes, in netlist order."""


@dataclass(frozen=True, slots=True)
class TransistorAt:
    name: str
    current_a: float
    voltage_v: float
    """Collector-emitter or drain-source."""


@dataclass(frozen=True, slots=True)
class TemperatureRow:
    """The amplifier at one temperature; None for figures that do not exist there."""

    temperature_c: float
    gain: float | None
    low_hz: float | None
    high_hz: float | None
    transistors: tuple[TransistorAt, ...]


@dataclass(frozen=True, slots=True)
class TemperatureSweep:
    """Everything ``tauledger temperature`` shows."""

    title: str
    netlist: str
    version: str
    gain_unit: str
    rows: tuple[TemperatureRow, ...]
    notes: tuple[str, ...] = ()
    problems: tuple[Problem, ...] = ()
