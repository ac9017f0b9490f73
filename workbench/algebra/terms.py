"""Terms and formulas over numbers: one immutable class for all of them.

Nothing here knows of sheets or programs. A term is an operator, arguments, and for numbers, names
and functions a payload. Terms are compared by structure; the hash is computed once.

Operators
  num (value)  var (name, sort)  true  false
  + - * / div mod ^ (binary)  neg abs floor ceil lg fact (unary)  max min binom (binary)
  if (condition, then, otherwise)   sum (bound variable, low, high, body)   call (name, sort, arguments)
  = != < <= > >=   iff   not and or implies
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from fractions import Fraction
from typing import Literal, TypeAlias

Sort: TypeAlias = Literal["nat", "int", "real", "bool"]
Rational: TypeAlias = int | Fraction

FORMULA_OPS = frozenset({"true", "false", "=", "!=", "<", "<=", ">", ">=", "iff", "not", "and", "or", "implies"})
COMPARISONS = frozenset({"=", "!=", "<", "<=", ">", ">="})


class Term:
    """One node; make it with the functions below, which keep terms tidy."""

    __slots__ = ("op", "args", "name", "value", "sort", "_hash")

    def __init__(
        self,
        op: str,
        args: tuple[Term, ...] = (),
        name: str = "",
        value: Rational = 0,
        sort: Sort = "real",
    ) -> None:
        self.op = op
        self.args = args
        self.name = name
        self.value = value
        self.sort: Sort = sort
        self._hash = hash((op, args, name, value, sort))

    def __hash__(self) -> int:
        return self._hash

    def __eq__(self, other: object) -> bool:
        if self is other:
            return True
        if not isinstance(other, Term) or self._hash != other._hash:
            return False
        return (
            self.op == other.op
            and self.name == other.name
            and self.value == other.value
            and self.sort == other.sort
            and self.args == other.args
        )

    def __repr__(self) -> str:
        if self.op == "num":
            return str(self.value)
        if self.op == "var":
            return self.name
        head = self.name if self.op == "call" else self.op
        return f"({head} {' '.join(map(repr, self.args))})" if self.args else head

    @property
    def is_formula(self) -> bool:
        if self.op in FORMULA_OPS:
            return True
        if self.op == "if":
            return self.args[1].is_formula
        return self.op in ("var", "call") and self.sort == "bool"


TRUE = Term("true", sort="bool")
FALSE = Term("false", sort="bool")


def num(value: Rational) -> Term:
    if isinstance(value, Fraction) and value.denominator == 1:
        value = value.numerator
    return Term("num", value=value)


ZERO = num(0)
ONE = num(1)


def var(name: str, sort: Sort) -> Term:
    """A name. Its sort is a guarantee: only values of the sort are ever meant."""
    return Term("var", name=name, sort=sort)


def app(op: str, *args: Term) -> Term:
    return Term(op, args, sort="bool" if op in FORMULA_OPS else "real")


def call(name: str, sort: Sort, args: tuple[Term, ...]) -> Term:
    return Term("call", args, name=name, sort=sort)


def summation(variable: Term, low: Term, high: Term, body: Term) -> Term:
    return Term("sum", (variable, low, high, body))


def add(a: Term, b: Term) -> Term:
    if a.op == "num" and b.op == "num":
        return num(a.value + b.value)
    if a == ZERO:
        return b
    if b == ZERO:
        return a
    return app("+", a, b)


def sub(a: Term, b: Term) -> Term:
    if a.op == "num" and b.op == "num":
        return num(a.value - b.value)
    return a if b == ZERO else app("-", a, b)


def mul(a: Term, b: Term) -> Term:
    if a.op == "num" and b.op == "num":
        return num(a.value * b.value)
    if a == ONE:
        return b
    if b == ONE:
        return a
    return ZERO if a == ZERO or b == ZERO else app("*", a, b)


def negate(formula: Term) -> Term:
    """The negation, without piling up `not`."""
    if formula.op == "not":
        return formula.args[0]
    if formula.op == "true":
        return FALSE
    return TRUE if formula.op == "false" else app("not", formula)


def conjunction(formulas: list[Term] | tuple[Term, ...]) -> Term:
    parts = [f for f in formulas if f.op != "true"]
    if not parts:
        return TRUE
    result = parts[0]
    for f in parts[1:]:
        result = app("and", result, f)
    return result


def disjunction(formulas: list[Term] | tuple[Term, ...]) -> Term:
    parts = [f for f in formulas if f.op != "false"]
    if not parts:
        return FALSE
    result = parts[0]
    for f in parts[1:]:
        result = app("or", result, f)
    return result


def implies(condition: Term, conclusion: Term) -> Term:
    return conclusion if condition.op == "true" else app("implies", condition, conclusion)


def rebuild(term: Term, args: tuple[Term, ...]) -> Term:
    """The same operator over other arguments."""
    return Term(term.op, args, term.name, term.value, term.sort)


def subterms(term: Term) -> Iterator[Term]:
    """Every distinct subterm, iteratively, outermost first."""
    seen: set[Term] = set()
    stack = [term]
    while stack:
        t = stack.pop()
        if t in seen:
            continue
        seen.add(t)
        yield t
        stack.extend(reversed(t.args))


def names(term: Term) -> set[str]:
    """Names that occur, bound variables of sums included."""
    return {t.name for t in subterms(term) if t.op == "var"}


def variables(term: Term) -> set[Term]:
    """Variables that occur free."""
    return _free(term, {})


def _free(term: Term, memo: dict[Term, frozenset[Term]]) -> set[Term]:
    def children(t: Term, done: Callable[[Term], frozenset[Term]]) -> frozenset[Term]:
        if t.op == "var":
            return frozenset((t,))
        if t.op == "sum":
            bound, low, high, body = t.args
            return done(low) | done(high) | (done(body) - {bound})
        return frozenset().union(*map(done, t.args)) if t.args else frozenset()

    return set(fold(term, children, memo))


def fold(
    term: Term,
    combine: Callable[[Term, Callable[[Term], frozenset[Term]]], frozenset[Term]],
    memo: dict[Term, frozenset[Term]],
) -> frozenset[Term]:
    """Bottom-up over the term without recursion; `combine` gets a node and the results below it."""
    stack = [term]
    while stack:
        t = stack[-1]
        if t in memo:
            stack.pop()
            continue
        missing = [a for a in t.args if a not in memo]
        if missing:
            stack.extend(missing)
            continue
        memo[t] = combine(t, memo.__getitem__)
        stack.pop()
    return memo[term]


def substitute(term: Term, replacement: Mapping[Term, Term], memo: dict[Term, Term] | None = None) -> Term:
    """All variables of `replacement` replaced at once; bound variables of sums are renamed where they would catch a
    name.

    A caller that substitutes into many terms passes one `memo` dict, so that shared parts are walked once.
    """
    if not replacement:
        return term
    if memo is None:
        memo = {}
    stack = [term]
    while stack:
        t = stack[-1]
        if t in memo:
            stack.pop()
            continue
        if t.op == "var":
            memo[t] = replacement.get(t, t)
            stack.pop()
            continue
        if t.op == "sum":
            memo[t] = _substitute_sum(t, replacement)
            stack.pop()
            continue
        missing = [a for a in t.args if a not in memo]
        if missing:
            stack.extend(missing)
            continue
        args = tuple(memo[a] for a in t.args)
        memo[t] = t if args == t.args else rebuild(t, args)
        stack.pop()
    return memo[term]


def _substitute_sum(term: Term, replacement: Mapping[Term, Term]) -> Term:
    bound, low, high, body = term.args
    inner = {v: r for v, r in replacement.items() if v != bound}
    free = variables(body)
    used = {v: r for v, r in inner.items() if v in free}
    if any(bound in variables(r) for r in used.values()):
        taken = {v.name for v in free}.union(*({v.name for v in variables(r)} for r in used.values()))
        free_names = (f"{bound.name}_{i}" for i in range(1, 1_000_000) if f"{bound.name}_{i}" not in taken)
        fresh = var(next(free_names), bound.sort)
        body = substitute(body, {bound: fresh})
        bound = fresh
    return summation(bound, substitute(low, replacement), substitute(high, replacement), substitute(body, used))
