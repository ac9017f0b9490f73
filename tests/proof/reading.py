"""Terms evaluated once more, by the plain reading that the normal form has: a judge that shares no code with it.

All operators are total: x/0 = 0, 0^negative = 0, lg x = 0 below 1, a sum runs over no number where its range is empty.
"""

from __future__ import annotations

import random
from collections.abc import Iterator, Mapping, Sequence
from fractions import Fraction
from math import comb, factorial, floor

from workbench.algebra.polynomial import Atom, Poly
from workbench.algebra.terms import Rational, Term, app, call, num, variables
from workbench.proof.laws import Law

ANY = 77  # what fact, binom and functions are where they are not defined: some natural; nothing may rely on which
# Values by type: edges, small ones, and fractions that are no halves.
POOL: dict[str, tuple[Rational, ...]] = {
    "nat": (0, 0, 1, 1, 2, 2, 3, 4, 5, 6, 7, 8, 9, 12, 16),
    "int": (-9, -4, -3, -2, -1, 0, 1, 2, 3, 4, 5, 8),
    "real": (-3, -2, -1, 0, 0, 1, 1, 2, 3, 7, Fraction(-3, 2), Fraction(1, 2), Fraction(2, 3), Fraction(7, 3)),
    "bool": (0, 1),
}
EXPONENT_LIMIT = 400
BIT_LIMIT = 5000
DEPTH_LIMIT = 14  # of calls
Values = Mapping[str, Rational]


class Unknown(Exception):
    """A value that is no fraction, or too large to work out."""


def total(
    t: Term, values: Values, functions: Mapping[str, Law] | None = None, anything: int = ANY
) -> Rational:
    """The value; formulas are 1 or 0. `anything`: the natural that stands where fact and binom are not defined."""
    op = t.op
    if op == "num":
        return t.value
    if op == "var":
        return values[t.name]
    if op in ("true", "false"):
        return int(op == "true")
    if op == "sum":
        return _sum(t, values, functions)
    if op == "if":
        return total(t.args[1 if total(t.args[0], values, functions, anything) else 2], values, functions, anything)
    a = [total(x, values, functions, anything) for x in t.args]
    if op == "call":
        law = (functions or {})[t.name]
        if not all(_of_sort(v, p.sort) for p, v in zip(law.parameters, a, strict=True)):
            return ANY % 2 if t.sort == "bool" else ANY
        if any(p.sort == "nat" and v > DEPTH_LIMIT for p, v in zip(law.parameters, a, strict=True)):
            raise Unknown("too deep")
        inside = {p.name: v for p, v in zip(law.parameters, a, strict=True)}
        return total(law.formula.args[1], inside, functions)
    match op:
        case "+":
            return a[0] + a[1]
        case "-":
            return a[0] - a[1]
        case "*":
            return a[0] * a[1]
        case "neg":
            return -a[0]
        case "/":
            return Fraction(a[0]) / a[1] if a[1] else 0
        case "div":
            return floor(Fraction(a[0]) / a[1]) if a[1] else 0
        case "mod":
            return a[0] - a[1] * (floor(Fraction(a[0]) / a[1]) if a[1] else 0)
        case "^":
            return power(a[0], a[1])
        case "floor":
            return floor(a[0])
        case "ceil":
            return -floor(-a[0])
        case "lg":
            return floor(a[0]).bit_length() - 1 if a[0] >= 1 else 0
        case "fact":
            return factorial(_small(a[0])) if _of_sort(a[0], "nat") else max(anything, 1)
        case "binom":
            return comb(_small(a[0]), _small(a[1])) if all(_of_sort(x, "nat") for x in a) else anything
        case "max" | "or":
            return max(a)
        case "min" | "and":
            return min(a)
        case "abs":
            return max(a[0], -a[0])
        case "=" | "iff":
            return int(a[0] == a[1])
        case "!=":
            return int(a[0] != a[1])
        case "<":
            return int(a[0] < a[1])
        case "<=":
            return int(a[0] <= a[1])
        case ">":
            return int(a[0] > a[1])
        case ">=":
            return int(a[0] >= a[1])
        case "not":
            return 1 - a[0]
        case "implies":
            return max(1 - a[0], a[1])
    raise ValueError(op)


def _small(value: Rational) -> int:
    if value > EXPONENT_LIMIT:
        raise Unknown("too large")
    return int(value)


def _of_sort(value: Rational, sort: str) -> bool:
    return sort in ("real", "bool") or (value == floor(value) and (sort == "int" or value >= 0))


