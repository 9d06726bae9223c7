"""One logical line → one statement: words, assignments and groups, with their offsets.

Statements know syntax only; which word is a node and which a model is for circuit/ to say.
"""

from __future__ import annotations

import functools
import pkgutil
import re
from typing import TYPE_CHECKING, Any

from tauledger.netlist.codes import fault, problem
from tauledger.netlist.source import LogicalLine
from tauledger.problems import Problem, SourceSpan
from tauledger.records import dataclass

if TYPE_CHECKING:
    from lark import Lark

MAXIMUM_NESTING = 40
"""Of parentheses in one statement."""

# Most lines hold words alone and need no parser: blanks, and what the grammar's WORD consists of.
# With them split here, 50,000 plain elements read four times faster (tests/benchmarks/reader.py).
_PLAIN_LINE = re.compile(r"(?:[^=(){}'\"]++|(?<=[-/])\([^\s,=(){}'\"]*+\))*+")
_WORD = re.compile(r"(?:[^\s,=(){}'\"]|(?<=[-/])\([^\s,=(){}'\"]*+\))++")
_TOKEN = re.compile(rf"{_WORD.pattern}|[=()]")
_FORMULA_MARK = re.compile(r"[{}'\"]")
_FIRST_WORD = re.compile(rf"[\s,]*({_WORD.pattern})")
_DEFINITIONS = frozenset({".param", ".params", ".parameters", ".csparam"})
_RAW = frozenset(
    (
        *(".title", ".include", ".inc", ".incl", ".lib", ".endl", ".control", ".endc", ".end"),
        *(".if", ".elseif", ".else", ".endif", ".ic", ".nodeset", ".ac", ".tran", ".dc", ".tf"),
        *(".print", ".probe", ".save", ".plot", ".meas", ".measure", ".four", ".noise", ".func"),
    )
)
"""Statements whose text the grammar does not read."""


@dataclass(frozen=True, slots=True)
class Word:
    """Text between blanks.

    ``offset`` and ``end`` count characters from the start of the logical line, here as in every
    other kind of item; ``end`` is behind the last one.
    """

    text: str
    offset: int

    @property
    def end(self) -> int:
        return self.offset + len(self.text)


@dataclass(frozen=True, slots=True)
class Formula:
    """Text in braces or quotes; ``text`` leaves them out, ``offset`` is that of the opening."""

    text: str
    offset: int
    quote: str = "{"

    @property
    def end(self) -> int:
        return self.offset + len(self.text) + 2


@dataclass(frozen=True, slots=True)
class Group:
    """Items in parentheses."""

    items: tuple[Item, ...]
    offset: int
    end: int


@dataclass(frozen=True, slots=True)
class Call:
    """A word with a group behind it, as the value of an assignment: ``r=limit(a, 1, 2)``."""

    name: Word
    group: Group

    @property
    def offset(self) -> int:
        return self.name.offset

    @property
    def end(self) -> int:
        return self.group.end


@dataclass(frozen=True, slots=True)
class Assignment:
    """``name=value``, blanks allowed round the sign."""

    name: Word
    value: Value

    @property
    def offset(self) -> int:
        return self.name.offset

    @property
    def end(self) -> int:
        return self.value.end


@dataclass(frozen=True, slots=True)
class Table:
    """``{expression} = (x, y)``: the first pair of a table."""

    formula: Formula
    group: Group

    @property
    def offset(self) -> int:
        return self.formula.offset

    @property
    def end(self) -> int:
        return self.group.end


Value = Word | Formula | Group | Call
Item = Word | Formula | Group | Assignment | Table


@dataclass(frozen=True, slots=True)
class Statement:
    """``name`` is the element's name or the dot word; ``items`` is what follows it.

    For raw statements (outputs, conditions, files) ``items`` is empty: see :meth:`tail`.
    """

    name: Word
    items: tuple[Item, ...]
    line: LogicalLine

    @property
    def keyword(self) -> str:
        """The dot word in lower case."""
        return self.name.text.lower()

    def tail(self) -> str:
        """All text after the name."""
        return self.line.text[self.name.end :]

    def text_of(self, item: Item | Call) -> str:
        """An item as it is written."""
        return self.line.text[item.offset : item.end]

    def span(self, item: Item | Call | None = None) -> SourceSpan:
        """Where an item stands in its file; without one, the statement's name."""
        if item is None:
            return self.line.span(self.name.offset, len(self.name.text))
        return self.line.span(item.offset, item.end - item.offset)


