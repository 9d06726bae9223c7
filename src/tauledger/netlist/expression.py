"""Arithmetic in braces, quotes and behavioural sources: text → frozen tree. (Being written.)"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Expression:
    """Base of every node of the tree."""


@dataclass(frozen=True, slots=True)
class Number(Expression):
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
    """A function or operator applied: ``+ - * / ** < <= > >= == != && || ! ?: neg`` or a name."""

    function: str
    arguments: tuple[Expression, ...]
