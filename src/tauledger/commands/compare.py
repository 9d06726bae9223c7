"""``tauledger compare``."""

from __future__ import annotations

import argparse
import sys

from tauledger.commands.arguments import aim_of, midband_argument, path_arguments
from tauledger.commands.output import FINE, deliver, show_page, write_utf8


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] OLD NEW"
    for name in ("old", "new"):
        parser.add_argument(
            name, metavar=name.upper(), help="netlist, or REV:path in git, counted from its top"
        )
    path_arguments(parser)
    midband_argument(parser)
    parser.add_argument(
        "--format",
        metavar="FORMAT",
        choices=("text", "json", "markdown"),
        default="text",
        help="text (default), json or markdown",
    )


def run(arguments: argparse.Namespace) -> int:
    """Compare two revisions of a netlist and print which edit moved each corner."""
    from tauledger.revisions import compare_netlists

    comparison = compare_netlists(arguments.old, arguments.new, aim_of(arguments))
    if arguments.format == "json":
        from tauledger.report.json_report import json_report

        text = json_report(comparison)
        deliver(lambda: sys.stdout.write(text))
    elif arguments.format == "markdown":
        from tauledger.report.markdown_changes import changes_section

        section = changes_section(comparison)
        deliver(lambda: write_utf8(section))
    else:
        from tauledger.report.changes import comparison_page

        show_page(lambda page: comparison_page(page, comparison))
    return FINE