def inside(atom: Atom, values: Values, functions: Mapping[str, Law] | None = None) -> Rational:
    """The value of an atom of the normal form."""
    if atom.kind == "var" or (atom.kind == "truth" and atom.data[0] == "var"):
        return values[str(atom.data[atom.kind == "truth"])]
    if atom.kind == "sum":
        name = str(atom.data[0])
        low, high = (value_of(p, values, functions) for p in atom.parts[:2])
        if low != floor(low) or high != floor(high):
            raise Unknown("a sum with a fractional bound")
        steps = range(int(low), int(high) + 1)
        return sum((value_of(atom.parts[2], {**values, name: i}, functions) for i in steps), Fraction(0))
    parts = tuple(num(value_of(p, values, functions)) for p in atom.parts)
    match atom.kind:
        case "ind":
            return total(app({"eq": "=", "ge": ">=", "gt": ">"}[str(atom.data[0])], parts[0], num(0)), values)
        case "pos":
            return max(parts[0].value, 0)
        case "inv":
            return total(app("/", num(1), parts[0]), values)
        case "pow":
            return power(parts[0].value, parts[1].value)
        case "call" | "truth":
            return total(call(str(atom.data[1]), atom.data[2], parts), values, functions)  # type: ignore[arg-type]
    return total(app(atom.kind, *parts), values)


def value_of(p: Poly, values: Values, functions: Mapping[str, Law] | None = None) -> Rational:
    """The value of a polynomial of the normal form."""
    result: Rational = 0
    for mono, c in p.terms.items():
        for atom, exponent in mono:
            c = c * power(inside(atom, values, functions), exponent)
        result += c
    return result


def _sum(t: Term, values: Values, functions: Mapping[str, Law] | None) -> Rational:
    bound, low, high, body = t.args
    first, last = total(low, values, functions), total(high, values, functions)
    if first != floor(first) or last != floor(last):
        raise Unknown("a sum with a fractional bound")
    return sum(
        (total(body, {**values, bound.name: i}, functions) for i in range(int(first), int(last) + 1)), Fraction(0)
    )


def power(base: Rational, exponent: Rational) -> Rational:
    whole = floor(exponent)
    if whole != exponent or abs(whole) * (base.numerator.bit_length() + base.denominator.bit_length()) > BIT_LIMIT:
        raise Unknown("a power that is no fraction, or too large")
    if base == 0 and whole < 0:
        return 0
    return Fraction(base) ** whole


def samples(
    facts: Sequence[Term], goal: Term, tries: int, seed: int = 0, functions: Mapping[str, Law] | None = None
) -> Iterator[dict[str, Rational]]:
    """Values that satisfy the facts, out of so many tries. A real that a fact gives by an equation is worked out."""
    rng = random.Random(seed)
    names = sorted(set().union(variables(goal), *map(variables, facts)), key=lambda v: v.name)
    given: dict[Term, Term] = {}
    for f in facts:
        for a, b in ((f.args[0], f.args[-1]), (f.args[-1], f.args[0])) if f.op in ("=", "iff") else ():
            if a.op == "var" and a not in given and not variables(b) & {a, *given} and not _given_by(b, given):
                given[a] = b
                break
    free = [v for v in names if v not in given]
    for _ in range(tries):
        values = {v.name: rng.choice(POOL[v.sort]) for v in free}
        try:
            for v in sorted(given, key=lambda v: len(_needs(v, given))):
                value = total(given[v], values, functions)
                if not _of_sort(value, v.sort):
                    raise Unknown("out of its type")
                values[v.name] = value
            if all(total(f, values, functions) for f in facts):
                yield values
        except (Unknown, KeyError):
            continue


def _given_by(t: Term, given: Mapping[Term, Term]) -> bool:
    return any(variables(given[v]) & variables(t) & set(given) for v in variables(t) if v in given)


def _needs(v: Term, given: Mapping[Term, Term]) -> set[Term]:
    found: set[Term] = set()
    work = [v]
    while work:
        for w in variables(given[work.pop()]):
            if w in given and w not in found:
                found.add(w)
                work.append(w)
    return found


def falsified(
    facts: Sequence[Term], goal: Term, tries: int = 300, seed: int = 0, functions: Mapping[str, Law] | None = None
) -> dict[str, Rational] | None:
    """Values that satisfy the facts and falsify the goal."""
    for values in samples(facts, goal, tries, seed, functions):
        try:
            if not total(goal, values, functions):
                return values
        except Unknown:
            continue
    return None
