"""What a ``tauledger.toml`` says, as plain values with the place where each stands."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import field
from pathlib import Path

from tauledger.problems import SourceSpan
from tauledger.records import dataclass

LOWEST_MIDBAND_HZ, HIGHEST_MIDBAND_HZ = 1e-3, 1e12
"""Between them the gain may be judged, by the configuration and by ``--midband`` alike."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """A value in the SI base unit; ``text`` is how it was written."""

    value: float
    unit: str
    """``Hz``, ``V``, ``A``, ``W``, ``Ω``, ``F``, ``dB``, ``%``, ``°C`` or ``V/V``."""
    text: str
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class Supply:
    """An ideal source to attach from a net to ground."""

    node: str
    voltage_v: float
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class Input:
    """Where the signal enters: a source of the netlist by name, or nets to attach one to."""

    source: str
    """Name of a source in the netlist; empty when one is attached to ``nodes``."""
    nodes: tuple[str, ...]
    """One net (against ground) or two; empty when ``source`` is given."""
    resistance_ohm: float
    """In series with the attached source; 0 for none."""
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class Output:
    """Where the signal leaves, one net or two, and the load to attach there."""

    nodes: tuple[str, ...]
    load_resistance_ohm: float | None
    load_capacitance_f: float | None
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class ModelFile:
    """A file of model cards and subcircuits, found inside the configuration's folder."""

    path: Path
    root: Path
    """The folder of the configuration, which the file's own includes may not leave."""
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class CapacitorClass:
    """Tolerance and rating of the capacitors whose designators match."""

    name: str
    match: tuple[str, ...]
    """Patterns of designators, letter case ignored."""
    tolerance: tuple[float, float] | None
    """Lowest and highest relative deviation, such as (−0.2, 0.8)."""
    rated_voltage_v: float | None
    span: SourceSpan
    matched: float | None = None
    """How far its parts differ among themselves, ± relative; None when they are independent."""
    polarised: bool | None = None
    """None when the configuration does not say."""
    series: str = ""
    """Values to choose from, such as ``E6``; empty when the configuration does not say."""
    values_f: tuple[float, ...] = ()
    """Values at hand, ascending; they count before the series."""
    dielectric: str = ""
    """EIA code of a ceramic dielectric, such as ``X7R``."""
    bias_curve: tuple[tuple[float, float], ...] = ()
    """(V, relative change of the capacitance), ascending in voltage."""
    temperature_curve: tuple[tuple[float, float], ...] = ()
    """(°C, relative change of the capacitance), ascending in temperature."""


@dataclass(frozen=True, slots=True)
class ResistorClass:
    """Tolerance and rating of the resistors whose designators match."""

    name: str
    match: tuple[str, ...]
    tolerance: tuple[float, float] | None
    rated_power_w: float | None
    matched: float | None
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class TransistorClass:
    """How far the transistors whose designators match stray from their model card."""

    name: str
    match: tuple[str, ...]
    current_gain: tuple[float, float] | None
    """Relative, of the model's forward current gain."""
    base_emitter_voltage_v: tuple[float, float] | None
    """Shift of VBE at a given current."""
    drain_current: tuple[float, float] | None
    """Relative, of a JFET's IDSS."""
    pinch_off: tuple[float, float] | None
    """Relative, of a JFET's pinch-off voltage, IDSS unchanged."""
    threshold_voltage_v: tuple[float, float] | None
    """Shift of a MOSFET's threshold."""
    matched: bool
    """Whether all of them stray alike."""
    span: SourceSpan
    rated_power_w: float | None = None


@dataclass(frozen=True, slots=True)
class DiodeClass:
    """Rating of the diodes whose designators match."""

    name: str
    match: tuple[str, ...]
    rated_power_w: float | None
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class SpreadSettings:
    """How boards differ beyond their parts."""

    distribution: str
    """``uniform``, ``normal`` or ``truncated``; empty when the configuration does not say."""
    supply: tuple[float, float] | None
    """Relative, of every DC voltage source on its own."""
    temperature_c: tuple[float, float] | None
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class Limit:
    """A window for one figure; at least one end is given."""

    figure: str
    """``midband_gain``, ``low_corner``, ``high_corner``, ``input_resistance``,
    ``output_resistance``, ``node_voltage``, ``current`` or ``capacitor_voltage_margin``."""
    subject: str
    """The node or transistor for ``node_voltage`` and ``current``; empty otherwise."""
    minimum: Quantity | None
    maximum: Quantity | None
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class Dominance:
    """The part that must set a corner."""

    end: str
    """``low`` or ``high``."""
    part: str
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class GenericModels:
    """Leave to put a generic model where one is missing."""

    kinds: Mapping[str, str] = field(default_factory=dict)
    """Lower-case name of a missing model → type (``npn``, ``pjf`` …), where names do not tell."""


@dataclass(frozen=True, slots=True)
class PathSettings:
    """One signal path. Everything but the netlist may be left to the netlist itself."""

    name: str = ""
    netlist: str = ""
    """Path or pattern, relative to the configuration's folder."""
    input: Input | None = None
    output: Output | None = None
    supplies: tuple[Supply, ...] = ()
    models: tuple[ModelFile, ...] = ()
    temperature: Quantity | None = None
    generic: GenericModels | None = None
    capacitors: tuple[CapacitorClass, ...] = ()
    """The first class that matches counts."""
    limits: tuple[Limit, ...] = ()
    dominance: tuple[Dominance, ...] = ()
    span: SourceSpan | None = None
    resistors: tuple[ResistorClass, ...] = ()
    """The first class that matches counts."""
    transistors: tuple[TransistorClass, ...] = ()
    """The first class that matches counts."""
    spread: SpreadSettings | None = None
    midband: Quantity | None = None
    """Where the gain is judged; None for the middle of the flat stretch."""
    diodes: tuple[DiodeClass, ...] = ()
    """The first class that matches counts."""


@dataclass(frozen=True, slots=True)
class Configuration:
    """A whole ``tauledger.toml``."""

    path: Path
    paths: tuple[PathSettings, ...]
