"""The small faults that are tried in a module, each made by replacing one place of its text.

Left alone: annotations, decorators, docstrings, imports and whatever stands inside an f-string; of texts,
sentences are left alone, names and SQL are not.
"""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from dataclasses import dataclass

COMPARED: dict[type[ast.cmpop], type[ast.cmpop]] = {
    ast.Lt: ast.LtE,
    ast.LtE: ast.Lt,
    ast.Gt: ast.GtE,
    ast.GtE: ast.Gt,
    ast.Eq: ast.NotEq,
    ast.NotEq: ast.Eq,
    ast.Is: ast.IsNot,
    ast.IsNot: ast.Is,
    ast.In: ast.NotIn,
    ast.NotIn: ast.In,
}
"""An order gets its boundary moved: whoever notices that notices the reverse as well."""

COMPUTED: dict[type[ast.operator], type[ast.operator]] = {
    ast.Add: ast.Sub,
    ast.Sub: ast.Add,
    ast.Mult: ast.Div,
    ast.Div: ast.Mult,
    ast.Pow: ast.Mult,
    ast.LShift: ast.RShift,
    ast.RShift: ast.LShift,
    ast.BitAnd: ast.BitOr,
    ast.BitOr: ast.BitAnd,
}
CALLED = {"min": "max", "max": "min", "any": "all", "all": "any"}
SQL = re.compile(r"\b(CREATE|EXISTS|NEW|OLD|UPDATE|INSERT|SELECT)\b")
SQL_SWAPS = (
    (" AND ", " OR "),
    (" OR ", " AND "),
    (" <> ", " = "),
    (" = ", " <> "),
    ("+ 1", "+ 2"),
    ("EXISTS", "NOT EXISTS"),
    ("ALWAYS ", ""),
    ("BEFORE", "AFTER"),
)


@dataclass(frozen=True, slots=True)
class Mutant:
    """One fault: where it stands, what it replaces, and the module with it."""

    line: int
    statement: range
    """Lines of the statement that it stands in."""
    function: str | None
    """Qualified name of the function or method; None: it stands where only an import runs it."""
    was: str
    becomes: str
    module: str


def mutants(source: str) -> Iterator[Mutant]:
    """Make every fault of a module, from its first line to its last."""
    text = source.encode()
    starts = [0]
    for line in text.splitlines(keepends=True):
        starts.append(starts[-1] + len(line))
    seen = set()
    tree = ast.parse(source)
    functions = dict(_functions(tree.body))
    for statement, node, replacement in _faults(tree):
        begin = starts[node.lineno - 1] + node.col_offset
        end = starts[(node.end_lineno or node.lineno) - 1] + (node.end_col_offset or 0)
        module = (text[:begin] + replacement.encode() + text[end:]).decode()
        if module not in seen and module != source:
            seen.add(module)
            function = functions.get(node.lineno)
            yield Mutant(node.lineno, statement, function, text[begin:end].decode(), replacement, module)


Fault = tuple[range, ast.expr | ast.stmt, str]


def _faults(tree: ast.Module) -> Iterator[Fault]:
    for statement in _statements(tree.body):
        lines = range(statement.lineno, _header_end(statement) + 1)
        yield from ((lines, statement, text) for text in _of_statement(statement))
        for expression in _expressions(statement):
            yield from ((lines, expression, text) for text in _of_expression(expression))


def _functions(body: list[ast.stmt], prefix: str = "") -> Iterator[tuple[int, str]]:
    """Every line of a function's body, with the qualified name of the outermost function that it is in."""
    for statement in body:
        if isinstance(statement, ast.ClassDef):
            yield from _functions(statement.body, f"{prefix}{statement.name}.")
        elif isinstance(statement, ast.FunctionDef):
            lines = range(statement.body[0].lineno, (statement.end_lineno or statement.lineno) + 1)
            yield from ((line, f"{prefix}{statement.name}") for line in lines)


def _statements(body: list[ast.stmt]) -> Iterator[ast.stmt]:
    for statement in body:
        is_text = isinstance(statement, ast.Expr) and isinstance(statement.value, ast.Constant)
        if is_text or isinstance(statement, (ast.Import, ast.ImportFrom)):
            continue
        yield statement
        for name in ("body", "orelse", "finalbody"):
            yield from _statements(getattr(statement, name, []))
        for part in (*getattr(statement, "handlers", ()), *getattr(statement, "cases", ())):
            yield from _statements(part.body)


