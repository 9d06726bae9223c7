"""Arguments that commands share, and what they add to a netlist."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from tauledger.analysis import Analysis
    from tauledger.configuration.settings import PathSettings
    from tauledger.revisions import Aim


def path_arguments(parser: argparse.ArgumentParser, output: str = "--output") -> None:
    path = parser.add_argument_group("what the netlist leaves open")
    path.add_argument("--input", metavar="NAME", help="independent source that drives the path")
    path.add_argument(output, metavar="NODE", help="output node, or A,B between two")
    path.add_argument(
        "--config", metavar="FILE", type=Path, help="in place of the tauledger.toml found"
    )
    path.add_argument("--path", metavar="NAME", help="signal path of the configuration")
    path.add_argument(
        "--generic-models", action="store_true", help="stand-ins for missing models, marked so"
    )


def expanded(names: Sequence[str]) -> list[str]:
    """The files that wildcards stand for, which the shells of Windows leave to the program.

    A file that exists stands for itself: names may hold brackets there.
    """
    if sys.platform != "win32":
        return list(names)
    import glob
    import os

    return [
        found
        for name in names
        for found in ([] if os.path.exists(name) else sorted(glob.glob(name))) or [name]
    ]


_SUFFIXES = {
    ".json": "json", ".md": "markdown", ".html": "html", ".htm": "html", ".svg": "svg",
    ".png": "png",
}  # fmt: skip


def format_arguments(parser: argparse.ArgumentParser, forms: Sequence[str]) -> None:
    """``--format``, and the file to save to, whose name may settle the format."""
    *most, last = forms
    parser.add_argument(
        "--format",
        metavar="FORMAT",
        choices=forms,
        help=f"{', '.join(most)} or {last}; text by default",
    )
    parser.add_argument("--save", metavar="FILE", help="write there, as its name ends")


def format_of(arguments: argparse.Namespace, forms: Sequence[str]) -> str:
    """The format asked for, or the one a file saved to is named after, or text."""
    named = _SUFFIXES.get(Path(arguments.save).suffix.lower(), "") if arguments.save else ""
    form: str = arguments.format or (named if named in forms else "text")
    return form


def midband_argument(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--midband", metavar="FREQ", type=frequency, help="judge gain there (1kHz): equalisers"
    )


def frequency(text: str) -> float:
    from tauledger.configuration.settings import HIGHEST_MIDBAND_HZ, LOWEST_MIDBAND_HZ
    from tauledger.quantity import parse_si

    try:
        value, unit = parse_si(text)
    except ValueError as error:
        raise argparse.ArgumentTypeError(str(error)) from None
    if unit not in ("", "Hz") or not LOWEST_MIDBAND_HZ <= value <= HIGHEST_MIDBAND_HZ:
        expected = "a frequency from 1mHz to 1THz such as 1kHz"
        raise argparse.ArgumentTypeError(f"expected {expected}, found {text!r}")
    return value


def settings_of(
    arguments: argparse.Namespace, netlist: Path, roots: Sequence[Path] | None = None
) -> PathSettings | None:
    """What the configuration and the options add to the netlist."""
    from tauledger.configuration.choice import find_settings
    from tauledger.netlist.include import default_roots

    roots = roots or default_roots(netlist)
    settings = find_settings(netlist, roots, arguments.config, arguments.path)
    if arguments.generic_models and (settings is None or settings.generic is None):
        from tauledger.configuration.settings import GenericModels, PathSettings

        settings = replace(settings or PathSettings(), generic=GenericModels())
    return settings


def analysis_of(arguments: argparse.Namespace) -> tuple[Analysis, PathSettings | None]:
    from tauledger.analysis import analyze, read

    netlist = read(arguments.netlist)
    settings = settings_of(arguments, Path(arguments.netlist))
    analysis = analyze(netlist, arguments.input, arguments.output, settings, arguments.midband)
    return analysis, settings


def aim_of(arguments: argparse.Namespace) -> Aim:
    """What is asked of both sides of a comparison, each with the configuration it has."""
    from tauledger.revisions import Aim

    return Aim(
        arguments.input,
        arguments.output,
        arguments.midband,
        lambda place: settings_of(arguments, place.path, place.roots),
    )
