"""Every problem of a configuration: code → meaning. All are errors."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from tauledger.problems import Problem, Severity, SourceSpan

CODES: Mapping[str, str] = MappingProxyType(
    {
        "config-unreadable": "the configuration cannot be opened, is no text or is too large",
        "config-syntax": "the configuration is not valid TOML",
        "config-key-unknown": "a key or table is not known",
        "config-key-missing": "a table lacks a key it needs",
        "config-value": "a value is of the wrong kind, or out of range",
        "config-unit": "a quantity has no unit, or another than expected",
        "config-refused": "a file lies outside the folder of the configuration",
        "config-file-missing": "a model file does not exist",
        "config-path-unmatched": "no signal path is for this netlist, or has this name",
        "config-path-ambiguous": "several signal paths are for this netlist",
        "config-node-unknown": "a net is not in the netlist",
        "config-net-held": "a net already has a source of its own",
    }
)


def problem(code: str, message: str, span: SourceSpan | None, advice: str) -> Problem:
    """Build the problem of this code, which must stand in :data:`CODES`."""
    assert code in CODES, code
    return Problem(code, Severity.ERROR, message, span, advice)


def near(word: str, known: list[str]) -> str:
    """``; did you mean 'x'?``, or nothing."""
    import difflib

    lower = {entry.lower(): entry for entry in known if len(entry) <= 60}
    close = difflib.get_close_matches(word[:60].lower(), list(lower)[:2000], n=1, cutoff=0.55)
    return f"; did you mean {lower[close[0]]!r}?" if close else ""
