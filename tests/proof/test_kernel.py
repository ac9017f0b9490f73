"""What the kernel accepts, and above all what it refuses."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import product

import pytest

from tests.proof.test_laws import total
from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import UNITY, Poly, constant, minus, of_atom, plus, scaled
from workbench.algebra.terms import FALSE, TRUE, Rational, Term, app, call, num, summation, var
from workbench.proof.kernel import (
    ByRemainder,
    Cut,
    Define,
    EquationItem,
    FromAtom,
    Instance,
    Invert,
    Item,
    Leaf,
    NotProved,
    OpenPositivePart,
    Proved,
    Rename,
    Shift,
    SumLaw,
    Then,
    ThreeWays,
    check,
    start,
)
from workbench.proof.laws import Law, built_in_laws
from workbench.proof.search import Search

LAWS = {law.name: law for law in built_in_laws()}
N, M, X, Y = var("n", "nat"), var("m", "int"), var("x", "real"), var("y", "real")
P = var("p", "bool")
I = var("i", "int")  # noqa: E741


def le(a: Term, b: Term) -> Term:
    return app("<=", a, b)


def lt(a: Term, b: Term) -> Term:
    return app("<", a, b)


def eq(a: Term, b: Term) -> Term:
    return app("=", a, b)


def proves(facts: list[Term], goal: Term, algebra: Algebra | None = None) -> Proved | None:
    return Search(algebra or Algebra(), LAWS, {}, seconds=2).prove(facts, goal).proved


# ---------------------------------------------------------------- what must hold
TRUTHS: list[tuple[list[Term], Term]] = [
    ([], le(num(0), N)),
    ([le(X, Y), le(Y, num(3))], le(X, num(3))),
    ([lt(M, N)], le(app("+", M, num(1)), N)),
    ([eq(X, Y)], eq(app("*", X, X), app("*", Y, Y))),
    ([], le(num(0), app("*", X, X))),
    ([P], P),
    ([app("or", P, lt(X, Y)), app("not", P)], lt(X, Y)),
    ([app("!=", X, num(0))], eq(app("*", X, app("/", num(1), X)), num(1))),
    ([], eq(app("max", X, Y), app("max", Y, X))),
    ([], le(app("floor", X), X)),
    ([eq(app("mod", N, num(2)), num(1))], eq(app("*", num(2), app("div", N, num(2))), app("-", N, num(1)))),
    ([], eq(summation(I, num(1), N, I), app("/", app("*", N, app("+", N, num(1))), num(2)))),
    ([le(num(2), N)], eq(app("lg", app("div", N, num(2))), app("-", app("lg", N), num(1)))),
]


@pytest.mark.parametrize(("facts", "goal"), TRUTHS)
def test_what_is_true_is_proved(facts: list[Term], goal: Term) -> None:
    proof = proves(facts, goal)
    assert proof is not None
    assert proof.goal == goal and proof.facts == tuple(facts)


# ---------------------------------------------------------------- what must not
FALSEHOODS: list[tuple[list[Term], Term]] = [
    ([], FALSE),
    ([], le(num(1), N)),
    ([lt(X, Y)], le(app("+", X, num(1)), Y)),
    ([], eq(app("*", X, app("/", num(1), X)), num(1))),
    ([eq(app("*", X, Y), app("*", X, M))], eq(Y, M)),
    ([], eq(app("lg", app("*", num(2), N)), app("+", app("lg", N), num(1)))),
    ([], le(num(1), app("^", num(2), M))),
    ([app("not", eq(X, Y))], lt(X, Y)),
    ([], le(app("*", N, N), app("^", num(2), N))),
    ([], eq(app("floor", app("+", X, Y)), app("+", app("floor", X), app("floor", Y)))),
    ([], eq(app("div", app("*", X, num(2)), num(2)), X)),
    ([le(M, N)], eq(summation(var("i", "int"), M, num(0), num(1)), app("-", num(1), M))),
    ([], eq(app("^", Y, app("+", M, num(1))), app("*", Y, app("^", Y, M)))),
]


@pytest.mark.parametrize(("facts", "goal"), FALSEHOODS)
def test_what_is_false_is_not_proved(facts: list[Term], goal: Term) -> None:
    assert proves(facts, goal) is None


def test_only_the_kernel_makes_proofs() -> None:
    with pytest.raises(NotProved):
        Proved(object(), (), FALSE, frozenset(), frozenset(), Leaf(()))


def test_an_empty_leaf_proves_nothing_but_what_is_plain() -> None:
    with pytest.raises(NotProved):
        check(Algebra(), [], le(X, Y), LAWS, Leaf(()))


class Case:
    """A state to abuse: x <= y, m >= 2, x = 2*y, and a goal."""

    def __init__(self) -> None:
        self.algebra = Algebra()
        self.facts = [le(X, Y), le(num(2), M), eq(X, app("*", num(2), Y))]
        self.state = start(self.algebra, self.facts, FALSE)
        self.x = self.algebra.variable_atom("x", "real")
        self.m = self.algebra.variable_atom("m", "int")

    def refused(self, certificate: object) -> None:
        with pytest.raises(NotProved):
            check(self.algebra, self.facts, FALSE, LAWS, certificate)  # type: ignore[arg-type]

    def row(self, relation: str) -> int:
        return next(n for n, r in self.state.rows.items() if r.relation == relation)


def test_rows_cannot_be_taken_a_negative_number_of_times_or_made_up() -> None:
    case = Case()
    case.refused(Leaf((Item(-1, (case.row(">="),)),)))
    case.refused(Leaf((Item(0, (case.row(">="),)),)))
    case.refused(Leaf((Item(1, (999,)),)))
    case.refused(Leaf((Item(1, (case.row("="),)),)))
    case.refused(Leaf((EquationItem(UNITY, case.row(">=")),)))
    case.refused(Leaf((Item(Fraction(1, 2), ()),)))


def test_facts_about_atoms_cannot_be_made_up() -> None:
    case = Case()
    for which in ("nonneg", "one", "below", "above", "no such"):
        case.refused(Leaf((Item(1, (FromAtom(case.x, which),)),)))
    foreign = Algebra().variable_atom("x", "nat")
    case.refused(Leaf((Item(1, (FromAtom(foreign, "nonneg"),)),)))


def test_moves_are_refused_where_they_do_not_apply() -> None:
    case = Case()
    bound, equation = case.row(">="), case.row("=")
    rest = Leaf(())
    truth = case.algebra.normal(P)
    (p,) = truth.atoms
    for move in (
        Define(bound, case.x),
        Define(999, case.x),
        Define(equation, case.m),
        Shift(bound, case.x),
        Shift(equation, case.m),
        Rename(scaled(of_atom(case.x), 2), case.x),
        Rename(of_atom(case.m), case.x),
        Invert(case.x),
        OpenPositivePart(case.x),
        ThreeWays(p),
        Instance("no such law", ()),
        Instance("square", ()),
        Instance("power at least one", (of_atom(case.m), of_atom(case.x))),
        SumLaw("closed", case.x),
    ):
        case.refused(Then(move, rest))
    case.refused(Cut(case.x, rest, rest))
    case.refused(ByRemainder(case.x, (rest, rest)))
    case.refused(ByRemainder(case.m, ()))


def test_a_name_that_a_certificate_has_not_made_cannot_be_spoken_of() -> None:
    case = Case()
    unborn = case.algebra.fresh_atom(1, "nat")
    case.refused(Then(Instance("square", (of_atom(unborn),)), Leaf(())))
    case.refused(Leaf((Item(1, (FromAtom(unborn, "nonneg"),)),)))


def test_bound_variables_do_not_leave_their_sums() -> None:
    algebra = Algebra()
    i = var("i", "int")
    facts = [le(num(0), summation(i, num(1), N, app("*", i, X)))]
    poly = algebra.normal(facts[0].args[1])
    loose = algebra.bound_atom("#1")
    assert loose in poly.deep
    for move in (Instance("square", (of_atom(loose),)), Rename(of_atom(loose), loose), Invert(loose)):
        with pytest.raises(NotProved):
            check(algebra, facts, FALSE, LAWS, Then(move, Leaf(())))


def test_a_wrong_antidifference_is_refused() -> None:
    algebra = Algebra()
    i = var("i", "int")
    total_ = summation(i, num(1), N, i)
    (atom,) = algebra.normal(total_).atoms
    wrong = of_atom(algebra.bound_atom("#1"), 2)
    with pytest.raises(NotProved):
        check(algebra, [le(total_, N)], FALSE, LAWS, Then(SumLaw("closed", atom, wrong), Leaf(())))
    with pytest.raises(NotProved):
        check(algebra, [le(total_, N)], FALSE, LAWS, Then(SumLaw("no such law", atom), Leaf(())))


def test_a_users_law_and_a_function_are_leaned_on_by_name() -> None:
    value = call("f", "nat", (N,))
    law = Law("small", (N,), TRUE, le(value, num(3)), "the sheet", "law small")
    algebra = Algebra()
    found = Search(algebra, {**LAWS, "small": law}, {}, seconds=2).prove([], le(value, num(4))).proved
    assert found is not None and found.laws == frozenset({"law small"})
    assert Search(Algebra(), LAWS, {}, seconds=0.5).prove([], le(value, num(4))).proved is None


# ---------------------------------------------------------------- what a proof rests on
def formulas(rng: random.Random, depth: int) -> Term:
    """A small random formula over n, m, x, y and p."""
    if depth == 0 or rng.random() < 0.5:
        if rng.random() < 0.1:
            return P
        return app(rng.choice(("<=", "<", "=", "!=")), numbers(rng, 2), numbers(rng, 2))
    op = rng.choice(("and", "or", "implies", "not"))
    return app(op, *(formulas(rng, depth - 1) for _ in range(1 if op == "not" else 2)))


def numbers(rng: random.Random, depth: int) -> Term:
    if depth == 0 or rng.random() < 0.3:
        return rng.choice((N, N, M, X, Y, num(rng.randint(-2, 3)), num(Fraction(1, 2))))
    op = rng.choice(("+", "-", "*", "max", "min", "/", "floor", "abs", "div", "lg", "^"))
    if op in ("floor", "abs", "lg"):
        return app(op, numbers(rng, depth - 1))
    if op == "^":
        return app(op, num(2), rng.choice((N, M)))
    return app(op, numbers(rng, depth - 1), numbers(rng, depth - 1))


HALVES: tuple[tuple[Rational, ...], tuple[Rational, ...]] = ((0, Fraction(-3, 2), 2), (1, Fraction(1, 2), -1))
GRID: list[dict[str, Rational]] = [
    {"n": n, "m": m, "x": x, "y": y, "p": p}
    for n, m, x, y, p in product((0, 1, 2, 5), (-2, 0, 1, 3), *HALVES, (0, 1))
]


def holds_everywhere(facts: list[Term], goal: Term) -> bool:
    return all(total(goal, v) for v in GRID if all(total(f, v) for f in facts))


def test_nothing_is_proved_that_evaluation_falsifies() -> None:
    """Small random facts and goals, by the total reading that the normal form has."""
    rng = random.Random(5)
    proved = 0
    for _ in range(250):
        facts = [formulas(rng, 1) for _ in range(rng.randint(0, 3))]
        goal = formulas(rng, 1)
        algebra = Algebra()
        proof = Search(algebra, LAWS, {}, seconds=0.15).prove(facts, goal).proved
        if proof is None:
            continue
        proved += 1
        assert holds_everywhere(facts, goal), (facts, goal)
        kept = [f for i, f in enumerate(facts) if i in proof.used]
        assert holds_everywhere(kept, goal), ("a fact is used and not counted", facts, goal, proof.used)
    assert proved >= 20


def test_the_normal_form_keeps_values() -> None:
    rng = random.Random(6)
    for _ in range(400):
        formula = formulas(rng, 2)
        poly = Algebra().normal(formula)
        if poly.constant is not None:
            assert all(total(formula, v) == poly.constant for v in GRID), formula


def test_polynomials_that_are_equal_differ_by_nothing() -> None:
    algebra = Algebra()
    p: Poly = plus(algebra.normal(X), constant(2))
    assert minus(p, p).terms == {}
