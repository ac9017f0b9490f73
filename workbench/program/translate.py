"""Formulas and expressions of the tree as terms: names get their sorts, short forms their full meaning."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import reduce
from itertools import chain, count

from workbench.algebra.terms import (
    FALSE,
    TRUE,
    Sort,
    Term,
    add,
    app,
    call,
    mul,
    num,
    sub,
    substitute,
    summation,
    var,
    variables,
)
from workbench.sheet import tree

# (name, primed) -> the term that stands for it
Lookup = Callable[[str, bool], Term]


@dataclass(frozen=True, slots=True)
class Vocabulary:
    """What translation must know beside names: the sorts of functions, the clocks of gauges."""

    functions: Mapping[str, Sort] = field(default_factory=dict)
    clocks: Mapping[str, str | None] = field(default_factory=dict)


def translate(expr: tree.Expr, lookup: Lookup, words: Vocabulary) -> Term:
    """The expression as a term. It must have passed the checks of names and types."""
    match expr:
        case tree.Number(value):
            return num(value)
        case tree.Truth(value):
            return TRUE if value else FALSE
        case tree.Name(name, primed):
            return lookup(name, primed)
        case tree.Unary(op, operand):
            return app("not" if op == "not" else "neg", translate(operand, lookup, words))
        case tree.Binary():
            return _chain(expr, lookup, words)
        case tree.Comparison(operands, ops):
            terms = [translate(o, lookup, words) for o in operands]
            links = [_compared(op, a, b) for op, a, b in zip(ops, terms, terms[1:], strict=False)]
            return reduce(lambda a, b: app("and", a, b), links)
        case tree.Conditional(condition, then, otherwise):
            parts = [translate(e, lookup, words) for e in (condition, then, otherwise)]
            return Term("if", tuple(parts), sort="bool" if parts[1].is_formula else "real")
        case tree.Application(name, arguments):
            return _applied(name, [translate(a, lookup, words) for a in arguments], words)
        case tree.Summation():
            return _sum(expr, lookup, words)
        case tree.Short():
            return _short(expr, lookup, words)


def _chain(expr: tree.Binary, lookup: Lookup, words: Vocabulary) -> Term:
    """a + b + c + … without recursion along the chain, which may be long."""
    links: list[tuple[str, tree.Expr]] = []
    first: tree.Expr = expr
    while isinstance(first, tree.Binary):
        links.append((first.op, first.right))
        first = first.left
    result = translate(first, lookup, words)
    for op, right in reversed(links):
        result = app(op, result, translate(right, lookup, words))
    return result


def _sum(expr: tree.Summation, lookup: Lookup, words: Vocabulary) -> Term:
    """The sum. What a name stands for may hold the bound variable's name, as an argument of a call does in the price of
    that call: then the bound variable is called otherwise.
    """
    stand_in = var(f"{expr.variable}@", "int")  # no sheet can write an @

    def inside(name: str, primed: bool) -> Term:
        return stand_in if name == expr.variable and not primed else lookup(name, primed)

    body = translate(expr.body, inside, words)
    taken = {v.name for v in variables(body)}
    others = (f"{expr.variable}_{i}" for i in count(1))
    bound = var(next(n for n in chain((expr.variable,), others) if n not in taken), "int")
    low, high = translate(expr.low, lookup, words), translate(expr.high, lookup, words)
    return summation(bound, low, high, substitute(body, {stand_in: bound}))


def _compared(op: str, a: Term, b: Term) -> Term:
    if a.is_formula and op in ("=", "!="):
        same = app("iff", a, b)
        return same if op == "=" else app("not", same)
    return app(op, a, b)


def _applied(name: str, arguments: list[Term], words: Vocabulary) -> Term:
    if name in ("max", "min"):
        return reduce(lambda a, b: app(name, a, b), arguments)
    if name in words.functions:
        return call(name, words.functions[name], tuple(arguments))
    return app(name, *arguments)


def _short(form: tree.Short, lookup: Lookup, words: Vocabulary) -> Term:
    """The table of short forms: what the specification itself spends and holds, whatever was in use before."""
    name, op = form.resource, form.op
    bound = translate(form.bound, lookup, words)
    before, after = lookup(name, False), lookup(name, True)
    if form.aspect in ("spent", "net"):
        return app(op, after, add(before, bound))
    if form.aspect == "peak":
        return app(op, lookup(f"{name}.peak", True), app("max", lookup(f"{name}.peak", False), add(before, bound)))
    clock = words.clocks[name]
    assert clock is not None, "checked: area and mean need a clock"
    duration = sub(lookup(clock, True), lookup(clock, False))
    rectangle = mul(before, duration)
    area, area_after = lookup(f"{name}.area", False), lookup(f"{name}.area", True)
    if form.aspect == "area":
        return app(op, area_after, add(add(area, rectangle), bound))
    return app(op, sub(sub(area_after, area), rectangle), mul(bound, duration))
