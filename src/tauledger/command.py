"""The command line: parse arguments, call, print. Nothing is computed here.

A subcommand is one entry in :data:`COMMANDS`: what it takes, and one function from its arguments
to the exit code. Exit codes: 0 fine; 1 a finding; 2 usage, configuration or unreadable input;
3 internal error; 130 interrupted; 141 the reader of the output has gone.
"""

from __future__ import annotations

import argparse
import os
import re
import sys
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

from tauledger.problems import Problem, ProblemError, Severity
from tauledger.version import VERSION

if TYPE_CHECKING:
    from tauledger.analysis import Analysis
    from tauledger.configuration.settings import PathSettings
    from tauledger.review.decisions import Choice, Spread, Stress, TemperatureSweep
    from tauledger.review.rows import Review
    from tauledger.revisions import Aim
    from tauledger.simulate.simulation import Simulation

FINE = 0
FINDING = 1
UNUSABLE = 2
INTERNAL = 3
INTERRUPTED = 130
PIPE_CLOSED = 141

PICTURES = ("html", "svg", "png")
"""The forms of a report that hold drawings."""


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code; only the SystemExit of ``--help`` leaves."""
    given = sys.argv[1:] if argv is None else list(argv)
    # The matrices are small: threads of the linear algebra would only wait for each other.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    if argv is None:
        _silence_warnings()
    try:
        try:
            return _run(given)
        finally:
            _deliver(sys.stdout.flush)
    except KeyboardInterrupt:
        print("tauledger: interrupted", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        _silence_stdout()
        return PIPE_CLOSED
    except ProblemError as error:
        _explain(error.problems)
        return UNUSABLE
    except Exception as error:
        # The last resort: a user is never shown a traceback.
        return _report_internal(error, given)


def _silence_warnings() -> None:
    """Python's own warnings are for developers, here and in workers, unless the user asks."""
    if not sys.warnoptions:
        import warnings

        warnings.simplefilter("ignore")
        os.environ["PYTHONWARNINGS"] = "ignore"


# Commands -----------------------------------------------------------------------------------------


def report(arguments: argparse.Namespace) -> int:
    """Analyse one netlist and print what sets its corners."""
    from tauledger.analysis import analyze, read

    netlist = read(arguments.netlist)
    settings = _settings(arguments, Path(arguments.netlist))
    ends = arguments.input, arguments.output
    wave = arguments.square_wave
    analysis = analyze(netlist, *ends, settings, arguments.midband, wave)
    review, simulation = analysis.review, None
    if arguments.simulate:
        review, simulation = _simulated(analysis)
    if arguments.against:
        from tauledger.revisions import compare_against

        since = compare_against(arguments.against, analysis, _aim(arguments))
        review = replace(review, comparison=since)
    _explain(review.problems)
    if arguments.format == "json":
        from tauledger.report.json_report import json_report

        _hand_over(json_report(review).encode(), arguments.save)
    elif arguments.format == "markdown":
        from tauledger.checking import markdown_of

        _hand_over(markdown_of(analysis.circuit, review, settings).encode(), arguments.save)
    elif arguments.format in PICTURES:
        from tauledger.illustrating import picture

        drawn = picture(arguments.format, analysis, review, settings, simulation)
        _hand_over(drawn, arguments.save)
    elif arguments.save:
        from tauledger.report.terminal import text_report

        _hand_over(text_report(review).encode(), arguments.save)
    else:
        from tauledger.report.terminal import write_text_report

        _deliver(lambda: write_text_report(review, sys.stdout))
    return FINE


def compare(arguments: argparse.Namespace) -> int:
    """Compare two revisions of a netlist and print which edit moved each corner."""
    from tauledger.revisions import compare_netlists

    comparison = compare_netlists(arguments.old, arguments.new, _aim(arguments))
    if arguments.format == "json":
        from tauledger.report.json_report import json_report

        text = json_report(comparison)
        _deliver(lambda: sys.stdout.write(text))
    elif arguments.format == "markdown":
        from tauledger.report.markdown_changes import changes_section

        section = changes_section(comparison)
        _deliver(lambda: _write_utf8(section))
    else:
        from tauledger.report.changes import comparison_page
        from tauledger.report.terminal import write_page

        _deliver(lambda: write_page(lambda page: comparison_page(page, comparison), sys.stdout))
    return FINE


