"""A ``tauledger.toml`` to start from: what the analysis found, limits left for the engineer."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator, Sequence

from tauledger.quantity import format_quantity
from tauledger.report.inert import clip, inert
from tauledger.review.rows import CornerRow, PathRow, Review

_COMMENT_COLUMNS = 90
_CAPACITORS_SHOWN = 40
_NETS_SHOWN = 60


def starter(review: Review, netlist: str) -> str:
    """The text of the file, for a netlist at ``netlist`` relative to the file's folder.

    Every limit is a comment, so the file is valid as it stands and limits nothing.
    """
    path, name = review.paths[0], _path_name(netlist)
    lines = [
        *_head(review.title, name, netlist),
        f"input = {_text(path.input)}",
        f"output = {_output(path)}",
        "",
        "# Limits: take the # away and write what the circuit must do. Each may have min, max or",
        '# both, such as max = "150 Hz"; the figure found is behind it.',
        f"[path.{name}.limits]",
        *_limits(path),
        "",
        *_currents(name, review),
        *_capacitors(path),
    ]
    return "\n".join(lines).rstrip("\n") + "\n"


def bare_starter(title: str, nets: Sequence[str], netlist: str) -> str:
    """The same for a netlist that could not be analysed: its nets, and what may be missing."""
    more = f" and {len(nets) - _NETS_SHOWN} more" if len(nets) > _NETS_SHOWN else ""
    lines = [
        *_head(title, _path_name(netlist), netlist),
        "# Nets found:",
        *(f"#   {_text(net)}" for net in nets[:_NETS_SHOWN]),
        *([f"#  {more}"] if more else []),
        "# What the netlist leaves open: take the # away and name its nets.",
        '# input = { node = "", resistance = "" }',
        '# output = { node = "", load_resistance = "" }',
        '# supplies = { "" = "" }',
        "# generic_models = true",
    ]
    return "\n".join(lines) + "\n"


def _path_name(netlist: str) -> str:
    stem = netlist.rpartition("/")[2].rpartition(".")[0]
    return re.sub(r"[^a-z0-9]+", "-", stem.lower()).strip("-") or "amplifier"


def _head(title: str, name: str, netlist: str) -> list[str]:
    what = _comment(title) or "What the schematic leaves out, and what it must do"
    return [f"# {what}", "", f"[path.{name}]", f"netlist = {_text(netlist)}"]


def _limits(path: PathRow) -> Iterator[str]:
    gain = "dB" if path.gain_db is not None else path.gain_unit
    value = path.gain_db if path.gain_db is not None else path.gain
    yield from _window("midband_gain", value, gain, "min", "max")
    for corner, end in ((path.low, "max"), (path.high, "min")):
        if corner is not None and corner.exact_hz is not None:
            yield from _window(f"{corner.end}_corner", corner.exact_hz, "Hz", end)
            yield from _set_by(corner)
    yield from _window("input_resistance", path.input_resistance_ohm, "Ω", "min")
    yield from _window("output_resistance", path.output_resistance_ohm, "Ω", "max")


def _window(key: str, value: float | None, unit: str, *ends: str) -> Iterator[str]:
    if value is None:
        return
    window = ", ".join(f'{end} = ""' for end in ends)
    found = format_quantity(abs(value) if unit != "dB" else value, unit)
    yield f"# {key} = {{ {window} }}  # found {found}"


def _set_by(corner: CornerRow) -> Iterator[str]:
    if len(corner.set_by) == 1:
        yield f"# {corner.end}_corner_set_by = {_text(corner.set_by[0])}"
    elif corner.set_by:
        tied = _comment(", ".join(corner.set_by))
        yield f'# {corner.end}_corner_set_by = ""  # found a tie: {tied}'


def _currents(name: str, review: Review) -> Iterator[str]:
    if review.transistors:
        yield f"# [path.{name}.limits.current]"
        for row in review.transistors:
            found = format_quantity(abs(row.current_a), "A")
            yield f'# {_text(row.name)} = {{ min = "", max = "" }}  # found {found}'
        yield ""


def _capacitors(path: PathRow) -> Iterator[str]:
    on_board = [row for row in path.time_constants if row.dc_voltage_v is not None]
    if not on_board:
        return
    yield "# Classes of capacitors. One named for electrolytic, tantalum or polarised parts has its"
    yield "# polarity checked; the rating is for limits on capacitor_voltage_margin."
    yield "# [capacitors.electrolytic]"
    yield f"# match = [{', '.join(_text(row.name) for row in on_board[:_CAPACITORS_SHOWN])}]"
    yield '# tolerance = ""'
    yield '# rated_voltage = ""'


def _output(path: PathRow) -> str:
    nodes = path.output.split(" − ")
    return _text(nodes[0]) if len(nodes) == 1 else f"[{', '.join(map(_text, nodes))}]"


def _text(text: str) -> str:
    """A TOML string: its escapes are those of JSON, but for DEL, which TOML wants escaped too."""
    safe = text.encode("utf-8", "backslashreplace").decode("utf-8")
    return json.dumps(safe, ensure_ascii=False).replace("\x7f", "\\u007f")


def _comment(text: str) -> str:
    return clip(inert(text), _COMMENT_COLUMNS).strip()
