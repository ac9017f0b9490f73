"""Random terms and formulas, and random changes of given ones, for tests that compare with evaluation."""

from __future__ import annotations

import random
from fractions import Fraction

from workbench.algebra.terms import Term, app, call, num, rebuild, summation, var

N, K, M = var("n", "nat"), var("k", "nat"), var("m", "int")
X, Y, Z = var("x", "real"), var("y", "real"), var("z", "real")
P, Q = var("p", "bool"), var("q", "bool")
I, J = var("i", "int"), var("j", "int")  # noqa: E741
NAMES = (N, K, M, X, Y, Z)
NUMBERS = (num(0), num(1), num(2), num(3), num(-1), num(-2), num(Fraction(1, 2)), num(Fraction(-2, 3)))
OPERATORS = (
    *("+", "+", "-", "*", "*", "/", "div", "mod", "^", "^", "base", "neg", "abs", "floor", "ceil"),
    *("lg", "max", "min", "if", "sum", "fact", "binom", "call"),
)
COMPARISONS = ("<=", "<", "=", "!=", ">=", ">")


def number(rng: random.Random, depth: int, bound: tuple[Term, ...] = ()) -> Term:
    """A random expression; `bound`: variables of sums around it."""
    if depth == 0 or rng.random() < 0.2:
        return rng.choice((*NAMES, *bound, *bound, rng.choice(NUMBERS)))

    def part() -> Term:
        return number(rng, depth - 1, bound)

    op = rng.choice(OPERATORS)
    match op:
        case "neg" | "abs" | "floor" | "ceil" | "lg" | "fact":
            return app(op, part())
        case "^":
            return app("^", part(), rng.choice((N, K, M, num(2), num(-1), num(3), app("-", N, num(1)))))
        case "base":
            exponents = (N, M, app("+", N, K), app("-", K, num(1)), app("*", num(2), M), app("div", N, num(2)))
            return app("^", num(rng.choice((2, 3, 4, 6, Fraction(1, 2), -1, 0))), rng.choice(exponents))
        case "if":
            return Term("if", (formula(rng, depth - 1, bound), part(), part()))
        case "sum":
            new = rng.choice((I, J))
            low, high = rng.choice((num(0), num(1), N, M)), rng.choice((N, M, num(2), app("-", N, num(1))))
            return summation(new, low, high, number(rng, depth - 1, (*bound, new)))
        case "call":
            name, sort = rng.choice((("moves", "nat"), ("price", "real")))
            return call(name, sort, (rng.choice((N, K, part()) if name == "moves" else (X, N, part())),))  # type: ignore[arg-type]
    return app(op, part(), part())


def formula(rng: random.Random, depth: int, bound: tuple[Term, ...] = ()) -> Term:
    if depth <= 0 or rng.random() < 0.5:
        if rng.random() < 0.1:
            return rng.choice((P, Q, call("even", "bool", (rng.choice((N, K)),))))
        return app(rng.choice(COMPARISONS), number(rng, max(depth, 1), bound), number(rng, max(depth - 1, 0), bound))
    op = rng.choice(("and", "or", "implies", "not", "iff"))
    return app(op, *(formula(rng, depth - 1, bound) for _ in range(1 if op == "not" else 2)))


# ------------------------------------------------------------------ changes
_TURNED = {
    "<=": ("<", "=", ">="), "<": ("<=", "!="), ">=": (">", "="), ">": (">=",), "=": ("<=", ">="), "!=": ("<", ">"),
    "+": ("-", "max"), "-": ("+",), "*": ("+",), "max": ("min", "+"), "min": ("max",), "floor": ("ceil",),
    "ceil": ("floor",), "div": ("/",), "/": ("div",), "and": ("or",), "or": ("and",), "implies": ("or", "iff"),
    "lg": ("floor",), "fact": ("lg",), "binom": ("*",), "^": ("*",),
}  # fmt: skip
_SORTS = {"nat": "int", "int": "real", "real": "nat"}


def changed(rng: random.Random, t: Term, names: tuple[Term, ...]) -> Term:
    """The formula with one thing in it otherwise: an operator, a number, a name."""
    places = _places(t)
    return _at(t, rng.randrange(places), lambda s: _other(rng, s, names))[0]


def _places(t: Term) -> int:
    return 1 + sum(map(_places, t.args))


def _at(t: Term, place: int, change: object) -> tuple[Term, int]:
    """The term with the change made at the place of that number, in preorder; and how many places are left."""
    if place == 0:
        return change(t), -1  # type: ignore[operator]
    place -= 1
    args = []
    for a in t.args:
        if place >= 0:
            a, place = _at(a, place, change)
        args.append(a)
    return rebuild(t, tuple(args)), place


def _other(rng: random.Random, t: Term, names: tuple[Term, ...]) -> Term:
    if t.op == "num":
        return num(t.value + rng.choice((1, -1, 1, Fraction(1, 2))))
    if t.op == "var":
        return rng.choice([v for v in names if (v.sort == "bool") == (t.sort == "bool")] or [t])
    if t.op in _TURNED:
        return rebuild(t, t.args) if not _TURNED[t.op] else app(rng.choice(_TURNED[t.op]), *t.args)
    if t.op == "if" and rng.random() < 0.5:
        return rebuild(t, (t.args[0], t.args[2], t.args[1]))
    if t.op == "not":
        return t.args[0]
    return t


def weakened(rng: random.Random, facts: list[Term], goal: Term) -> tuple[list[Term], Term]:
    """The obligation with one name of another type everywhere, or without a fact, or with something changed."""
    names = _names([*facts, goal])
    kind = rng.random()
    if kind < 0.2 and facts:
        gone = rng.randrange(len(facts))
        return facts[:gone] + facts[gone + 1 :], goal
    numbers = [v for v in names if v.sort in _SORTS]
    if kind < 0.4 and numbers:
        old = rng.choice(numbers)
        new = var(old.name, _SORTS[old.sort])  # type: ignore[arg-type]
        return [_with_name(f, old, new) for f in facts], _with_name(goal, old, new)
    if kind < 0.6 and facts:
        at = rng.randrange(len(facts))
        return [changed(rng, f, names) if i == at else f for i, f in enumerate(facts)], goal
    return facts, changed(rng, goal, names)


def _names(terms: list[Term]) -> tuple[Term, ...]:
    found: dict[Term, None] = {}
    stack = list(reversed(terms))
    bound: set[Term] = set()
    while stack:
        t = stack.pop()
        if t.op == "var":
            found[t] = None
        if t.op == "sum":
            bound.add(t.args[0])
        stack.extend(t.args)
    return tuple(v for v in found if v not in bound)


def _with_name(t: Term, old: Term, new: Term) -> Term:
    if t == old:
        return new
    return rebuild(t, tuple(_with_name(a, old, new) for a in t.args)) if t.args else t