def annotate(arguments: argparse.Namespace) -> int:
    """Write the results beside the parts, into netlists or onto the drawings of one."""
    netlists: list[str] = arguments.netlists
    if len(netlists) > 1 and (arguments.drawing or arguments.output):
        _refuse("usage", "--drawing and --output take one netlist", "Name one netlist at a time.")
    worst = FINE
    for netlist in netlists:
        arguments.netlist = netlist
        try:
            worst = max(worst, _annotate_one(arguments))
        except ProblemError as error:
            # One bad netlist does not stop the others.
            _explain(error.problems)
            worst = UNUSABLE
    return worst


def _annotate_one(arguments: argparse.Namespace) -> int:
    from tauledger.annotate import check_files, removed, write_files

    sources = arguments.drawing or [arguments.netlist]
    if arguments.output and len(sources) > 1:
        _refuse("usage", "--output takes one drawing", "Annotate one drawing at a time.")
    results = (
        removed(sources, bool(arguments.drawing)) if arguments.remove else _annotated(arguments)
    )
    targets = [arguments.output or source for source in sources]
    if not arguments.check:
        write_files(targets, results)
        return FINE
    stale = check_files(targets, results)
    _explain(stale)
    return FINDING if stale else FINE


def spread(arguments: argparse.Namespace) -> int:
    """Print how gain and corners spread over boards within tolerances."""
    from tauledger.deciding import run_spread

    analysis, settings = _analysis(arguments)
    result = run_spread(arguments, analysis, settings)
    _explain(result.problems)
    if arguments.format == "json":
        _deliver_decision(result)
    else:
        from tauledger.report.decision import spread_page
        from tauledger.report.terminal import write_page

        _deliver(lambda: write_page(lambda page: spread_page(page, result), sys.stdout))
    return FINE


def choose(arguments: argparse.Namespace) -> int:
    """Print which standard values meet a corner."""
    from tauledger.deciding import patch_of, run_choose

    analysis, settings = _analysis(arguments)
    result = run_choose(arguments, analysis, settings)
    _explain(result.problems)
    if arguments.patch is not None:
        change = patch_of(arguments, analysis, result)
        _deliver(lambda: _write_bytes(change))
        return FINE
    if arguments.format == "json":
        _deliver_decision(result)
    else:
        from tauledger.report.decision_parts import choice_page
        from tauledger.report.terminal import write_page

        _deliver(lambda: write_page(lambda page: choice_page(page, result), sys.stdout))
    return FINDING if result.infeasible else FINE


def stress(arguments: argparse.Namespace) -> int:
    """Print what voltage and heat the parts stand."""
    from tauledger.deciding import run_stress

    analysis, settings = _analysis(arguments)
    result = run_stress(arguments, analysis, settings)
    _explain(result.problems)
    if arguments.format == "json":
        _deliver_decision(result)
    else:
        from tauledger.report.decision_parts import stress_page
        from tauledger.report.terminal import write_page

        _deliver(lambda: write_page(lambda page: stress_page(page, result), sys.stdout))
    return FINDING if any(p.severity is Severity.ERROR for p in result.problems) else FINE


def temperature(arguments: argparse.Namespace) -> int:
    """Print gain, corners and bias over a range of temperatures."""
    from tauledger.deciding import run_temperature

    analysis, settings = _analysis(arguments)
    result = run_temperature(arguments, analysis, settings)
    _explain(result.problems)
    if arguments.format == "json":
        _deliver_decision(result)
    else:
        from tauledger.report.decision_parts import temperature_page
        from tauledger.report.terminal import write_page

        _deliver(lambda: write_page(lambda page: temperature_page(page, result), sys.stdout))
    return FINE


