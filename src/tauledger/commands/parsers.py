"""The commands, and the parser of each, made when it is asked for."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable
from importlib import import_module
from types import ModuleType
from typing import NoReturn

from tauledger.commands.output import refuse
from tauledger.records import dataclass
from tauledger.version import VERSION

_SCREEN_LINES = 24


@dataclass(frozen=True, slots=True)
class Command:
    """One subcommand: how it reads in the help."""

    summary: str
    example: str


COMMANDS = {
    "report": Command(
        "Print bias, stages, gain and what sets each corner.",
        "tauledger report preamp.cir --output out",
    ),
    "compare": Command(
        "Print how two revisions differ and which edit moved each corner.",
        "tauledger compare HEAD~1:boards/preamp.cir boards/preamp.cir",
    ),
    "annotate": Command(
        "Write the results beside the parts, as comments or on a drawing.",
        "tauledger annotate preamp.cir --drawing preamp.svg --output marked.svg",
    ),
    "check": Command(
        "Hold netlists against their limits and look for what is wrong.",
        "tauledger check boards/*.cir --format github",
    ),
    "start": Command(
        "Write a tauledger.toml to fill in, from what a netlist holds.",
        "tauledger start preamp.cir --output tauledger.toml",
    ),
    "spread": Command(
        "Print how gain and corners spread over boards within tolerances.",
        "tauledger spread preamp.cir --tolerance 'R*=5%' --tolerance 'C*=20%'",
    ),
    "choose": Command(
        "Print which standard values meet a corner, verified exactly.",
        "tauledger choose preamp.cir --low-corner 20Hz --only C1,C3",
    ),
    "stress": Command(
        "Print voltages and polarity of capacitors, heat, start-up.",
        "tauledger stress preamp.cir --margin 30%",
    ),
    "temperature": Command(
        "Print gain, corners and bias over a range of temperatures.",
        "tauledger temperature preamp.cir --range 0..60",
    ),
    "completion": Command(
        "Print a script that lets a shell complete what is typed here.",
        "tauledger completion fish > ~/.config/fish/completions/tauledger.fish",
    ),
}


class Parser(argparse.ArgumentParser):
    """Usage errors take the same road as every other problem, the help that of every page.

    Help that is longer than a screen goes without the blank lines between its sections.
    """

    def format_help(self) -> str:
        from tauledger.report.alphabet import alphabet

        text = super().format_help()
        if text.count("\n") > _SCREEN_LINES:
            text = text.replace("\n\n", "\n")
        return alphabet(sys.stdout.encoding)(text)

    def error(self, message: str) -> NoReturn:
        refuse("usage", f"{self.prog}: {message}", f"See {self.prog} --help.")


def top_parser() -> Parser:
    """What stands before a command."""
    width = max(map(len, COMMANDS))
    listing = "\n".join(f"  {name:<{width}}  {c.summary}" for name, c in COMMANDS.items())
    example = next(iter(COMMANDS.values())).example
    parser = Parser(
        prog="tauledger",
        usage="tauledger COMMAND [ARGUMENTS]",
        description="Which capacitor sets each corner of a transistor amplifier, and why.",
        epilog=f"commands:\n{listing}\n\nexample:\n  {example}\n\n"
        "tauledger COMMAND --help tells more of one command.",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    version = f"tauledger {VERSION}"
    parser.add_argument("--version", action="version", version=version, help="print the version")
    return parser


def module_of(name: str) -> ModuleType:
    """The module of a command, with ``add_arguments`` and ``run``."""
    return import_module(f"tauledger.commands.{name}")


def command_parser(
    name: str, make: Callable[..., argparse.ArgumentParser] = Parser
) -> argparse.ArgumentParser:
    """The parser of one command, as ``make`` makes one from the keywords of argparse."""
    command = COMMANDS[name]
    parser = make(
        prog=f"tauledger {name}",
        description=command.summary,
        epilog=f"example: {command.example}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    module_of(name).add_arguments(parser)
    return parser
