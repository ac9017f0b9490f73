"""Side conditions are asked for wherever they do not hold at sight, under what guards them."""

from __future__ import annotations

import pytest

from workbench.algebra.formulas import show
from workbench.algebra.terms import Term, app, call, num, summation, var
from workbench.errors import Span
from workbench.program.domains import domain_conditions, is_integer, nonnegative, of_sort
from workbench.program.priced import Function, Variable

N, X, J = var("n", "nat"), var("x", "real"), var("i", "int")
HALF = Function("half", (Variable("n", "nat"),), "nat", None, N, app("<", num(0), N), Span(0, 0, 1, 1), "")


def asked(term: Term) -> list[str]:
    return [show(c.formula) for c in domain_conditions(term, {"half": HALF})]


@pytest.mark.parametrize(
    ("term", "conditions"),
    [
        (app("/", X, num(2)), []),
        (app("/", X, num(0)), ["false"]),
        (app("/", X, J), ["i != 0"]),
        (app("div", X, N), ["0 < n"]),
        (app("mod", X, num(-2)), ["false"]),
        (app("lg", N), ["1 <= n"]),
        (app("lg", num(8)), []),
        (app("fact", J), ["0 <= i"]),
        (app("fact", X), ["floor(x) = x and 0 <= x"]),
        (app("binom", N, J), ["0 <= i"]),
        (app("^", num(2), J), []),
        (app("^", num(2), X), ["floor(x) = x"]),
        (app("^", X, J), ["0 <= i or x != 0"]),
        (app("^", X, N), []),
        (app("/", X, app("^", num(2), J)), []),
        (call("half", "nat", (J,)), ["0 <= i", "0 < i"]),
    ],
)
def test_each_operator_asks_for_its_own_domain(term: Term, conditions: list[str]) -> None:
    assert asked(term) == conditions


def test_connectives_guard_what_follows_them() -> None:
    inside = app("<", app("lg", N), N)
    assert asked(app("implies", app(">", N, num(0)), inside)) == ["n > 0 implies 1 <= n"]
    assert asked(app("or", app("=", N, num(0)), inside)) == ["not n = 0 implies 1 <= n"]
    assert asked(app("and", inside, app(">", N, num(0)))) == ["1 <= n"]
    chosen = Term("if", (app("=", N, num(0)), num(0), app("lg", N)))
    assert asked(chosen) == ["not n = 0 implies 1 <= n"]


def test_a_sum_asks_for_every_value_in_its_range() -> None:
    j = var("j", "int")
    term = summation(j, num(0), N, app("/", X, j))
    assert asked(term) == ["0 <= j@sum and j@sum <= n implies j@sum != 0"]


def test_what_is_plainly_of_its_sort_is_not_asked() -> None:
    assert of_sort(app("+", N, num(1)), "nat").op == "true"
    assert of_sort(app("-", N, num(1)), "int").op == "true"
    assert show(of_sort(app("-", N, num(1)), "nat")) == "0 <= n - 1"
    assert show(of_sort(app("/", N, num(2)), "int")) == "floor(n/2) = n/2"
    assert nonnegative(app("*", N, app("abs", X))).op == "true"
    assert not is_integer(app("^", N, J))