def _analysis(arguments: argparse.Namespace) -> tuple[Analysis, PathSettings | None]:
    from tauledger.analysis import analyze, read

    netlist = read(arguments.netlist)
    settings = _settings(arguments, Path(arguments.netlist))
    analysis = analyze(netlist, arguments.input, arguments.output, settings, arguments.midband)
    return analysis, settings


def _deliver_decision(decision: Spread | Choice | Stress | TemperatureSweep) -> None:
    from tauledger.report.decision_json import decision_json

    text = decision_json(decision)
    _deliver(lambda: sys.stdout.write(text))


def _write_bytes(content: bytes) -> None:
    """A patch as it is, which may hold any bytes of the netlist; harmless on a terminal."""
    if sys.stdout.isatty() or not hasattr(sys.stdout, "buffer"):
        from tauledger.report.inert import inert

        for line in content.decode("utf-8", "replace").splitlines():
            sys.stdout.write(inert(line) + "\n")
    else:
        sys.stdout.buffer.write(content)


def _annotated(arguments: argparse.Namespace) -> list[bytes]:
    from tauledger.analysis import analyze, read
    from tauledger.annotate import annotate_drawings, annotate_netlist, read_drawings
    from tauledger.netlist.source import read_bytes

    netlist = Path(arguments.netlist)
    content = read_bytes(netlist)
    settings = _settings(arguments, netlist)
    analysis = analyze(read(netlist), arguments.input, arguments.output_node, settings)
    review = analysis.review
    _explain(review.problems)
    if not arguments.drawing:
        places = {element.name: element.span for element in analysis.circuit.elements}
        return [annotate_netlist(content, review, places)]
    drawings, problems = annotate_drawings(read_drawings(arguments.drawing), review)
    _explain(problems)
    return [drawing.content for drawing in drawings]


def check(arguments: argparse.Namespace) -> int:
    """Hold netlists against their limits, and look for what is wrong in themselves."""
    from tauledger.checking import check_on_all_cores, render
    from tauledger.fleet import configured_targets, named_targets
    from tauledger.report.check_text import check_summary
    from tauledger.review.check import exit_code

    if arguments.netlists:
        targets = named_targets(arguments.netlists, arguments.config)
    else:
        targets = configured_targets(Path.cwd(), arguments.config)
    checks = check_on_all_cores(targets, sys.stderr)
    threshold = Severity(arguments.fail_on)
    text = render(checks, arguments.format, threshold, sys.stdout.encoding)
    _deliver(lambda: _write_utf8(text) if arguments.format != "text" else sys.stdout.write(text))
    if arguments.format == "text":
        sys.stderr.write(check_summary(checks))
    for one in checks:
        if one.details:
            where = _save_details(one.details, [one.netlist])
            print(f"tauledger: internal error; {where}", file=sys.stderr)
    return exit_code(checks, threshold)


def start(arguments: argparse.Namespace) -> int:
    """Write a configuration to fill in, from what is found in a netlist."""
    from tauledger.checking import starter_for

    output: Path | None = arguments.output
    folder = output.parent if output else None
    netlist = Path(arguments.netlist)
    text = starter_for(netlist, folder, arguments.input, arguments.output_node, _explain)
    if output is None:
        _deliver(lambda: _write_utf8(text))
        return FINE
    try:
        with output.open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except FileExistsError:
        _refuse("output-exists", f"{output} exists and is left as it is", "Name another file.")
    except OSError as error:
        _refuse("output-unwritable", f"{output}: {error.strerror}", "Check the folder.")
    return FINE


def _simulated(analysis: Analysis) -> tuple[Review, Simulation]:
    from tauledger.simulate import beside, simulate

    midband_hz = analysis.corners.midband_hz
    simulation = simulate(analysis.circuit, analysis.topology.path, midband_hz)
    return beside(analysis.review, simulation), simulation


def _aim(arguments: argparse.Namespace) -> Aim:
    """What is asked of both sides of a comparison, each with the configuration it has."""
    from tauledger.revisions import Aim

    return Aim(
        arguments.input,
        arguments.output,
        arguments.midband,
        lambda place: _settings(arguments, place.path, place.roots),
    )


