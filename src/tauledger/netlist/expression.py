"""Arithmetic in braces, quotes and behavioural sources: text → frozen tree.

The language is that of grammar/expression.lark; numbers take SPICE suffixes. Every name comes out
in lower case, node and source names included, since SPICE ignores case.
"""

from __future__ import annotations

import functools
import pkgutil
import re
from typing import TYPE_CHECKING, Any

from tauledger.quantity import TRAPS, parse_number, rejected_number
from tauledger.records import dataclass

if TYPE_CHECKING:
    from lark import Lark, Token

MAX_LENGTH = 20_000
MAX_DEPTH = 150
"""Of parentheses, and of the tree: a sum of 150 terms is 150 deep."""


@dataclass(frozen=True, slots=True)
class Expression:
    """Base of every node of the tree."""


@dataclass(frozen=True, slots=True)
class Number(Expression):
    """In SI units: a suffix such as ``k`` is applied."""

    value: float


@dataclass(frozen=True, slots=True)
class Name(Expression):
    """A parameter; lower case."""

    name: str


@dataclass(frozen=True, slots=True)
class NodeVoltage(Expression):
    """``v(a)`` or ``v(a, b)``; ``negative`` is ``"0"`` when left out."""

    positive: str
    negative: str


@dataclass(frozen=True, slots=True)
class SourceCurrent(Expression):
    """``i(v1)``."""

    source: str


@dataclass(frozen=True, slots=True)
class Call(Expression):
    """A function or operator applied: ``+ - * / % ** < <= > >= == != && || ! ?: neg`` or a name."""

    function: str
    arguments: tuple[Expression, ...]


class ExpressionError(ValueError):
    """The text is no expression; ``offset`` counts characters from the start of the text."""

    def __init__(self, message: str, offset: int) -> None:
        super().__init__(message)
        self.message = message
        self.offset = offset


@dataclass(frozen=True, slots=True)
class NumberTrap:
    """A number in an expression that may not mean what its writer thinks."""

    offset: int
    text: str
    trap: str
    """A code of :data:`tauledger.quantity.TRAPS`."""


def parse_expression(text: str) -> Expression:
    """Read an expression, with or without its outer braces or quotes.

    Raises :class:`ExpressionError` with what was found and what was expected.
    """
    if (quick := _single_word(text)) is not None:
        return quick
    return _parse(text)


def number_traps(text: str) -> tuple[NumberTrap, ...]:
    """The doubtful numbers of an expression that :func:`parse_expression` accepts, in order."""
    found = []
    for token in _parser().lex(text):
        if token.type == "NUMBER" and (number := parse_number(str(token))) and number.trap:
            found.append(NumberTrap(token.start_pos or 0, str(token), number.trap))
    return tuple(found)


_NUMBER_WORD = re.compile(r"[0-9.]+[0-9A-Za-zµ.]*")
_NAME_WORD = re.compile(r"[A-Za-z_][A-Za-z0-9_]*")


def _single_word(text: str) -> Expression | None:
    """One number or name, by far the commonest expression, read without the parser."""
    word = text.strip()
    if len(word) >= 2 and word[0] + word[-1] in ("{}", "''", '""'):
        word = word[1:-1].strip()
    if _NAME_WORD.fullmatch(word):
        return Name(word.lower())
    if _NUMBER_WORD.fullmatch(word) and (number := parse_number(word)) is not None:
        return Number(number.value)
    return None


@functools.lru_cache(maxsize=1)
def _parser() -> Lark:
    from lark import Lark

    grammar = pkgutil.get_data("tauledger.grammar", "expression.lark")
    if grammar is None:
        raise FileNotFoundError("tauledger.grammar/expression.lark is not installed")
    # Building while parsing needs no recursion over a tree, so depth is bounded by _Builder alone.
    builder: Any = _Builder()
    return Lark(grammar.decode(), parser="lalr", transformer=builder, maybe_placeholders=False)


@functools.lru_cache(maxsize=4096)
def _parse(text: str) -> Expression:
    from lark import UnexpectedCharacters, UnexpectedToken

    _check_bounds(text)
    # Outer double quotes become spaces, so that offsets stay true.
    body = f" {text[1:-1]} " if len(text) >= 2 and text[0] == text[-1] == '"' else text
    try:
        part: Any = _parser().parse(body)
    except UnexpectedToken as error:
        raise _unexpected(body, error.token, "NAME" in error.expected) from None
    except UnexpectedCharacters as error:
        offset = error.pos_in_stream or 0
        raise ExpressionError(
            f"{body[offset]!r} does not belong in an expression", offset
        ) from None
    tree: Expression = part[0]
    return tree


