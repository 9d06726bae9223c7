"""Which configuration, and which of its signal paths, is for a netlist."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from tauledger.configuration.codes import problem
from tauledger.configuration.files import find_configuration, is_match
from tauledger.problems import ProblemError

if TYPE_CHECKING:
    from tauledger.configuration.settings import Configuration, PathSettings


def find_settings(
    netlist: Path,
    roots: Sequence[Path],
    file: Path | None = None,
    name: str | None = None,
) -> PathSettings | None:
    """What the configuration found for a netlist, or ``file``, says of it; None when it says none.

    ``name`` chooses among several paths. Raises ProblemError for whatever is wrong in the file,
    and when a path was asked for (by ``file`` or ``name``) and there is none.
    """
    found = file or find_configuration(netlist, roots)
    settings = None
    if found is not None:
        # Most netlists come without: the parser of TOML stays off their way.
        from tauledger.configuration.reading import read_configuration

        settings = settings_for(read_configuration(found), netlist, name)
    if settings is None and (file or name):
        where = str(found) if found else "no tauledger.toml was found, so it"
        raise ProblemError(
            problem(
                "config-path-unmatched",
                f"{where} has no signal path for {netlist}",
                None,
                'Add one: a table [path.NAME] with netlist = "FILE", relative to tauledger.toml.',
            )
        )
    return settings


def settings_for(
    configuration: Configuration, netlist: Path, name: str | None = None
) -> PathSettings | None:
    """The signal path for a netlist, or None when the file speaks of others only.

    ``name`` chooses among several. Raises ProblemError when no path has that name, or when
    several are left.
    """
    folder = configuration.path.parent
    fitting = [path for path in configuration.paths if is_match(netlist, path.netlist, folder)]
    chosen = [path for path in fitting if name in (None, path.name)]
    if name is not None and not chosen:
        raise ProblemError(
            problem(
                "config-path-unmatched",
                f"{configuration.path} has no signal path {name!r} for {netlist}; "
                f"its paths for it: {_names(fitting)}",
                None,
                "Name one of them with --path NAME.",
            )
        )
    if len(chosen) > 1:
        raise ProblemError(
            problem(
                "config-path-ambiguous",
                f"{len(chosen)} signal paths are for {netlist}: {_names(chosen)}",
                chosen[1].span,
                "Name one of them with --path NAME.",
            )
        )
    return chosen[0] if chosen else None


def _names(paths: list[PathSettings]) -> str:
    return ", ".join(path.name for path in paths[:10]) or "none"
