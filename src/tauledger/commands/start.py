"""``tauledger start``."""

from __future__ import annotations

import argparse
from pathlib import Path

from tauledger.commands.output import FINE, deliver, explain, refuse, write_utf8


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] NETLIST"
    parser.add_argument("netlist", metavar="NETLIST", help="SPICE netlist of the amplifier")
    parser.add_argument("--input", metavar="NAME", help="independent source that drives the path")
    parser.add_argument("--output-node", metavar="NODE", help="output node, or A,B between two")
    parser.add_argument(
        "--output", metavar="FILE", type=Path, help="new file, in place of standard output"
    )


def run(arguments: argparse.Namespace) -> int:
    """Write a configuration to fill in, from what is found in a netlist."""
    from tauledger.checking import starter_for

    output: Path | None = arguments.output
    folder = output.parent if output else None
    netlist = Path(arguments.netlist)
    text = starter_for(netlist, folder, arguments.input, arguments.output_node, explain)
    if output is None:
        deliver(lambda: write_utf8(text))
        return FINE
    try:
        with output.open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except FileExistsError:
        refuse("output-exists", f"{output} exists and is left as it is", "Name another file.")
    except OSError as error:
        refuse("output-unwritable", f"{output}: {error.strerror}", "Check the folder.")
    return FINE
