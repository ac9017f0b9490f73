"""Walks over trees, by loops: no depth of a tree can overflow them."""

from __future__ import annotations

from collections.abc import Iterator

from workbench.errors import Span
from workbench.sheet import tree


def children(node: tree.Expr) -> tuple[tree.Expr, ...]:
    """The expressions that an expression is made of."""
    match node:
        case tree.Unary():
            return (node.operand,)
        case tree.Binary():
            return (node.left, node.right)
        case tree.Comparison():
            return node.operands
        case tree.Conditional():
            return (node.condition, node.then, node.otherwise)
        case tree.Application():
            return node.arguments
        case tree.Summation():
            return (node.low, node.high, node.body)
        case tree.Short():
            return (node.bound,)
        case _:
            return ()


def names_in(expr: tree.Expr | None) -> Iterator[str]:
    """Names of values in an expression, bound ones of sums apart; of a part such as `stack.peak` the gauge's."""
    todo: list[tuple[tree.Expr, frozenset[str]]] = [(expr, frozenset())] if expr is not None else []
    while todo:
        node, bound = todo.pop()
        if isinstance(node, tree.Name):
            name = node.name.partition(".")[0]
            if name not in bound:
                yield name
        elif isinstance(node, tree.Summation):
            todo += [(node.body, bound | {node.variable}), (node.high, bound), (node.low, bound)]
        else:
            todo += [(c, bound) for c in reversed(children(node))]


def blocks_in(routine: tree.Routine) -> Iterator[tree.Block]:
    """The body of a routine and every block in it."""
    todo = [routine.body]
    while todo:
        block = todo.pop()
        yield block
        for statement in block:
            match statement:
                case tree.If():
                    todo += [b for _, b in statement.branches]
                    todo += [statement.otherwise] if statement.otherwise is not None else []
                case tree.Either():
                    todo += statement.branches
                case tree.While() | tree.For() | tree.HoldStatement() | tree.Stage():
                    todo.append(statement.body)


def headers_in(routine: tree.Routine) -> Iterator[tree.Header]:
    """The header of a routine, and those of its loops and stages."""
    yield routine.header
    for block in blocks_in(routine):
        yield from (s.header for s in block if isinstance(s, tree.While | tree.For | tree.Stage))


def calls_in(sheet: tree.Sheet) -> Iterator[tuple[str, Span]]:
    """Name and place of every call in a sheet's routines (of a function, too, where it is the whole of a value)."""
    for routine in (i for i in sheet.items if isinstance(i, tree.Routine)):
        for block in blocks_in(routine):
            for statement in block:
                if isinstance(statement, tree.CallStatement):
                    yield statement.routine, statement.span
                elif isinstance(statement, tree.Assign | tree.Var) and isinstance(statement.value, tree.Application):
                    yield statement.value.name, statement.value.span