def _settings(
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


def _report_arguments(parser: argparse.ArgumentParser) -> None:
    # The usage that argparse makes takes lines which the help needs to fit a screen.
    parser.usage = "%(prog)s [OPTIONS] NETLIST"
    parser.add_argument("netlist", metavar="NETLIST", help="SPICE netlist of the amplifier")
    _path_arguments(parser)
    _midband_argument(parser)
    parser.add_argument(
        "--square-wave", metavar="FREQ", type=_frequency, help="tell its droop (1kHz)"
    )
    parser.add_argument("--against", metavar="REV", help="add the changes since a revision in git")
    parser.add_argument(
        "--simulate", action="store_true", help="add figures from ngspice, run beside"
    )
    parser.add_argument(
        "--format",
        metavar="FORMAT",
        choices=("text", "json", "markdown", *PICTURES),
        default="text",
        help="text (default), json, markdown, html; svg, png: plot",
    )
    parser.add_argument("--save", metavar="FILE", help="write there, not to standard output")


def _compare_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] OLD NEW"
    for name in ("old", "new"):
        parser.add_argument(
            name, metavar=name.upper(), help="netlist, or REV:path in git, counted from its top"
        )
    _path_arguments(parser)
    _midband_argument(parser)
    parser.add_argument(
        "--format",
        metavar="FORMAT",
        choices=("text", "json", "markdown"),
        default="text",
        help="text (default), json or markdown",
    )


def _annotate_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] NETLIST ..."
    parser.add_argument(
        "netlists", metavar="NETLIST", nargs="+", help="SPICE netlists of amplifiers"
    )
    parser.add_argument(
        "--drawing",
        metavar="SVG",
        action="append",
        default=[],
        help="mark this drawing, not the netlist; once for each sheet",
    )
    parser.add_argument("--output", metavar="FILE", help="write there, leave the source alone")
    what = parser.add_mutually_exclusive_group()
    what.add_argument("--remove", action="store_true", help="take the annotations out again")
    what.add_argument("--check", action="store_true", help="write nothing; exit 1 when stale")
    _path_arguments(parser, "--output-node")


def _midband_argument(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--midband", metavar="FREQ", type=_frequency, help="judge gain there (1kHz): equalisers"
    )


def _frequency(text: str) -> float:
    from tauledger.quantity import parse_si

    try:
        value, unit = parse_si(text)
    except ValueError as error:
        raise argparse.ArgumentTypeError(str(error)) from None
    if unit not in ("", "Hz") or not 1e-3 <= value <= 1e12:
        expected = "a frequency from 1mHz to 1THz such as 1kHz"
        raise argparse.ArgumentTypeError(f"expected {expected}, found {text!r}")
    return value


def _path_arguments(parser: argparse.ArgumentParser, output: str = "--output") -> None:
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


def _check_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] [NETLIST ...]"
    parser.add_argument(
        "netlists",
        metavar="NETLIST",
        nargs="*",
        type=Path,
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


def _start_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] NETLIST"
    parser.add_argument("netlist", metavar="NETLIST", help="SPICE netlist of the amplifier")
    parser.add_argument("--input", metavar="NAME", help="independent source that drives the path")
    parser.add_argument("--output-node", metavar="NODE", help="output node, or A,B between two")
    parser.add_argument(
        "--output", metavar="FILE", type=Path, help="new file, in place of standard output"
    )


def _decision_arguments(name: str) -> Callable[[argparse.ArgumentParser], None]:
    """The options of a decision on one amplifier: its own, then those all share."""

    def add(parser: argparse.ArgumentParser) -> None:
        parser.usage = "%(prog)s [OPTIONS] NETLIST"
        parser.add_argument("netlist", metavar="NETLIST", help="SPICE netlist of the amplifier")
        from tauledger import deciding

        adders = {
            "spread": deciding.spread_arguments,
            "choose": deciding.choose_arguments,
            "stress": deciding.stress_arguments,
            "temperature": deciding.temperature_arguments,
        }
        adders[name](parser)
        parser.add_argument(
            "--format", choices=("text", "json"), default="text", help="text (default) or json"
        )
        _path_arguments(parser)
        _midband_argument(parser)

    return add