def _unexpected(text: str, token: Token, value_expected: bool) -> ExpressionError:
    at_end = token.type == "$END"
    offset = len(text.rstrip()) if at_end else token.start_pos or 0
    expected = "a number, a name or '('" if value_expected else "an operator"
    if at_end:
        missing = _unclosed(text)
        if missing and not value_expected:
            return ExpressionError(f"the expression ends without its closing {missing!r}", offset)
        return ExpressionError(f"the expression ends where {expected} was expected", offset)
    if not value_expected and str(token) in ")}" and not _unclosed(text[:offset]):
        return ExpressionError(f"{str(token)!r} closes nothing", offset)
    return ExpressionError(f"found {_cut(str(token))!r} where {expected} was expected", offset)


_CLOSING = {"(": ")", "{": "}"}


def _unclosed(text: str) -> str:
    """The bracket still to be closed at the end of ``text``, or an empty string."""
    waiting: list[str] = []
    for character in text:
        if character in _CLOSING:
            waiting.append(_CLOSING[character])
        elif waiting and character == waiting[-1]:
            waiting.pop()
    return waiting[-1] if waiting else ""


def _cut(text: str) -> str:
    return text if len(text) <= 30 else text[:27] + "..."


def _check_bounds(text: str) -> None:
    if len(text) > MAX_LENGTH:
        raise ExpressionError(
            f"the expression is {len(text)} characters long; at most {MAX_LENGTH} are read",
            MAX_LENGTH,
        )
    depth = 0
    for offset, character in enumerate(text):
        if character in "({":
            depth += 1
            if depth > MAX_DEPTH:
                raise ExpressionError(
                    f"the expression is nested more than {MAX_DEPTH} deep", offset
                )
        elif character in ")}":
            depth -= 1


Part = tuple[Expression, int, int]
"""An expression, its depth, and where it starts."""


class _Builder:
    """What the parser calls for each rule of the grammar, by the rule's name."""

    def start(self, children: list[Part]) -> Part:
        return children[0]

    def number(self, children: list[Token]) -> Part:
        text, offset = str(children[0]), children[0].start_pos or 0
        parsed = parse_number(text)
        if parsed is None:
            trap = rejected_number(text)
            reason = f": {TRAPS[trap][0]}" if trap else ""
            raise ExpressionError(f"{_cut(text)!r} is not a number{reason}", offset)
        return Number(parsed.value), 1, offset

    def name(self, children: list[Token]) -> Part:
        return Name(str(children[0]).lower()), 1, children[0].start_pos or 0

    def node_voltage(self, children: list[Token]) -> Part:
        inside = str(children[0]).partition("(")[2][:-1].lower()
        # A comma inside a node name such as net-(q1-c) is not possible: the grammar has none there.
        positive, _, negative = inside.partition(",")
        leaf = NodeVoltage(positive.strip(), negative.strip() or "0")
        return leaf, 1, children[0].start_pos or 0

    def source_current(self, children: list[Token]) -> Part:
        inside = str(children[0]).partition("(")[2][:-1].lower()
        return SourceCurrent(inside.strip()), 1, children[0].start_pos or 0

    def binary(self, children: list[Any]) -> Part:
        left, operator, right = children
        return self._call(_SAME_OPERATOR.get(str(operator), str(operator)), (left, right))

    def sign(self, children: list[Any]) -> Part:
        operator, operand = children
        return operand if operator == "+" else self._call(_PREFIX[str(operator)], (operand,))

    def conditional(self, children: list[Part]) -> Part:
        return self._call("?:", tuple(children))

    def arguments(self, children: list[Part]) -> tuple[Part, ...]:
        return tuple(children)

    def call(self, children: list[Any]) -> Part:
        name, arguments = children
        return self._call(str(name).lower(), arguments, name.start_pos or 0)

    def _call(self, function: str, parts: tuple[Part, ...], offset: int = -1) -> Part:
        start = parts[0][2] if offset < 0 else offset
        depth = 1 + max((part[1] for part in parts), default=0)
        if depth > MAX_DEPTH:
            raise ExpressionError(
                f"the expression is nested more than {MAX_DEPTH} operations deep", start
            )
        return Call(function, tuple(part[0] for part in parts)), depth, start


_SAME_OPERATOR = {"^": "**", "<>": "!=", "&": "&&", "|": "||"}
_PREFIX = {"-": "neg", "!": "!"}
