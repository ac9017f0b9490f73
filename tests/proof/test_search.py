"""The search: what it proves of one table of obligations, what it never proves, and that it stops in time."""

from __future__ import annotations

import re
from collections.abc import Callable
from time import thread_time

import pytest

from tests.proof.obligations import Obligation, false_ones, functions, laws, term, true_ones
from tests.proof.reading import falsified
from workbench.algebra.normal import Algebra
from workbench.algebra.terms import TRUE, Term, app, num, summation, var
from workbench.proof.laws import Law
from workbench.proof.search import Attempt, Hints, Search

ALGEBRA = Algebra()  # one serves all, as one serves a sheet


def attempt(o: Obligation, seconds: float = 2.0) -> Attempt:
    return Search(ALGEBRA, laws(), functions(), seconds=seconds).prove(o.facts, o.goal)


@pytest.mark.parametrize("obligation", true_ones(), ids=lambda o: o.name)
def test_true_obligation_is_proved(obligation: Obligation) -> None:
    found = attempt(obligation)
    assert found.proved is not None, found.why
    kept = [f for i, f in enumerate(obligation.facts) if i in found.proved.used]
    assert falsified(kept, obligation.goal, 12, functions=functions()) is None, "a fact is used and not counted"


@pytest.mark.parametrize("obligation", false_ones(), ids=lambda o: o.name)
def test_false_obligation_is_not_proved(obligation: Obligation) -> None:
    assert falsified(obligation.facts, obligation.goal, 5_000, functions=functions()) is not None
    found = attempt(obligation, seconds=0.2)
    assert found.proved is None
    assert found.why


def test_table_has_the_size_that_it_is_known_for() -> None:
    assert len({o.name for o in true_ones()}) == len(true_ones()) >= 300
    assert len({o.name for o in false_ones()}) == len(false_ones()) >= 50


# ------------------------------------------------------------------ hostile obligations
REALS = [var(c, "real") for c in "abcdefgh"]
NATURALS = [var(c, "nat") for c in "klmnpq"]
I = var("i", "int")  # noqa: E741


def added(parts: list[Term]) -> Term:
    total = parts[0]
    for part in parts[1:]:
        total = app("+", total, part)
    return total


def over(step: Callable[[Term], Term], begin: Term, times: int) -> Term:
    """step(step(…(begin)))"""
    for _ in range(times):
        begin = step(begin)
    return begin


def _peaks(length: int) -> Term:
    peak = REALS[0]
    for j in range(length):
        peak = app("max", peak, app("+", REALS[1], app("*", REALS[2 + j % 5], num(j + 1))))
    return peak


X, N = REALS[0], NATURALS[0]
HOSTILE: dict[str, tuple[list[Term], Term]] = {
    "high powers of long sums": (
        [app("<=", app("^", added(REALS[j % 3 :]), num(8)), app("^", added(REALS), num(j % 5 + 2))) for j in range(40)],
        app("<=", app("^", added(REALS), num(6)), app("^", added(REALS[1:]), num(7))),
    ),
    "many facts with products": (
        [
            app("<=", app("*", NATURALS[j % 6], NATURALS[(j + 1) % 6]),
                app("+", app("*", num(j), REALS[j % 8]), app("^", num(2), NATURALS[j % 6])))
            for j in range(120)
        ],
        app("<=", app("*", X, REALS[1]), app("floor", app("/", REALS[2], N))),
    ),
    "a floor and a logarithm of the same, forty times": (
        [],
        app("=", over(lambda t: app("floor", app("+", app("/", t, num(2)), app("lg", t))), N, 40), num(3)),
    ),
    "a number squared sixty times": ([], app("=", over(lambda t: app("*", t, t), num(3), 60), N)),
    "a product squared sixty times": ([], app("=", over(lambda t: app("*", t, t), app("*", num(3), N), 60), N)),
    "a sum squared sixty times": ([], app("=", over(lambda t: app("+", app("*", t, t), X), REALS[1], 60), N)),
    "fifty powers of powers": ([], app("<=", over(lambda t: app("^", num(2), t), N, 50), NATURALS[1])),
    "three hundred floors of products": ([], app("<=", over(lambda t: app("floor", app("*", t, X)), REALS[1], 300), N)),
    "ninety floors of products": ([], app("<=", over(lambda t: app("floor", app("*", t, X)), REALS[1], 90), N)),
    "sixty nested sums": (
        [], app("<=", over(lambda t: summation(I, num(0), N, app("+", t, I)), REALS[1], 60), NATURALS[1]),
    ),
    "a peak of thirty": ([], app("<=", _peaks(30), app("+", X, REALS[1]))),
    "forty conditions on products": (
        [],
        app("<=", added([
            Term("if", (app("<", REALS[j % 8], NATURALS[j % 6]), app("*", REALS[j % 7], NATURALS[(j + 1) % 6]),
                        app("*", REALS[(j + 2) % 8], REALS[j % 3])))
            for j in range(40)
        ]), X),
    ),
    "a product of conditions on itself": (
        [], app("<=", over(lambda t: app("*", t, Term("if", (app("<", X, t), REALS[1], REALS[2]))), REALS[3], 12), X),
    ),
    "forty disjunctions": (
        [app("or", app("<", REALS[j % 8], NATURALS[j % 6]), app("<", REALS[(j + 3) % 8], N)) for j in range(40)],
        app("<", X, REALS[1]),
    ),
    "binomials of binomials": (
        [], app("<=", over(lambda t: app("binom", app("+", t, NATURALS[1]), N), NATURALS[2], 12), NATURALS[1]),
    ),
    "factorials of factorials": ([], app("<=", over(lambda t: app("fact", t), N, 12), NATURALS[1])),
    "quotients of quotients": (
        [app("!=", app("+", REALS[j], NATURALS[j % 6]), num(0)) for j in range(7)],
        app("=", over(lambda t: app("+", app("/", num(1), t), REALS[1]), X, 25), app("/", added(REALS), N)),
    ),
    "nine to a large power": ([], app("<=", app("^", num(9), num(387_420_489)), N)),
    "a name to a large power": ([app("=", X, app("+", REALS[1], num(1)))], app("=", app("^", X, num(10**9)), N)),
}


