"""Review → what is said beside each part, in words; comments and marks share it."""

from __future__ import annotations

from collections.abc import Iterator

from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.review.rows import CornerRow, PathRow, Review, TimeConstantRow, TransistorRow


@dataclass(frozen=True, slots=True)
class PartNote:
    """One part's result."""

    name: str
    transistor: bool
    facts: tuple[str, ...]
    """For a comment, the most telling first."""
    mark: tuple[str, ...]
    """For a mark on a drawing, in short: one string a line."""
    narrow: tuple[str, ...]
    """The same in more and shorter lines."""
    sets: str
    """``low``, ``high`` or ``low and high`` when it sets that corner; else empty."""
    share: float | None
    """Of the sum of time constants at its end, 0…1."""


@dataclass(frozen=True, slots=True)
class Summary:
    """What stands at the head of a netlist and in the legend of a drawing."""

    path: str
    gain: str
    corners: tuple[tuple[str, ...], ...]
    """Low, then high: the figure, what sets it, the estimate."""


def summary_of(review: Review) -> Summary:
    """Gain and corners of the first signal path."""
    if not review.paths:
        return Summary("no signal path", "", ())
    path = review.paths[0]
    gain = "no midband gain"
    if path.gain is not None and path.gain_db is not None:
        figure = format_quantity(path.gain, "")
        gain = f"gain {figure} {path.gain_unit} ({format_quantity(path.gain_db, 'dB')})"
    return Summary(
        f"{path.input} to {path.output}",
        gain,
        (_corner(path.low, "low"), _corner(path.high, "high")),
    )


def _corner(corner: CornerRow | None, end: str) -> tuple[str, ...]:
    if corner is None or corner.exact_hz is None:
        return (f"no {end} corner",)
    parts = [f"{end} corner {format_quantity(corner.exact_hz, 'Hz')}"]
    if corner.set_by:
        parts.append(f"set by {' and '.join(corner.set_by)}")
    if corner.estimate_hz is not None:
        parts.append(f"by time constants {format_quantity(corner.estimate_hz, 'Hz')}")
    return tuple(parts)


def part_notes(review: Review) -> tuple[PartNote, ...]:
    """A note for every capacitor, inductor and transistor, in netlist order within each kind."""
    path = review.paths[0] if review.paths else None
    reactive = [
        _reactive_note(row, path)
        for row in (path.time_constants if path else ())
        if row.role != "device"
    ]
    return (*reactive, *(_transistor_note(row, path) for row in review.transistors))


def _reactive_note(row: TimeConstantRow, path: PathRow | None) -> PartNote:
    sets = _ends_set(path, row.name)
    if row.corner_hz is None or row.share is None:
        return PartNote(row.name, False, (row.role, row.end), (row.end,), (row.end,), "", None)
    corner, share = format_quantity(row.corner_hz, "Hz"), _percent(row.share)
    facts = [row.role]
    if row.resistance_ohm is not None:
        facts.append(f"sees {format_quantity(row.resistance_ohm, 'Ω')}")
    facts += [f"corner {corner}", f"{share} of the {row.end} end"]
    mark, narrow = [f"{corner}  {share}"], [corner, share]
    if sets:
        facts.append(f"SETS THE {sets.upper()} CORNER")
        mark.append(f"sets {sets} corner")
        narrow += [f"sets {sets}", "corner"]
    return PartNote(row.name, False, tuple(facts), tuple(mark), tuple(narrow), sets, row.share)


def _transistor_note(row: TransistorRow, path: PathRow | None) -> PartNote:
    bipolar = row.type in ("NPN", "PNP")
    current, voltage = ("IC", "VCE") if bipolar else ("ID", "VDS")
    configuration = row.configuration or row.type
    bias = (
        f"{current} {format_quantity(row.current_a, 'A')}",
        f"{voltage} {format_quantity(row.voltage_v, 'V')}",
    )
    gm = [
        f"gm {format_quantity(figure.value, figure.unit)}"
        for figure in row.values
        if figure.symbol == "gm"
    ]
    own = [entry for entry in _own_capacitances(row, path) if _ends_set(path, entry.name)]
    facts = [configuration, *bias, *gm]
    mark, narrow = [configuration, "  ".join(bias)], [*configuration.split(), *bias]
    for entry in own:
        symbol = entry.name.rpartition(".")[2]
        share = _percent(entry.share or 0.0)
        facts.append(
            f"{symbol} {share} of the {entry.end} end, SETS THE {entry.end.upper()} CORNER"
        )
        mark.append(f"{symbol} sets {entry.end} corner")
        narrow += [f"{symbol} sets", f"{entry.end} corner"]
    ends = " and ".join(dict.fromkeys(entry.end for entry in own))
    return PartNote(row.name, True, tuple(facts), tuple(mark), tuple(narrow), ends, None)


def _own_capacitances(row: TransistorRow, path: PathRow | None) -> Iterator[TimeConstantRow]:
    for entry in path.time_constants if path else ():
        if entry.role == "device" and entry.name.rpartition(".")[0] == row.name:
            yield entry


def _ends_set(path: PathRow | None, name: str) -> str:
    corners = (path.low, path.high) if path else ()
    return " and ".join(corner.end for corner in corners if corner and name in corner.set_by)


def _percent(share: float) -> str:
    return f"{100 * share:.1f} %" if share >= 0.0005 else "< 0.1 %"