def parse_statement(line: LogicalLine, problems: list[Problem]) -> Statement:
    """Read one statement; warnings go into ``problems``.

    Raises ProblemError with its one problem when the line cannot be read.
    """
    text = line.text
    first = _FIRST_WORD.match(text)
    if first is None:
        raise fault(
            "line-unreadable",
            "expected a statement that begins with a name or a dot word",
            line.span(),
            'Begin the line with "*" if it is a comment.',
        )
    name = Word(first[1], first.start(1))
    keyword = name.text.lower()
    if keyword in _RAW:
        return Statement(name, (), line)
    rule = _start_rule(keyword)
    if rule == "items" and _PLAIN_LINE.fullmatch(text):
        matches = _WORD.finditer(text, name.end)
        return Statement(name, tuple([Word(match[0], match.start()) for match in matches]), line)
    if text.count("(") > MAXIMUM_NESTING:
        _check_nesting(line)
    simple = _simple_items(text, name.end) if rule == "items" else None
    items = _parse(text, rule, line, problems) if simple is None else simple
    return Statement(name, tuple(items), line)


def _simple_items(text: str, start: int) -> list[Item] | None:
    """Words, ``name=word`` pairs and parentheses, as the grammar reads them; None for the rest.

    Nearly every netlist holds nothing else (model cards included), and then lark need not even be
    imported. A test holds this to the grammar.
    """
    if _FORMULA_MARK.search(text):
        return None
    tokens = list(_TOKEN.finditer(text, start))
    levels: list[list[Item]] = [[]]
    opened: list[int] = []
    i = 0
    while i < len(tokens):
        token = tokens[i]
        mark = token[0]
        if mark == "(":
            opened.append(token.start())
            levels.append([])
        elif mark == ")":
            if not opened:
                return None
            inside = tuple(levels.pop())
            levels[-1].append(Group(inside, opened.pop(), token.end()))
        elif mark == "=":
            return None
        elif i + 1 < len(tokens) and tokens[i + 1][0] == "=":
            value = tokens[i + 2] if i + 2 < len(tokens) else None
            # A value that touches a parenthesis is a call.
            if value is None or value[0] in "=()" or "(" in text[value.start() : value.end() + 1]:
                return None
            name = Word(mark, token.start())
            levels[-1].append(Assignment(name, Word(value[0], value.start())))
            i += 2
        else:
            levels[-1].append(Word(mark, token.start()))
        i += 1
    return None if opened else levels[0]


def _start_rule(keyword: str) -> str:
    if keyword in _DEFINITIONS:
        return "definitions"
    return "behavioural" if keyword[0] == "b" else "items"


def _parse(text: str, rule: str, line: LogicalLine, problems: list[Problem]) -> list[Item]:
    from lark.exceptions import UnexpectedInput, UnexpectedToken

    try:
        items: list[Item] = _parser().parse(text, start=rule)  # type: ignore[assignment]
        return items
    except UnexpectedInput as error:
        at_end = isinstance(error, UnexpectedToken) and error.token.type == "$END"
        position = len(text.rstrip()) if at_end else error.pos_in_stream or 0
    if at_end and rule == "items" and text is line.text and _open_parentheses(text):
        # Model cards are often cut short like this; ngspice reads them as if closed.
        items = _parse(text + ")" * _open_parentheses(text), rule, line, problems)
        problems.append(
            problem(
                "parenthesis-unclosed",
                "a parenthesis is opened here and never closed; it is taken to close at the end",
                line.span(text.index("("), 1),
                "Add the closing parenthesis.",
            )
        )
        return items
    raise _syntax_fault(line, rule, position)