@dataclass(frozen=True, slots=True)
class Command:
    """One subcommand: how it reads in the help, what it takes, what it does."""

    summary: str
    example: str
    add_arguments: Callable[[argparse.ArgumentParser], None]
    run: Callable[[argparse.Namespace], int]


COMMANDS = {
    "report": Command(
        "Print bias, stages, gain and what sets each corner.",
        "tauledger report preamp.cir --output out",
        _report_arguments,
        report,
    ),
    "compare": Command(
        "Print how two revisions differ and which edit moved each corner.",
        "tauledger compare HEAD~1:boards/preamp.cir boards/preamp.cir",
        _compare_arguments,
        compare,
    ),
    "annotate": Command(
        "Write the results beside the parts, as comments or on a drawing.",
        "tauledger annotate preamp.cir --drawing preamp.svg --output marked.svg",
        _annotate_arguments,
        annotate,
    ),
    "check": Command(
        "Hold netlists against their limits and look for what is wrong.",
        "tauledger check boards/*.cir --format github",
        _check_arguments,
        check,
    ),
    "start": Command(
        "Write a tauledger.toml to fill in, from what a netlist holds.",
        "tauledger start preamp.cir --output tauledger.toml",
        _start_arguments,
        start,
    ),
    "spread": Command(
        "Print how gain and corners spread over boards within tolerances.",
        "tauledger spread preamp.cir --tolerance 'R*=5%' --tolerance 'C*=20%'",
        _decision_arguments("spread"),
        spread,
    ),
    "choose": Command(
        "Print which standard values meet a corner, verified exactly.",
        "tauledger choose preamp.cir --low-corner 20Hz --only C1,C3",
        _decision_arguments("choose"),
        choose,
    ),
    "stress": Command(
        "Print voltages and polarity of capacitors, heat, start-up.",
        "tauledger stress preamp.cir --margin 30%",
        _decision_arguments("stress"),
        stress,
    ),
    "temperature": Command(
        "Print gain, corners and bias over a range of temperatures.",
        "tauledger temperature preamp.cir --range 0..60",
        _decision_arguments("temperature"),
        temperature,
    ),
}


# Arguments ----------------------------------------------------------------------------------------


class _Parser(argparse.ArgumentParser):
    """Usage errors take the same road as every other problem."""

    def error(self, message: str) -> NoReturn:
        _refuse("usage", f"{self.prog}: {message}", f"See {self.prog} --help.")


def _run(given: list[str]) -> int:
    name, rest = (given[0], given[1:]) if given else ("", [])
    if name.startswith("-"):
        top = _top_parser()
        _check_options(top, given)
        top.parse_args(given)
    command = COMMANDS.get(name)
    if command is None:
        _refuse_command(name)
    parser = _command_parser(name, command)
    rest = _joined_negatives(rest)
    _check_options(parser, rest)
    return command.run(parser.parse_args(rest))


def _joined_negatives(given: Iterable[str]) -> list[str]:
    """``--range -40..85`` as ``--range=-40..85``: no option here begins with a digit."""
    joined: list[str] = []
    for argument in given:
        option = joined[-1] if joined and "--" not in joined else ""
        if option[:2] == "--" and "=" not in option and re.match(r"-\.?\d", argument):
            joined[-1] = f"{option}={argument}"
        else:
            joined.append(argument)
    return joined