@pytest.mark.parametrize("name", HOSTILE)
def test_search_stops_in_time(name: str) -> None:
    facts, goal = HOSTILE[name]
    began = thread_time()
    found = Search(Algebra(), laws(), functions(), seconds=0.5).prove(facts, goal)
    assert thread_time() - began < 1.0
    assert found.proved is None and found.why


def test_a_law_too_large_to_match_is_passed_over() -> None:
    large = over(lambda t: app("*", t, t), num(3), 60)
    law = Law("large", (N,), TRUE, app("<=", N, large), "a sheet", "law large")
    search = Search(Algebra(), {**laws(), "large": law}, functions(), seconds=0.5)
    assert search.prove([], app("<=", num(0), app("lg", N))).proved is not None
    assert search.prove([], app("<=", app("lg", N), num(7))).proved is None


def test_search_stops_when_it_is_cancelled() -> None:
    facts, goal = HOSTILE["many facts with products"]
    asked = 0

    def cancelled() -> bool:
        nonlocal asked
        asked += 1
        return asked > 20

    began = thread_time()
    found = Search(Algebra(), laws(), functions(), seconds=60, cancelled=cancelled).prove(facts, goal)
    assert found.proved is None
    assert thread_time() - began < 1.0


# ------------------------------------------------------------------ hints, residues
SORTS = {"n": "nat", "x": "real", "y": "real", "p": "bool"}


def formula(text: str) -> Term:
    return term(text, SORTS)  # type: ignore[arg-type]


def test_a_law_that_is_named_is_used_where_the_search_would_not_think_of_it() -> None:
    search = Search(ALGEBRA, laws(), functions(), seconds=0.5)
    goal = formula("moves(n) + moves(n + 3) >= 0")
    using = Hints(using=(("moves closed", (formula("n + 3"),)),))
    assert search.prove([], goal, using).proved is not None
    wrong = Hints(using=(("square", (formula("x"), formula("y"))),))
    assert search.prove([], formula("x <= y"), wrong).proved is None


def test_cases_that_are_named_are_told_apart_first() -> None:
    search = Search(ALGEBRA, laws(), functions(), seconds=1)
    goal = formula("(if x < y and p then 1 else 2) <= 2")
    found = search.prove([], goal, Hints(cases=(formula("p or x < y"), formula("x = x"))))
    assert found.proved is not None


def test_residue_is_what_an_open_goal_lacks() -> None:
    search = Search(ALGEBRA, laws(), functions(), seconds=1)
    facts, goal = [formula("x = y + 2")], formula("p implies x = y + 5")
    found = search.prove(facts, goal)
    assert found.proved is None and found.residue == search.residue(facts, goal) == ALGEBRA.normal(num(-3))
    assert search.residue(facts, formula("p")) is None
    too_large = app("=", over(lambda t: app("*", t, t), num(3), 60), N)
    assert search.residue([], too_large) is None


def test_names_of_middle_states_are_put_out_of_the_way_first() -> None:
    search = Search(ALGEBRA, laws(), functions(), seconds=1)
    residue = search.residue([formula("y = x + 1")], formula("y = n"), frozenset({"y"}))
    assert residue is not None and not re.search("'y'", residue.key)
