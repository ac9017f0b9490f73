"""A goal's parts hold together exactly where it does."""

from __future__ import annotations

from itertools import product

from workbench.algebra.evaluate import evaluate
from workbench.algebra.terms import Term, app, var
from workbench.program.owing import goal_parts

A, B, C, D = (var(n, "int") for n in "abcd")
GOALS = [
    app("<=", app("max", app("max", A, B), C), D),
    app(">=", D, app("max", A, B)),
    app("<", A, app("min", B, C)),
    app(">", app("min", A, B), C),
    app("and", app("<=", A, B), app("=", C, D)),
    app("implies", app("<=", A, B), app("<=", app("max", B, C), D)),
    app("<=", A, app("max", B, C)),
    app("=", app("max", A, B), C),
]


def test_parts_of_a_goal_are_equivalent_to_it() -> None:
    for goal in GOALS:
        parts: list[Term] = goal_parts(goal)
        for a, b, c, d in product(range(-1, 3), repeat=4):
            values = {"a": a, "b": b, "c": c, "d": d}
            assert evaluate(goal, values) == all(evaluate(p, values) for p in parts)


def test_maxima_are_taken_apart_only_where_that_is_right() -> None:
    assert [len(goal_parts(g)) for g in GOALS] == [3, 2, 2, 2, 2, 2, 1, 1]
