"""``tauledger completion``: the shells' scripts, made by shtab from the parsers themselves."""

from __future__ import annotations

import argparse
from collections.abc import Iterator
from functools import partial
from typing import Any

from tauledger.commands.output import FINE, deliver, write_utf8
from tauledger.commands.parsers import COMMANDS, command_parser, top_parser

NETLISTS = ("cir", "circ", "ckt", "net", "netlist", "sp", "spi", "spice", "sub", "subckt")
"""Suffixes of files that hold circuits, or parts of them."""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] SHELL"
    parser.add_argument(
        "shell", metavar="SHELL", choices=("bash", "zsh", "fish"), help="bash, zsh or fish"
    )


def run(arguments: argparse.Namespace) -> int:
    """Print what the shell reads to complete commands, options, choices and file names."""
    script = _script(arguments.shell)
    deliver(lambda: write_utf8(script))
    return FINE


def _script(shell: str) -> str:
    import shtab

    # What stands for a value in the help tells what is completed for it.
    files: dict[str, Any] = {
        **dict.fromkeys(("NETLIST", "OLD", "NEW"), shtab.glob(*_patterns(NETLISTS))),
        "SVG": shtab.glob(*_patterns(("svg",))),
        "FILE": shtab.FILE,
    }
    parser = top_parser()
    commands = parser.add_subparsers(metavar="COMMAND")
    for name, command in COMMANDS.items():
        of_command = command_parser(name, partial(commands.add_parser, name, help=command.summary))
        for action in of_command._actions:
            if action.metavar in files:
                action.complete = files[action.metavar]  # type: ignore[attr-defined]
    script: str = shtab.complete(parser, shell)
    return script


def _patterns(suffixes: tuple[str, ...]) -> Iterator[str]:
    """Both cases: editors of Windows write ``PREAMP.CIR``, and fish knows no sets of letters."""
    for suffix in suffixes:
        yield from (f"*.{suffix}", f"*.{suffix.upper()}")
