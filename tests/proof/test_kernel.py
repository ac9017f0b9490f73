"""What the kernel accepts, and above all what it refuses."""

from __future__ import annotations

from fractions import Fraction

import pytest

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import UNITY, Atom, Poly, constant, minus, of_atom, plus, primitive, scaled
from workbench.algebra.terms import FALSE, TRUE, Term, app, call, num, summation, var
from workbench.proof.kernel import (
    ByRemainder,
    Cut,
    Define,
    EquationItem,
    FromAtom,
    Instance,
    Invert,
    Item,
    Known,
    Leaf,
    NotProved,
    OpenPositivePart,
    Proved,
    Rename,
    Shift,
    State,
    SumLaw,
    Then,
    ThreeWays,
    check,
    start,
)
from workbench.proof.laws import Law, built_in_laws
from workbench.proof.search import Search

LAWS = {law.name: law for law in built_in_laws()}
N, K, M, X, Y = var("n", "nat"), var("k", "nat"), var("m", "int"), var("x", "real"), var("y", "real")
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


# ---------------------------------------------------------------- rules, one by one
class Told:
    """A state that was told some facts."""

    def __init__(self, *facts: Term) -> None:
        self.algebra = Algebra()
        self.state = start(self.algebra, facts, FALSE)

    def poly(self, term: Term) -> Poly:
        return self.algebra.normal(term)

    def atom(self, term: Term) -> Atom:
        return next(iter(self.poly(term).atoms))

    def row(self, term: Term) -> int:
        """The row that says something of the term."""
        p = self.poly(term)
        return next(n for n, r in self.state.rows.items() if r.poly in (p, scaled(p, -1)))

    def says(self, state: State, term: Term, relation: str) -> bool:
        p = self.poly(term)
        either = (p, scaled(p, -1)) if relation == "=" else (p,)
        return any(r.poly in either and r.relation == relation for r in state.rows.values())


def test_a_definition_is_put_in_everywhere_with_what_it_rests_on() -> None:
    told = Told(eq(X, app("+", Y, num(2))), lt(num(5), app("*", X, X)), le(X, app("lg", X)))
    state = told.state.define(told.row(app("-", app("-", X, Y), num(2))), told.atom(X))
    assert state.images[told.atom(X)] == told.poly(app("+", Y, num(2)))
    inside = app("+", Y, num(2))
    assert told.says(state, app("-", app("*", inside, inside), num(5)), ">")
    assert told.says(state, app("-", app("lg", inside), inside), ">=")
    assert {r.deps for r in state.rows.values() if r.relation != "="} == {frozenset({0, 1}), frozenset({0, 2})}


def test_a_definition_keeps_what_the_name_was_known_to_be() -> None:
    told = Told(eq(N, app("-", X, num(1))))
    state = told.state.define(told.row(app("+", app("-", N, X), num(1))), told.atom(N))
    assert told.says(state, app("-", X, num(1)), ">=")


def test_a_shift_names_what_lies_above_the_bound() -> None:
    told = Told(le(app("+", M, num(2)), N))
    state = told.state.shift(told.row(app("-", app("-", N, M), num(2))), told.atom(N))
    above = of_atom(told.algebra.fresh_atom(1, "nat"))
    assert state.images[told.atom(N)] == plus(told.poly(app("+", M, num(2))), above)
    assert state.rests[told.atom(N)] == {0}


def test_a_new_name_stands_for_an_expression() -> None:
    told = Told(le(app("+", X, Y), num(3)))
    state = told.state.rename(told.poly(app("-", Y, X)), told.atom(X))
    name = of_atom(told.algebra.fresh_atom(1, "real"))
    assert state.images[told.atom(X)] == minus(told.poly(Y), name)
    whole = told.state.rename(told.poly(app("-", N, M)), told.atom(M))
    assert next(iter(whole.images[told.atom(M)].atoms - told.poly(N).atoms)).integer


def test_an_inverse_cancels() -> None:
    told = Told(app("!=", X, num(0)), le(app("/", Y, X), num(2)))
    state = told.state.invert(told.atom(X))
    assert state.algebra.times(told.poly(X), state.images[told.atom(app("/", num(1), X))]) == UNITY
    assert state.inverted == {told.atom(X): frozenset({0})}


def test_remainders_leave_no_case_out() -> None:
    told = Told(le(num(0), X))
    for left in range(3):
        state = told.state.remainder(told.atom(M), 3, left)
        quotient = of_atom(told.algebra.fresh_atom(1, "int"))
        assert state.images[told.atom(M)] == plus(scaled(quotient, 3), constant(left))
    natural = told.state.remainder(told.atom(N), 2, 1)
    assert natural.images[told.atom(N)].nonneg


def test_a_positive_part_opens_by_its_sign() -> None:
    told = Told(le(app("max", X, num(0)), Y))
    opened = told.state.open_positive_part(told.atom(app("max", X, num(0))))
    above, below = (opened.assume(told.atom(le(num(0), X)), holds) for holds in (True, False))
    assert told.says(above, app("-", Y, X), ">=")
    assert told.says(below, Y, ">=")