def _header_end(statement: ast.stmt) -> int:
    body = getattr(statement, "body", None)
    return body[0].lineno - 1 if body else statement.end_lineno or statement.lineno


def _expressions(statement: ast.stmt) -> Iterator[ast.expr]:
    """Every expression of a statement, those of its body aside."""
    for name, value in ast.iter_fields(statement):
        if name in ("annotation", "returns", "decorator_list", "body", "orelse", "handlers", "finalbody"):
            continue
        for part in value if isinstance(value, list) else [value]:
            if isinstance(part, ast.match_case):
                yield from _inside(part.guard) if part.guard else ()
            elif isinstance(part, ast.AST):
                yield from _inside(part)


def _inside(node: ast.AST) -> Iterator[ast.expr]:
    is_literal_type = (
        isinstance(node, ast.Subscript) and isinstance(node.value, ast.Name) and node.value.id == "Literal"
    )
    if is_literal_type or isinstance(node, ast.JoinedStr):
        return
    if isinstance(node, ast.expr) and not isinstance(getattr(node, "ctx", None), ast.Store):
        yield node
    for name, value in ast.iter_fields(node):
        if name == "annotation":
            continue
        for part in value if isinstance(value, list) else [value]:
            if isinstance(part, ast.AST):
                yield from _inside(part)


def _of_statement(statement: ast.stmt) -> Iterator[str]:
    match statement:
        case ast.Expr(value=ast.Call(func=ast.Attribute(attr="flush"))):
            return  # the end of the transaction sends it all the same
        case ast.Expr(value=ast.Call() | ast.Yield() | ast.YieldFrom()) | ast.Raise() | ast.AugAssign():
            yield "pass"
        case ast.Assign(targets=[ast.Attribute() | ast.Subscript(), *_]):
            yield "pass"
        case ast.Return(value=ast.expr() as value) if not _is_none(value):
            yield "return None"
        case ast.Continue():
            yield "break"
        case ast.Break():
            yield "continue"


def _of_expression(node: ast.expr) -> Iterator[str]:
    match node:
        case ast.Compare(left=left, ops=[first, *rest], comparators=values):
            yield _text(ast.Compare(left, [COMPARED[type(first)](), *rest], values))
            if rest:
                yield _text(ast.Compare(left, [first, COMPARED[type(rest[0])](), *rest[1:]], values))
        case ast.BoolOp(op=op, values=values):
            for place in range(len(values)):
                rest = [*values[:place], *values[place + 1 :]]
                yield _text(rest[0] if len(rest) == 1 else ast.BoolOp(op, rest))
        case ast.UnaryOp(op=ast.Not() | ast.USub() | ast.Invert(), operand=operand):
            yield _text(operand)
        case ast.BinOp(left=left, op=op, right=right) if type(op) in COMPUTED:
            yield _text(ast.BinOp(left, COMPUTED[type(op)](), right))
        case ast.IfExp(body=body, orelse=orelse):
            yield _text(body)
            yield _text(orelse)
        case ast.Call(func=ast.Attribute(value=ast.Call() | ast.Name(id="query") as whole)):
            # a step of a chain left out: a condition of a query, an order, a limit
            yield _text(whole)
        case ast.Call(func=ast.Name(id=name), args=args, keywords=keywords) if name in CALLED:
            yield _text(ast.Call(ast.Name(CALLED[name]), args, keywords))
        case ast.Constant(value=value):
            yield from _of_constant(value)


def _of_constant(value: object) -> Iterator[str]:
    if isinstance(value, bool):
        yield repr(not value)
    elif isinstance(value, int | float):
        yield repr(value + 1)
    elif isinstance(value, str) and SQL.search(value):
        for old, new in SQL_SWAPS:
            if old in value:
                yield f"({value.replace(old, new, 1)!r})"
    elif isinstance(value, str) and value and " " not in value:
        yield f"({'x' + value!r})"
    elif isinstance(value, bytes):
        yield repr(value + b"x")


def _is_none(value: ast.expr) -> bool:
    return isinstance(value, ast.Constant) and value.value is None


def _text(node: ast.expr) -> str:
    return f"({ast.unparse(ast.fix_missing_locations(node))})"
