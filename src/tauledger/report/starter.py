"""A ``tauledger.toml`` to start from: what the analysis found, limits left for the engineer."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence

from tauledger.quantity import format_quantity
from tauledger.report.inert import clip, inert
from tauledger.report.starter_parts import PartFound, part_tables
from tauledger.report.toml_text import toml_text
from tauledger.review.rows import CornerRow, PathRow, Review

_COMMENT_COLUMNS = 90
_NETS_SHOWN = 60


def starter(review: Review, netlist: str, parts: Sequence[PartFound]) -> str:
    """The text of the file, for a netlist at ``netlist`` relative to the file's folder.

    Every limit and every class of ``parts`` is a comment, so the file is valid as it stands,
    limits nothing and claims nothing.
    """
    path, name = review.paths[0], _path_name(netlist)
    lines = [
        *_head(review.title, name, netlist),
        f"input = {toml_text(path.input)}",
        f"output = {_output(path)}",
        "",
        "# Limits: take the # away and write what the circuit must do. Each may have min, max or",
        '# both, such as max = "150 Hz"; the figure found is behind it.',
        f"[path.{name}.limits]",
        *_limits(path),
        "",
        *_currents(name, review),
        *part_tables(parts),
    ]
    return "\n".join(lines).rstrip("\n") + "\n"


def bare_starter(title: str, nets: Sequence[str], netlist: str, parts: Sequence[PartFound]) -> str:
    """The same for a netlist that could not be analysed: its nets, and what may be missing."""
    more = f" and {len(nets) - _NETS_SHOWN} more" if len(nets) > _NETS_SHOWN else ""
    lines = [
        *_head(title, _path_name(netlist), netlist),
        "# Nets found:",
        *(f"#   {toml_text(net)}" for net in nets[:_NETS_SHOWN]),
        *([f"#  {more}"] if more else []),
        "# What the netlist leaves open: take the # away and name its nets.",
        '# input = { node = "", resistance = "" }',
        '# output = { node = "", load_resistance = "" }',
        '# supplies = { "" = "" }',
        "# generic_models = true",
        "",
        *part_tables(parts),
    ]
    return "\n".join(lines).rstrip("\n") + "\n"


def _path_name(netlist: str) -> str:
    stem = netlist.rpartition("/")[2].rpartition(".")[0]
    return re.sub(r"[^a-z0-9]+", "-", stem.lower()).strip("-") or "amplifier"


def _head(title: str, name: str, netlist: str) -> list[str]:
    what = _comment(title) or "What the schematic leaves out, and what it must do"
    return [f"# {what}", "", f"[path.{name}]", f"netlist = {toml_text(netlist)}"]


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
        yield f"# {corner.end}_corner_set_by = {toml_text(corner.set_by[0])}"
    elif corner.set_by:
        tied = _comment(", ".join(corner.set_by))
        yield f'# {corner.end}_corner_set_by = ""  # found a tie: {tied}'


def _currents(name: str, review: Review) -> Iterator[str]:
    if review.transistors:
        yield f"# [path.{name}.limits.current]"
        for row in review.transistors:
            found = format_quantity(abs(row.current_a), "A")
            yield f'# {toml_text(row.name)} = {{ min = "", max = "" }}  # found {found}'
        yield ""


def _output(path: PathRow) -> str:
    nodes = path.output.split(" − ")
    return toml_text(nodes[0]) if len(nodes) == 1 else f"[{', '.join(map(toml_text, nodes))}]"


def _comment(text: str) -> str:
    return clip(inert(text), _COMMENT_COLUMNS).strip()
