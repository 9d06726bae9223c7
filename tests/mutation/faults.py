"""Small faults to put into a module, each a change of one node of its syntax tree.

Not changed: text with blanks (messages), docstrings, annotations, decorators, assertions, and
``strict=``.
"""

from __future__ import annotations

import ast
from collections.abc import Callable, Iterator
from dataclasses import dataclass

_COMPARISONS: dict[type[ast.AST], tuple[type[ast.AST], ...]] = {
    ast.Lt: (ast.LtE, ast.GtE),
    ast.LtE: (ast.Lt, ast.Gt),
    ast.Gt: (ast.GtE, ast.LtE),
    ast.GtE: (ast.Gt, ast.Lt),
    ast.Eq: (ast.NotEq,),
    ast.NotEq: (ast.Eq,),
    ast.Is: (ast.IsNot,),
    ast.IsNot: (ast.Is,),
    ast.In: (ast.NotIn,),
    ast.NotIn: (ast.In,),
    ast.Add: (ast.Sub,),
    ast.Sub: (ast.Add,),
    ast.Mult: (ast.Div,),
    ast.Div: (ast.Mult,),
    ast.FloorDiv: (ast.Mult,),
    ast.Mod: (ast.Mult,),
    ast.Pow: (ast.Mult,),
    ast.BitOr: (ast.BitAnd,),
    ast.BitAnd: (ast.BitOr,),
    ast.And: (ast.Or,),
    ast.Or: (ast.And,),
}
_TWINS = {"min": "max", "max": "min", "any": "all", "all": "any"}
_TRIMMERS = frozenset({"lower", "upper", "strip", "lstrip", "rstrip", "casefold"})
_LEFT_OUT = frozenset({"annotation", "returns", "decorator_list", "type_comment", "ctx"})
_CONDITIONS = (ast.If, ast.IfExp, ast.While)


@dataclass(frozen=True)
class Fault:
    """One change of one node; ``lines`` are those of its statement, None outside functions."""

    module: str
    line: int
    column: int
    text: str
    lines: tuple[int, int] | None
    put: Callable[[], None]
    undo: Callable[[], None]

    @property
    def key(self) -> str:
        return f"{self.module}:{self.line}:{self.column}: {self.text}"


def faults(module: str, source: str) -> tuple[ast.Module, list[Fault]]:
    """Every fault of a module, in the order of its text."""
    tree = ast.parse(source)
    return tree, list(_within(module, tree, tree, None))


def _within(
    module: str, node: ast.AST, place: ast.AST, lines: tuple[int, int] | None
) -> Iterator[Fault]:
    for field, value in ast.iter_fields(node):
        if field in _LEFT_OUT or (isinstance(node, ast.arguments) and field != "defaults"):
            continue
        inside = lines
        if isinstance(node, ast.FunctionDef):
            inside = (0, 0) if field == "body" else None
        for index, child in enumerate(value if isinstance(value, list) else [value]):
            if not isinstance(child, ast.AST) or _is_left_out(child):
                continue
            here = _header(child) if isinstance(child, ast.stmt) and inside else inside
            where = child if hasattr(child, "lineno") else place
            for new in _replacements(node, field, child):
                yield _fault(module, (node, field, index), new, where, here)
            if not isinstance(child, ast.JoinedStr):
                yield from _within(module, child, where, here)
            else:
                for piece in child.values:
                    if isinstance(piece, ast.FormattedValue):
                        yield from _within(module, piece, where, here)


def _header(statement: ast.stmt) -> tuple[int, int]:
    """First and last line of a statement, without those of its body."""
    body = getattr(statement, "body", None)
    last = body[0].lineno - 1 if body else statement.end_lineno or statement.lineno
    return statement.lineno, max(last, statement.lineno)


def _is_left_out(node: ast.AST) -> bool:
    if isinstance(node, ast.Assert | ast.Import | ast.ImportFrom):
        return True
    if isinstance(node, ast.Expr) and isinstance(node.value, ast.Constant):
        return True
    if isinstance(node, ast.If) and getattr(node.test, "id", "") == "TYPE_CHECKING":
        return True
    return isinstance(node, ast.keyword) and node.arg == "strict"


def _replacements(parent: ast.AST, field: str, node: ast.AST) -> Iterator[ast.AST]:
    if isinstance(parent, _CONDITIONS) and field == "test":
        yield ast.Constant(False)
        if not isinstance(parent, ast.While):
            yield ast.Constant(True)
    if isinstance(parent, ast.comprehension) and field == "ifs":
        yield from (ast.Constant(True), ast.Constant(False))
    match node:
        case ast.Constant(value=bool(value)):
            yield ast.Constant(not value)
        case ast.Constant(value=int(value)):
            yield ast.Constant(value + 1)
        case ast.Constant(value=float(value)):
            yield ast.Constant(2.0 * value if value else 1.0)
        case ast.Constant(value=str(value)) if " " not in value.strip():
            yield ast.Constant(value + "_")
        case ast.UnaryOp(op=ast.Not() | ast.USub() | ast.Invert()):
            yield node.operand
        case ast.Call(func=ast.Name(id=name)) if name in _TWINS:
            yield ast.Call(ast.Name(_TWINS[name], ast.Load()), node.args, node.keywords)
        case ast.Call(func=ast.Name(id="abs")):
            yield node.args[0]
        case ast.Call(func=ast.Attribute(attr=name, value=value)) if name in _TRIMMERS:
            yield value
        case ast.Expr(value=ast.Call() | ast.Yield() | ast.YieldFrom()):
            yield ast.Pass()
        case ast.AugAssign() | ast.Raise() | ast.Continue() | ast.Break():
            yield ast.Pass()
        case ast.BitOr() if _is_union(parent):
            return
        case ast.operator() | ast.cmpop() | ast.boolop():
            yield from (kind() for kind in _COMPARISONS.get(type(node), ()))


def _is_union(node: ast.AST) -> bool:
    """``A | B`` of types, told by their capitals."""
    right = getattr(node, "right", None)
    return isinstance(right, ast.Name) and right.id[0].isupper()


def _fault(
    module: str,
    slot: tuple[ast.AST, str, int],
    new: ast.AST,
    where: ast.AST,
    lines: tuple[int, int] | None,
) -> Fault:
    parent, field, index = slot
    value = getattr(parent, field)
    old = value[index] if isinstance(value, list) else value
    ast.copy_location(new, where)
    ast.fix_missing_locations(new)

    def put(node: ast.AST) -> None:
        if isinstance(value, list):
            value[index] = node
        else:
            setattr(parent, field, node)

    whole = parent if isinstance(old, ast.operator | ast.cmpop | ast.boolop) else None
    before = ast.unparse(whole or old)
    put(new)
    after = ast.unparse(whole or new)
    put(old)
    text = f"{_cut(before)} → {_cut(after)}"
    line, column = getattr(where, "lineno", 0), getattr(where, "col_offset", -1) + 1
    return Fault(module, line, column, text, lines, lambda: put(new), lambda: put(old))


def _cut(text: str) -> str:
    line = " ".join(text.split())
    return line if len(line) <= 90 else line[:87] + "..."
