"""Faults in lines that nothing uses: a vendor's library must not stop the amplifier beside it."""

from __future__ import annotations

import dataclasses
from collections.abc import Container, Iterator, Sequence

from tauledger.netlist import Netlist, Subcircuit
from tauledger.problems import Problem, Severity


def without_unused(netlist: Netlist, used: Container[int]) -> tuple[Problem, ...]:
    """The problems of reading, those inside subcircuits nothing calls made warnings.

    ``used`` holds the ``id`` of each subcircuit that was expanded.
    """
    if not any(entry.severity is Severity.ERROR for entry in netlist.problems):
        return netlist.problems
    stretches = list(_unused(netlist.subcircuits, used))
    return tuple(
        dataclasses.replace(entry, severity=Severity.WARNING)
        if entry.severity is Severity.ERROR and _inside(entry, stretches)
        else entry
        for entry in netlist.problems
    )


def _unused(
    subcircuits: Sequence[Subcircuit], used: Container[int]
) -> Iterator[tuple[str, int, int]]:
    """File, first and last line of each subcircuit not expanded and closed in its own file."""
    for subcircuit in subcircuits:
        if id(subcircuit) in used:
            yield from _unused(subcircuit.subcircuits, used)
        elif subcircuit.closing is not None:
            first, last = subcircuit.header.span(), subcircuit.closing.span()
            if first.path == last.path:
                yield first.path, first.line, last.line


def _inside(entry: Problem, stretches: Sequence[tuple[str, int, int]]) -> bool:
    span = entry.span
    return span is not None and any(
        span.path == path and first <= span.line <= last for path, first, last in stretches
    )
