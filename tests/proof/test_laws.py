"""Every law that the kernel knows holds for all values tried, edges and side conditions included; and needs what it
asks for.

Terms are read as total functions here, as the normal form reads them: x/0 = 0, lg x = 0 below 1, and so on.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from itertools import product
from math import comb, factorial, floor

import pytest

from workbench.algebra.terms import TRUE, Rational, Term
from workbench.proof.laws import Law, built_in_laws

VALUES: dict[str, tuple[Rational, ...]] = {
    "nat": (0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 15, 16, 17),
    "int": (-5, -3, -2, -1, 0, 1, 2, 3, 4, 7, 8),
    "real": (
        *(-3, -2, -1, 0, 1, 2, 3, 4, 8, 9),
        *(Fraction(-1, 2), Fraction(1, 3), Fraction(1, 2), Fraction(3, 2), Fraction(7, 2)),
    ),
    "bool": (0, 1),
}
ANY = 77  # fact and binom are some natural or other where they are not defined: no law may rely on which
LAWS = {law.name: law for law in built_in_laws()}


def total(t: Term, values: Mapping[str, Rational]) -> Rational:
    """The value, total where the sheet language leaves it open; formulas are 1 or 0."""
    op = t.op
    if op == "num":
        return t.value
    if op == "var":
        return values[t.name]
    if op in ("true", "false"):
        return int(op == "true")
    a = [total(x, values) for x in t.args]
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
            return factorial(int(a[0])) if a[0] >= 0 and a[0] == floor(a[0]) else ANY
        case "binom":
            return comb(int(a[0]), int(a[1])) if min(a) >= 0 and all(x == floor(x) for x in a) else ANY
        case "max":
            return max(a)
        case "min":
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
        case "and":
            return a[0] * a[1]
        case "or":
            return max(a)
        case "not":
            return 1 - a[0]
        case "implies":
            return max(1 - a[0], a[1])
    raise ValueError(op)


def power(base: Rational, exponent: Rational) -> Rational:
    whole = floor(exponent)
    assert whole == exponent
    if base == 0 and whole < 0:
        return 0
    return Fraction(base) ** whole


def assignments(law: Law) -> Iterator[dict[str, Rational]]:
    names = [p.name for p in law.parameters]
    for values in product(*(VALUES[p.sort] for p in law.parameters)):
        yield dict(zip(names, values, strict=True))


@pytest.mark.parametrize("name", LAWS)
def test_law_holds_wherever_its_condition_does(name: str) -> None:
    law = LAWS[name]
    met = 0
    for values in assignments(law):
        if total(law.given, values):
            met += 1
            assert total(law.formula, values), values
    assert met >= 3, "hardly any value meets the condition"


@pytest.mark.parametrize("name", [n for n, law in LAWS.items() if law.given != TRUE])
def test_law_fails_somewhere_without_its_condition(name: str) -> None:
    law = LAWS[name]
    assert any(not total(law.formula, values) for values in assignments(law)), "the condition is not needed"


def test_names_of_laws_are_their_own_and_each_names_its_source() -> None:
    laws = built_in_laws()
    assert len({law.name for law in laws}) == len(laws)
    assert all(law.source for law in laws)
