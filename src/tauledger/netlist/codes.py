"""Every problem the reader can report: code → severity and meaning, in one table.

DEVELOPERS.md repeats this table; a test compares the two.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from tauledger.problems import Problem, ProblemError, Severity, SourceSpan
from tauledger.quantity import TRAPS

_E, _W, _N = Severity.ERROR, Severity.WARNING, Severity.NOTE

CODES: Mapping[str, tuple[Severity, str]] = MappingProxyType(
    {
        # the file
        "file-missing": (_E, "the file does not exist"),
        "file-not-regular": (_E, "the path is a directory, a device or a pipe, not a file"),
        "file-unreadable": (_E, "the file cannot be opened or read"),
        "file-empty": (_E, "the file holds no text"),
        "file-binary": (_E, "the file is not text"),
        "file-foreign": (_E, "the file is text of another kind, not a netlist"),
        "file-too-large": (_E, "the file, or all files together, exceed the size limit"),
        "line-too-long": (_E, "a line with its continuations exceeds the length limit"),
        "too-many-problems": (_E, "more problems were found than are listed"),
        "problems-omitted": (_N, "more warnings of one kind were found than are listed"),
        # includes
        "include-missing": (_E, "an included file does not exist"),
        "include-refused": (_E, "an included path lies outside the allowed folders"),
        "include-cycle": (_E, "a file includes itself, directly or through others"),
        "include-too-deep": (_E, "includes are nested too deeply, or are too many"),
        "include-relocated": (_W, "a file was found beside the netlist, not where it was asked"),
        "library-section-missing": (_E, "a .lib section does not exist in the file"),
        # lines and blocks
        "title-is-statement": (_W, "the first line is always the title, yet reads as a statement"),
        "line-unreadable": (_E, "a line does not follow the syntax"),
        "continuation-orphan": (_E, "a continuation line follows no statement"),
        "nesting-too-deep": (_E, "parentheses or conditionals are nested too deeply"),
        "parenthesis-unclosed": (_W, "a parenthesis is not closed"),
        "control-unclosed": (_W, "a .control block is not closed; it is skipped up to the end"),
        "ends-unmatched": (_W, "an .ends closes no .subckt"),
        "subcircuit-unclosed": (_E, "a .subckt is not closed"),
        "conditional-unbalanced": (_E, ".if, .else and .endif do not match"),
        "sheet-subcircuit": (_N, "the whole file is one .subckt; its body is read as the circuit"),
        # elements
        "element-incomplete": (_E, "an element has too few nodes or values"),
        "element-left-out": (_W, "an element is not supported and is left out"),
        "name-duplicate": (_E, "two elements have the same name"),
        "reference-missing": (_E, "an element names another that does not exist"),
        "value-missing": (_E, "an element has no value"),
        "value-unreadable": (_E, "a value is neither a number nor a known parameter"),
        "value-unusable": (_E, "a value, a multiplier or a temperature cannot be analysed"),
        "value-zero": (_N, "a resistor of 0 Ω is taken as 1 mΩ"),
        "value-out-of-range": (_W, "a value is outside what makes sense"),
        "words-ignored": (_W, "part of a statement is not used"),
        "coupling-out-of-range": (_E, "a coupling coefficient is not between −1 and 1"),
        "polynomial-dimension": (_E, "POLY has an impossible number of controlling quantities"),
        "polynomial-single": (_W, "POLY(1) with one coefficient is read as a constant"),
        # models, subcircuits, parameters
        "model-missing": (_E, "an element names a model that does not exist"),
        "model-parameter-unknown": (_W, "a model has parameters that its type does not know"),
        "model-kind": (_E, "an element names a model of another type"),
        "model-binned": (_E, "a model comes in bins by size, which are not read"),
        "definition-repeated": (_W, "a model or subcircuit is defined twice; the first counts"),
        "subcircuit-missing": (_E, "an X element names a subcircuit that does not exist"),
        "subcircuit-nodes": (_E, "an X element has another number of nodes than its subcircuit"),
        "expression-unbraced": (_W, "an expression with blanks stands without braces"),
        "expression-invalid": (_E, "an expression cannot be read or evaluated"),
        "parameter-cycle": (_E, "a parameter depends on itself"),
        "node-missing": (_W, "a dot statement names a node that does not exist"),
        "circuit-empty": (_E, "there is no element"),
        "circuit-too-large": (_E, "subcircuits expand beyond the limits"),
        "node-floating": (_E, "a node has no DC path to ground"),
        "directive-unknown": (_W, "a dot statement is not known and is left out"),
    }
)


_TRAP_SEVERITY = {"value-range": _E, "value-decimal-comma": _E, "value-overflow": _E}
"""Traps that leave no number; the others are warnings. Their texts live in quantity.py."""


_LONGEST_MESSAGE = 300
"""Characters; a hostile name may be as long as a line."""


def problem(code: str, message: str, span: SourceSpan | None, advice: str) -> Problem:
    """Build the problem of this code; its severity comes from :data:`CODES`."""
    severity = _TRAP_SEVERITY.get(code, _W) if code in TRAPS else CODES[code][0]
    if len(message) > _LONGEST_MESSAGE:
        message = message[: _LONGEST_MESSAGE - 1] + "…"
    return Problem(code, severity, message, span, advice)


def fault(code: str, message: str, span: SourceSpan | None, advice: str) -> ProblemError:
    """The same as an exception to raise."""
    return ProblemError(problem(code, message, span, advice))