def test_what_is_not_equal_lies_above_or_below() -> None:
    told = Told(app("!=", X, Y), le(X, Y))
    state = told.state.three_ways(told.atom(eq(X, Y)))
    assert told.says(state, app("-", X, Y), ">") or told.says(state, app("-", Y, X), ">")


def test_an_instance_says_the_law_of_its_arguments() -> None:
    told = Told(le(num(1), X))
    state = told.state.instance(LAWS["lg below its argument"], [told.poly(X)])
    assert told.says(state, app("-", app("-", X, num(1)), app("lg", X)), ">=")
    silent = Told(le(num(0), X))
    assert len(silent.state.instance(LAWS["lg below its argument"], [silent.poly(X)]).rows) == len(silent.state.rows)


def test_a_law_takes_truth_values_where_it_says_bool() -> None:
    law = Law("chosen", (P, X), P, le(num(0), X), "the sheet", "law chosen")
    told = Told(app("or", P, lt(X, Y)), lt(Y, X))
    for truth in (UNITY, told.poly(lt(Y, X)), told.poly(app("not", lt(X, Y))), told.poly(app("and", P, lt(Y, X)))):
        told.state.instance(law, [truth, told.poly(X)])
    assert told.says(told.state.instance(law, [UNITY, told.poly(Y)]), Y, ">=")
    for number in (constant(2), told.poly(X), constant(Fraction(1, 2)), told.poly(app("+", X, num(1)))):
        with pytest.raises(NotProved, match="truth value"):
            told.state.instance(law, [number, told.poly(X)])


SUM = summation(I, num(1), N, app("*", I, X))


@pytest.mark.parametrize(
    ("kind", "fact", "expected"),
    [
        ("closed", le(num(0), N), app("*", X, app("/", app("*", N, app("+", N, num(1))), num(2)))),
        ("empty", lt(N, num(1)), num(0)),
        ("first", le(num(1), N), app("+", X, summation(I, num(2), N, app("*", I, X)))),
        ("last", le(num(1), N), app("+", app("*", N, X), summation(I, num(1), app("-", N, num(1)), app("*", I, X)))),
    ],
)
def test_laws_of_sums_say_what_a_sum_is(kind: str, fact: Term, expected: Term) -> None:
    told = Told(fact)
    atom = next(a for a in told.poly(SUM).atoms if a.kind == "sum")
    bound = of_atom(told.algebra.bound_atom("#1"))
    half = scaled(plus(told.algebra.times(bound, bound), bound), Fraction(1, 2))
    state = told.state.sum_law(kind, atom, half if kind == "closed" else None)
    (row,) = (r for r in state.rows.values() if r.relation == "=")
    claimed = minus(told.poly(SUM), told.poly(expected))
    assert primitive(claimed)[0] in (primitive(told.algebra.times(told.poly(X), row.poly))[0],
                                     primitive(told.algebra.times(told.poly(X), scaled(row.poly, -1)))[0])


def test_a_case_that_contradicts_itself_is_a_contradiction() -> None:
    told = Told(P)
    told.state.know([Known(scaled(told.poly(app("<", X, Y)), 2), frozenset({0}))])
    assert told.says(told.state, num(1), "=")  # an indicator that would be 1/2
    told.state.know([Known(told.poly(X), frozenset())])
    told.state.know([Known(told.poly(app("*", X, Y)), frozenset())])
    told.state.know([Known(told.poly(app("*", X, Y)), frozenset())])
    assert [k.poly for k in told.state.pending] == [told.poly(X), told.poly(app("*", X, Y))]
    loose = told.algebra.compare(of_atom(told.algebra.bound_atom("#1")), strict=False)
    with pytest.raises(NotProved, match="bound variable"):
        told.state.know([Known(loose, frozenset())])


def test_what_was_known_is_said_again_in_other_words() -> None:
    """even(n) and lg(n) = 3 are known of n; once n is m + 1 they are known of m + 1."""
    value = call("f", "bool", (N,))
    told = Told(value, eq(app("lg", N), num(3)), eq(N, app("+", K, num(1))))
    defined = told.state.define(told.row(app("-", app("lg", N), num(3))), told.atom(app("lg", N)))
    state = defined.define(told.row(app("-", app("-", N, K), num(1))), told.atom(N))
    again = call("f", "bool", (app("+", K, num(1)),))
    assert state.resolved(told.poly(again)) == (UNITY, frozenset({0, 2}))
    assert told.says(state, app("-", app("lg", app("+", K, num(1))), num(3)), "=")


def test_nodes_that_are_none_are_refused() -> None:
    for junk in (None, 3, Then(None, Leaf(()))):  # type: ignore[arg-type]
        with pytest.raises(NotProved, match="no such"):
            check(Algebra(), [le(X, Y)], FALSE, LAWS, junk)  # type: ignore[arg-type]


def test_a_fact_too_large_to_normalize_is_left_out() -> None:
    large = num(3)
    for _ in range(40):
        large = app("*", large, large)
    proof = proves([eq(X, large), le(num(1), Y)], le(num(0), Y))
    assert proof is not None and proof.used == {1}