def _open_parentheses(text: str) -> int:
    return max(text.count("(") - text.count(")"), 0)


def _check_nesting(line: LogicalLine) -> None:
    depth = 0
    for match in re.finditer(r"[()]", line.text):
        depth += 1 if match[0] == "(" else -1
        if depth > MAXIMUM_NESTING:
            raise fault(
                "nesting-too-deep",
                f"parentheses nested deeper than {MAXIMUM_NESTING}",
                line.span(match.start(), 1),
                "Simplify the statement.",
            )


def _syntax_fault(line: LogicalLine, rule: str, position: int) -> Exception:
    text = line.text
    at = min(position, len(text))
    found = text[at : at + 1]
    for case, message, advice in _SYNTAX_MESSAGES:
        if case(text, at, found, rule):
            return fault("line-unreadable", message, line.span(min(at, len(text) - 1), 1), advice)
    return fault(
        "line-unreadable",
        f"did not expect {found!r} here",
        line.span(min(at, len(text) - 1), 1),
        "Compare the line with the element's form in the SPICE manual.",
    )


def _open_quote(text: str, at: int, found: str, rule: str) -> bool:
    return found != "" and found in "{'\""


_SYNTAX_MESSAGES = (
    (
        lambda text, at, found, rule: rule == "behavioural",
        "expected a B source of the form: Bname node node V=expression, or I=expression",
        "Write the output as V= or I= after the two nodes; a battery is a V element.",
    ),
    (
        lambda text, at, found, rule: rule == "definitions",
        "expected name = value pairs",
        "Write each definition as name = value.",
    ),
    (
        _open_quote,
        "a brace or quote is opened here and never closed",
        "Close it.",
    ),
    (
        lambda text, at, found, rule: found == ")",
        "a closing parenthesis without an opening one",
        "Remove it, or add the opening one.",
    ),
    (
        lambda text, at, found, rule: found == "}",
        "a closing brace without an opening one",
        "Remove it, or add the opening one.",
    ),
    (
        lambda text, at, found, rule: found == "=",
        'an "=" without a name before it',
        "Write name=value.",
    ),
    (
        lambda text, at, found, rule: text[:at].rstrip().endswith("="),
        'an "=" without a value after it',
        "Write name=value.",
    ),
    (
        lambda text, at, found, rule: at >= len(text.rstrip()),
        "the statement ends before a parenthesis is closed",
        "Add the closing parenthesis.",
    ),
)


@functools.cache
def _parser() -> Lark:
    """Built on first use: construction costs milliseconds that other commands need not pay."""
    from lark import Lark

    # pkgutil, since importlib.resources takes longer to import than the grammar to read.
    grammar = pkgutil.get_data("tauledger.grammar", "netlist.lark")
    if grammar is None:
        raise FileNotFoundError("tauledger.grammar/netlist.lark is not installed")
    return Lark(
        grammar.decode(),
        parser="lalr",
        start=["items", "behavioural", "definitions"],
        maybe_placeholders=False,
        transformer=_builder(),
    )


def _builder() -> Any:
    from lark import Transformer

    class Build(Transformer):  # type: ignore[type-arg]
        """Turns each rule into its value as soon as it is reduced; no tree is kept."""

        def WORD(self, token: Any) -> Word:  # noqa: N802 - named as the terminal
            return Word(str(token), token.start_pos)

        FUNCTION = NAME = OUTPUT = ARITHMETIC = WORD

        def FORMULA(self, token: Any) -> Formula:  # noqa: N802
            return Formula(token[1:-1], token.start_pos, token[0])

        def assignment(self, parts: list[Any]) -> Assignment:
            return Assignment(*parts)

        definition = assignment

        def group(self, parts: list[Any]) -> Group:
            return Group(tuple(parts[1:-1]), parts[0].start_pos, parts[-1].start_pos + 1)

        def call(self, parts: list[Any]) -> Call:
            return Call(*parts)

        def table(self, parts: list[Any]) -> Table:
            return Table(*parts)

        def items(self, parts: list[Any]) -> list[Any]:
            return parts[1:]

        behavioural = definitions = items

    return Build()
