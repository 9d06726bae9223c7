"""``tauledger check``."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from tauledger.commands.arguments import expanded
from tauledger.commands.output import deliver, save_details, write_utf8
from tauledger.problems import Severity


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] [NETLIST ...]"
    parser.add_argument(
        "netlists",
        metavar="NETLIST",
        nargs="*",
        help="netlists to check; left out, all that tauledger.toml is for",
    )
    parser.add_argument(
        "--config", metavar="FILE", type=Path, help="in place of the tauledger.toml found"
    )
    parser.add_argument(
        "--fail-on",
        choices=("error", "warning"),
        default="error",
        help="least severity for exit code 1; error (default) or warning",
    )
    formats = ("text", "markdown", "github", "gitlab", "sarif", "junit", "json")
    parser.add_argument(
        "--format",
        choices=formats,
        default="text",
        help=f"text (default), {', '.join(formats[1:])}",
    )


def run(arguments: argparse.Namespace) -> int:
    """Hold netlists against their limits, and look for what is wrong in themselves."""
    from tauledger.checking import check_on_all_cores, render
    from tauledger.fleet import configured_targets, named_targets
    from tauledger.report.check_text import check_summary
    from tauledger.review.check import exit_code

    if arguments.netlists:
        netlists = list(map(Path, expanded(arguments.netlists)))
        targets = named_targets(netlists, arguments.config)
    else:
        targets = configured_targets(Path.cwd(), arguments.config)
    checks = check_on_all_cores(targets, sys.stderr)
    threshold = Severity(arguments.fail_on)
    text = render(checks, arguments.format, threshold, sys.stdout.encoding)
    deliver(lambda: write_utf8(text) if arguments.format != "text" else sys.stdout.write(text))
    if arguments.format == "text":
        sys.stderr.write(check_summary(checks))
    for one in checks:
        if one.details:
            where = save_details(one.details, [one.netlist])
            print(f"tauledger: internal error; {where}", file=sys.stderr)
    return exit_code(checks, threshold)
