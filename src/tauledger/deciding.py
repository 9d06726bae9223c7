"""Spread, choice, stress and temperature as commands: their options, and the work on all cores."""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from typing import TYPE_CHECKING, TextIO

from tauledger.problems import Problem, ProblemError, Severity
from tauledger.quantity import parse_si

if TYPE_CHECKING:
    from concurrent.futures import Executor

    from tauledger.analysis import Analysis
    from tauledger.configuration.settings import PathSettings
    from tauledger.review.decisions import Choice, Spread, Stress, TemperatureSweep

FEW = 5000
"""So many boards are done in this process before workers would have started (measured)."""
_THREADS = ("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "OMP_NUM_THREADS")


# Options ------------------------------------------------------------------------------------------


def spread_arguments(parser: argparse.ArgumentParser) -> None:
    """Of ``tauledger spread``."""
    _tolerance_argument(parser)
    parser.add_argument("--boards", metavar="N", type=int, default=10_000, help="10000 by default")
    parser.add_argument("--seed", metavar="N", type=int, default=1, help="same seed, same boards")
    parser.add_argument(
        "--distribution",
        metavar="NAME",
        choices=("uniform", "normal", "truncated"),
        default="",
        help="uniform (default), normal (tolerance is 3 sigma) or truncated",
    )


def choose_arguments(parser: argparse.ArgumentParser) -> None:
    """Of ``tauledger choose``."""
    end = parser.add_mutually_exclusive_group(required=True)
    end.add_argument("--low-corner", metavar="FREQ", help="to be met from below, such as 20Hz")
    end.add_argument("--high-corner", metavar="FREQ", help="to be met from above")
    parser.add_argument("--only", metavar="PARTS", default="", help="change only these: C1,C3")
    parser.add_argument(
        "--shares", metavar="SHARES", default="", help="of the low corner: CE=80,C1=10,C2=10"
    )
    parser.add_argument("--series", metavar="NAME", default="", help="E3 to E192, for every part")
    parser.add_argument(
        "--margin", metavar="PERCENT", default="0%", help="kept to the target: 10%%"
    )
    parser.add_argument(
        "--worst-case", action="store_true", help="meet it with every tolerance at its worst"
    )
    _tolerance_argument(parser)
    parser.add_argument(
        "--patch",
        metavar="N",
        type=int,
        nargs="?",
        const=1,
        help="print alternative N (1) as a patch of the netlist",
    )


def stress_arguments(parser: argparse.ArgumentParser) -> None:
    """Of ``tauledger stress``."""
    parser.add_argument(
        "--margin", metavar="PERCENT", default="20%", help="of a rating, to spare; 20%% by default"
    )


def temperature_arguments(parser: argparse.ArgumentParser) -> None:
    """Of ``tauledger temperature``."""
    parser.add_argument(
        "--range", metavar="LOW..HIGH", help="in °C, such as 0..60; else that of tauledger.toml"
    )
    parser.add_argument("--steps", metavar="N", type=int, default=9, help="9 by default")


def _tolerance_argument(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--tolerance",
        metavar="PARTS=WINDOW",
        action="append",
        default=[],
        help="'R*=5%%', 'C*=-20..+80%%', 'Q*.current_gain=50%%'; repeat",
    )


# Work ---------------------------------------------------------------------------------------------


def run_spread(
    arguments: argparse.Namespace, analysis: Analysis, settings: PathSettings | None
) -> Spread:
    """The spread that the options ask for, on all cores when it pays."""
    from tauledger.decide.asked import parse_asked
    from tauledger.decide.spread import MOST_BOARDS, spread

    if not 2 <= arguments.boards <= MOST_BOARDS:
        raise _refused("--boards", str(arguments.boards), f"2 to {MOST_BOARDS} boards")
    asked = [parse_asked(text) for text in arguments.tolerance]
    with _workers(arguments.boards) as executor:
        return spread(
            analysis,
            settings,
            asked,
            arguments.boards,
            arguments.seed,
            arguments.distribution,
            executor,
            _progress(sys.stderr),
        )


def run_choose(
    arguments: argparse.Namespace, analysis: Analysis, settings: PathSettings | None
) -> Choice:
    """The choice that the options ask for."""
    from tauledger.decide.asked import parse_asked
    from tauledger.decide.choose import choose
    from tauledger.decide.search import Wish
    from tauledger.decide.series import SERIES

    if arguments.series and arguments.series not in SERIES:
        raise _refused("--series", arguments.series, f"one of {', '.join(SERIES)}")
    target = arguments.low_corner or arguments.high_corner
    option = "--low-corner" if arguments.low_corner else "--high-corner"
    shares = _shares(arguments.shares)
    if shares and not arguments.low_corner:
        raise _refused("--shares", arguments.shares, "a --low-corner beside it")
    wish = Wish(
        end="low" if arguments.low_corner else "high",
        target_hz=_frequency(option, target),
        only=tuple(name.strip() for name in arguments.only.split(",") if name.strip()),
        shares=shares or None,
        series=arguments.series,
        margin=_percent("--margin", arguments.margin),
        with_tolerance=arguments.worst_case,
        midband_hz=analysis.asked_midband_hz,
    )
    return choose(analysis, wish, settings, [parse_asked(text) for text in arguments.tolerance])


def run_stress(
    arguments: argparse.Namespace, analysis: Analysis, settings: PathSettings | None
) -> Stress:
    """The stress with the margin asked for."""
    from tauledger.decide.stress import stress

    return stress(analysis, settings, _percent("--margin", arguments.margin))


def run_temperature(
    arguments: argparse.Namespace, analysis: Analysis, settings: PathSettings | None
) -> TemperatureSweep:
    """The sweep over the range asked for, else that of the configuration."""
    from tauledger.decide.temperature import steps, temperature_sweep

    configured = settings.spread.temperature_c if settings and settings.spread else None
    window = _range(arguments.range) if arguments.range else configured
    if window is None:
        raise _refused("--range", "nothing", "a range such as 0..60, here or in tauledger.toml")
    return temperature_sweep(analysis, steps(*window, arguments.steps))


def patch_of(arguments: argparse.Namespace, analysis: Analysis, choice: Choice) -> bytes:
    """The alternative asked for as a unified diff."""
    from tauledger.decide.patch import patch

    count = len(choice.alternatives)
    if not 1 <= arguments.patch <= count:
        found = choice.infeasible or f"there are {count} alternatives"
        raise _refused("--patch", str(arguments.patch), f"one that exists; {found}")
    return patch(analysis.circuit, choice.alternatives[arguments.patch - 1])


def _frequency(option: str, text: str) -> float:
    value, unit = _parsed(option, text, "a frequency such as 20Hz")
    if unit not in ("", "Hz") or value <= 0.0:
        raise _refused(option, text, "a frequency such as 20Hz")
    return value


def _percent(option: str, text: str) -> float:
    value, unit = _parsed(option, text, "a percentage such as 10%")
    if unit not in ("", "%") or not 0.0 <= value < 100.0:
        raise _refused(option, text, "a percentage from 0 to below 100")
    return value / 100.0


def _range(text: str) -> tuple[float, float]:
    ends = text.replace("…", "..").removesuffix("C").removesuffix("°").split("..")
    if len(ends) != 2:
        raise _refused("--range", text, "two temperatures such as 0..60")
    low, high = (_parsed("--range", end, "two temperatures such as 0..60")[0] for end in ends)
    return low, high


def _shares(text: str) -> Mapping[str, float]:
    shares = {}
    for entry in filter(None, text.split(",")):
        name, _, share = entry.partition("=")
        shares[name.strip()] = _percent("--shares", share)
    if shares and (min(shares.values()) <= 0.0 or abs(sum(shares.values()) - 1.0) > 0.005):
        raise _refused("--shares", text, "percentages above 0 that make 100 together")
    return shares


def _parsed(option: str, text: str, expected: str) -> tuple[float, str]:
    try:
        return parse_si(text)
    except ValueError:
        raise _refused(option, text, expected) from None


def _refused(option: str, found: str, expected: str) -> ProblemError:
    message = f"{option}: found {found[:60]!r}; expected {expected}"
    return ProblemError(Problem("usage", Severity.ERROR, message, None, f"Correct {option}."))


# Workers ------------------------------------------------------------------------------------------


@contextmanager
def _workers(boards: int) -> Iterator[Executor | None]:
    """One process a core when there are many boards; none otherwise."""
    cores = len(os.sched_getaffinity(0)) if sys.platform == "linux" else os.cpu_count() or 1
    if boards <= FEW or cores == 1:
        yield None
        return
    import multiprocessing
    from concurrent.futures import ProcessPoolExecutor

    # Not "fork", which copies whatever threads the numeric library has started.
    methods = multiprocessing.get_all_start_methods()
    context = multiprocessing.get_context("forkserver" if "forkserver" in methods else "spawn")
    context.set_forkserver_preload(["tauledger.decide.spread"])
    # Workers on all cores gain nothing from threads of the numeric library, and lose some.
    names = [name for name in _THREADS if name not in os.environ]
    os.environ.update(dict.fromkeys(names, "1"))
    try:
        with ProcessPoolExecutor(cores, mp_context=context) as executor:
            try:
                yield executor
            except BaseException:
                executor.shutdown(wait=False, cancel_futures=True)
                raise
    finally:
        for name in names:
            del os.environ[name]


def _progress(stream: TextIO) -> Callable[[int, int], None] | None:
    """On a terminal only."""
    if not stream.isatty():
        return None

    def show(done: int, boards: int) -> None:
        stream.write(f"\r{done} of {boards} boards" if done < boards else "\r\x1b[K")
        stream.flush()

    return show