def _top_parser() -> _Parser:
    width = max(map(len, COMMANDS))
    listing = "\n".join(f"  {name:<{width}}  {c.summary}" for name, c in COMMANDS.items())
    example = next(iter(COMMANDS.values())).example
    parser = _Parser(
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


def _command_parser(name: str, command: Command) -> _Parser:
    parser = _Parser(
        prog=f"tauledger {name}",
        description=command.summary,
        epilog=f"example: {command.example}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    command.add_arguments(parser)
    return parser


def _check_options(parser: argparse.ArgumentParser, given: Iterable[str]) -> None:
    """Name the nearest option for an unknown one, before anything else is complained of."""
    known: list[str] = []
    for argument in given:
        if argument == "--":
            return
        option = argument.partition("=")[0]
        if not option.startswith("-") or option == "-":
            continue
        known = known or _options(parser)
        if option not in known:
            advice = f"{_nearest(option, known)}{parser.prog} --help lists the options."
            _refuse("option-unknown", f"{parser.prog} has no option {option}", advice)


def _options(parser: argparse.ArgumentParser) -> list[str]:
    """The options as the help names them, which Python 3.14 colours on a terminal."""
    text = re.sub(r"\x1b\[[0-9;]*m", "", parser.format_help())
    return re.findall(r"(?<![\w-])--?[a-z][a-z-]*", text)


def _refuse_command(name: str) -> NoReturn:
    if not name:
        _refuse("usage", "no command given", "See tauledger --help.")
    advice = f"{_nearest(name, COMMANDS)}tauledger --help lists the commands."
    _refuse("command-unknown", f"tauledger has no command {name}", advice)


def _nearest(word: str, known: Iterable[str]) -> str:
    import difflib

    near = difflib.get_close_matches(word, list(known), n=1, cutoff=0.5)
    return f"Did you mean {near[0]}? " if near else ""


def _refuse(code: str, message: str, advice: str) -> NoReturn:
    raise ProblemError(Problem(code, Severity.ERROR, message, advice=advice))


# Output -------------------------------------------------------------------------------------------


def _explain(problems: Iterable[Problem]) -> None:
    from tauledger.report.problems import format_problems

    sys.stderr.write(format_problems(problems))
    sys.stderr.flush()


def _deliver(write: Callable[[], object]) -> None:
    """Write the result to stdout to the last byte, or say why that failed."""
    try:
        write()
        sys.stdout.flush()
    except BrokenPipeError:
        raise
    except OSError as error:
        _silence_stdout()
        message = f"the result could not be written: {error.strerror or error}"
        _refuse("output-unwritable", message, "Check the disk or send the output elsewhere.")


def _hand_over(content: bytes, path: str | None) -> None:
    """Put a report into a file, all or nothing, or write its bytes to stdout."""
    if path:
        from tauledger.annotate.files import replace_file

        replace_file(Path(path), content)
        return
    if content.startswith(b"\x89PNG") and sys.stdout.isatty():
        _refuse("usage", "a PNG is nothing for a terminal", "Give --save FILE.")
    _deliver(lambda: _write_raw(content))


def _write_utf8(text: str) -> None:
    """For formats that are UTF-8 wherever they are read, whatever the stream's own encoding."""
    _write_raw(text.encode())


def _write_raw(content: bytes) -> None:
    sys.stdout.flush()
    sys.stdout.buffer.write(content)
    sys.stdout.buffer.flush()


def _silence_stdout() -> None:
    """Keep Python from flushing to the dead stream, and complaining, on its way out."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _report_internal(error: Exception, given: Sequence[str]) -> int:
    """One line for the user, the traceback in a fresh file for whoever mends it."""
    import traceback

    from tauledger.report.inert import clip, inert

    what = clip(inert(f"{type(error).__name__}: {error}"), 200)
    where = _save_details("".join(traceback.format_exception(error)), given)
    print(f"tauledger: internal error ({what}); {where}", file=sys.stderr)
    return INTERNAL


def _save_details(traceback: str, given: Sequence[str]) -> str:
    """Keep a traceback in a fresh file; where, in words."""
    try:
        return f"details in {_save(f'arguments: {list(given)!r}', traceback)}"
    except OSError as failure:
        return f"details could not be saved: {failure.strerror}"


def _save(head: str, traceback: str) -> str:
    import tempfile

    with tempfile.NamedTemporaryFile(
        "w",
        prefix="tauledger-",
        suffix=".txt",
        delete=False,
        encoding="utf-8",
        errors="backslashreplace",
    ) as file:
        file.write(f"{head}\nPython {sys.version}\n\n{traceback}")
    return file.name
