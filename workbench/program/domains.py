"""Where a formula means something: the side conditions of its divisions, logarithms, powers, factorials, functions.

`and`, `or`, `implies` and `if` guard what stands after them, so each condition comes with what is known where it is
needed.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from workbench.algebra.terms import (
    FALSE,
    ONE,
    TRUE,
    ZERO,
    Sort,
    Term,
    app,
    conjunction,
    implies,
    negate,
    substitute,
    var,
)
from workbench.program.priced import Function


@dataclass(frozen=True, slots=True)
class Condition:
    """`formula` must hold, what guards it included; `what` says of which expression."""

    formula: Term
    what: str


def domain_conditions(term: Term, functions: Mapping[str, Function]) -> list[Condition]:
    """All side conditions of the term that do not hold at sight, each once, in the order in which they are met."""
    found: dict[Term, Condition] = {}
    for t, guards in guarded_subterms(term, functions):
        for condition, what in _own_conditions(t, functions):
            if condition.op != "true" and condition not in guards:
                guarded = implies(conjunction(guards), condition)
                found.setdefault(guarded, Condition(guarded, what))
    return list(found.values())


def guarded_subterms(term: Term, functions: Mapping[str, Function]) -> Iterator[tuple[Term, tuple[Term, ...]]]:
    """Every subterm that has parts, with the formulas that hold wherever its value is asked for."""
    work: list[tuple[Term, tuple[Term, ...]]] = [(term, ())]
    seen: set[tuple[Term, tuple[Term, ...]]] = set()
    while work:
        t, guards = work.pop()
        if not t.args or (t, guards) in seen:
            continue
        seen.add((t, guards))
        yield t, guards
        work.extend(reversed(_children(t, guards)))


def _children(t: Term, guards: tuple[Term, ...]) -> list[tuple[Term, tuple[Term, ...]]]:
    a = t.args
    match t.op:
        case "and" | "implies":
            return [(a[0], guards), (a[1], (*guards, a[0]))]
        case "or":
            return [(a[0], guards), (a[1], (*guards, negate(a[0])))]
        case "if":
            return [(a[0], guards), (a[1], (*guards, a[0])), (a[2], (*guards, negate(a[0])))]
        case "sum":
            bound, low, high, body = a
            # The variable runs over a range: the conditions are asked of any integer in it.
            any_one = var(f"{bound.name}@sum", "int")
            in_range = (app("<=", low, any_one), app("<=", any_one, high))
            return [(low, guards), (high, guards), (substitute(body, {bound: any_one}), (*guards, *in_range))]
    return [(x, guards) for x in a]


def _own_conditions(t: Term, functions: Mapping[str, Function]) -> list[tuple[Term, str]]:
    a = t.args
    match t.op:
        case "/":
            return [(_nonzero(a[1]), "a divisor is not 0")]
        case "div" | "mod":
            return [(_positive(a[1]), f"the divisor of {t.op} is positive")]
        case "lg":
            return [(_at_least_one(a[0]), "lg is asked of something that is at least 1")]
        case "fact":
            return [(of_sort(a[0], "nat"), "fact is asked of a natural number")]
        case "binom":
            return [(of_sort(x, "nat"), "binom is asked of natural numbers") for x in a]
        case "^":
            whole = of_sort(a[1], "int")
            defined = TRUE if _never_negative(a[1]) else app("or", app("<=", ZERO, a[1]), _nonzero(a[0]))
            if a[0].op == "num" and a[0].value:
                defined = TRUE
            return [(whole, "an exponent is an integer"), (defined, "a negative exponent has a base other than 0")]
        case "sum":
            return [(of_sort(x, "int"), "the bounds of a sum are integers") for x in a[1:3]]
        case "call":
            return _arguments(t, functions)
    return []


def _arguments(t: Term, functions: Mapping[str, Function]) -> list[tuple[Term, str]]:
    function = functions.get(t.name)
    if function is None:
        return []
    pairs = list(zip(function.parameters, t.args, strict=True))
    found = [(of_sort(x, p.sort), f"{function.name}({p.name}: {p.sort}) gets what it takes") for p, x in pairs]
    if function.given is not None:
        given = substitute(function.given, {var(p.name, p.sort): x for p, x in pairs})
        found.append((given, f"what {function.name} is defined for"))
    return found


def of_sort(term: Term, sort: Sort) -> Term:
    """The formula: term is a value of the sort. TRUE where that is plain to see.

    What a sheet's function yields is never plain: whoever relies on its type leans on its definition.
    """
    if sort in ("real", "bool"):
        return TRUE
    parts = []
    if not is_integer(term):
        parts.append(app("=", app("floor", term), term))
    if sort == "nat" and not _never_negative(term):
        parts.append(app("<=", ZERO, term))
    return conjunction(parts)


def nonnegative(term: Term) -> Term:
    """The formula 0 <= term, TRUE where that is plain to see."""
    return TRUE if _never_negative(term) else app("<=", ZERO, term)


def declared_sort(term: Term) -> Sort:
    """The narrowest sort that the term has, if functions yield what they are declared to."""
    if term.is_formula:
        return "bool"
    if not is_integer(term, declared=True):
        return "real"
    return "nat" if _never_negative(term, declared=True) else "int"


def is_integer(term: Term, *, declared: bool = False) -> bool:
    """Whether the term is plainly an integer wherever it is defined. With `declared` functions count as of their types.
    """
    work = [term]
    while work:
        t = work.pop()
        match t.op:
            case "num":
                if not isinstance(t.value, int):
                    return False
            case "var" | "call":
                if t.sort not in ("nat", "int") or (t.op == "call" and not declared):
                    return False
            case "+" | "-" | "*" | "neg" | "abs" | "max" | "min" | "mod":
                work.extend(t.args)
            case "if":
                work.extend(t.args[1:])
            case "sum":
                work.append(t.args[3])
            case "^":
                if not _never_negative(t.args[1], declared=declared):
                    return False
                work.append(t.args[0])
            case "div" | "floor" | "ceil" | "lg" | "fact" | "binom":
                pass
            case _:
                return False
    return True


def _never_negative(term: Term, *, declared: bool = False) -> bool:
    """Whether the term is plainly never negative wherever it is defined; `declared` as for `is_integer`."""
    work = [term]
    while work:
        t = work.pop()
        match t.op:
            case "num":
                if t.value < 0:
                    return False
            case "var" | "call":
                if t.sort != "nat" or (t.op == "call" and not declared):
                    return False
            case "+" | "*" | "/" | "div" | "min":
                work.extend(t.args)
            case "max":
                if not any(_never_negative(a, declared=declared) for a in t.args):
                    return False
            case "if":
                work.extend(t.args[1:])
            case "sum":
                work.append(t.args[3])
            case "^" | "floor" | "ceil":
                work.append(t.args[0])
            case "abs" | "lg" | "fact" | "binom" | "mod":
                pass
            case _:
                return False
    return True


def _nonzero(term: Term) -> Term:
    if term.op == "num":
        return TRUE if term.value else FALSE
    if term.op == "^" and term.args[0].op == "num" and term.args[0].value:
        return TRUE
    return app("!=", term, ZERO)


def _positive(term: Term) -> Term:
    if term.op == "num":
        return TRUE if term.value > 0 else FALSE
    if term.op == "^" and term.args[0].op == "num" and term.args[0].value > 0:
        return TRUE
    return app("<", ZERO, term)


def _at_least_one(term: Term) -> Term:
    if term.op == "num":
        return TRUE if term.value >= 1 else FALSE
    return app("<=", ONE, term)
