"""Certificates written to deceive: each would prove something false, were one check of the kernel missing."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

import pytest

from workbench.algebra.normal import Algebra
from workbench.algebra.operators import ReservedName
from workbench.algebra.polynomial import UNITY, Atom, Poly, constant, of_atom, plus, scaled, times
from workbench.algebra.terms import FALSE, Term, app, num, summation, var
from workbench.proof.kernel import (
    ByRemainder,
    Certificate,
    Cut,
    Define,
    EquationItem,
    FromAtom,
    Instance,
    Invert,
    Item,
    Leaf,
    Move,
    NotProved,
    OpenPositivePart,
    Rename,
    Shift,
    State,
    SumLaw,
    Then,
    check,
    moved,
    start,
)
from workbench.proof.laws import built_in_laws

LAWS = {law.name: law for law in built_in_laws()}
N, M, X, Y = var("n", "nat"), var("m", "int"), var("x", "real"), var("y", "real")
I = var("i", "int")  # noqa: E741


def at_least(a: Term, b: Term) -> Term:
    return app(">=", a, b)


def above(a: Term, b: Term) -> Term:
    return app(">", a, b)


def equal(a: Term, b: Term) -> Term:
    return app("=", a, b)


class Deceit:
    """Facts that some values satisfy, and certificates that nothing satisfies them."""

    def __init__(self, *facts: Term) -> None:
        self.algebra = Algebra()
        self.facts = facts
        self.state = start(self.algebra, facts, FALSE)

    def poly(self, term: Term) -> Poly:
        return self.algebra.normal(term)

    def atom(self, term: Term) -> Atom:
        (atom,) = self.poly(term).atoms
        return atom

    def after(self, *moves: Move) -> State:
        state = self.state
        for move in moves:
            state = moved(state, move, LAWS)
        return state

    def refused(self, certificate: Certificate, why: str) -> None:
        with pytest.raises(NotProved, match=why):
            check(self.algebra, self.facts, FALSE, LAWS, certificate)


def row(state: State, poly: Poly) -> int:
    """The number of the row that says something of this very polynomial."""
    return next(n for n, r in state.rows.items() if r.poly == poly)


def then(moves: Sequence[Move], rest: Certificate) -> Certificate:
    for move in reversed(moves):
        rest = Then(move, rest)
    return rest


# ------------------------------------------------------------------ dividing by what may be 0
def test_an_equation_is_not_divided_by_what_may_be_zero() -> None:
    """x*y = 0 and y > 0 hold for x = 0; times 1/x the equation would say y = 0."""
    d = Deceit(equal(app("*", X, Y), num(0)), above(Y, num(0)))
    divided = Poly({((d.atom(X), -1),): -1})
    d.refused(
        Leaf((EquationItem(divided, row(d.state, d.poly(app("*", X, Y)))), Item(1, (row(d.state, d.poly(Y)),)))),
        "only what is not zero",
    )


def test_no_expression_of_a_certificate_divides_by_what_may_be_zero() -> None:
    d = Deceit(at_least(X, num(0)))
    inverse = Poly({((d.atom(X), -1),): 1})
    sign = "products of signs"
    d.refused(Then(Instance(sign, (inverse, scaled(d.poly(X), -1))), Leaf(())), "only what is not zero")
    d.refused(Then(Rename(plus(inverse, d.poly(Y)), d.atom(Y)), Leaf(())), "only what is not zero")
    (whole,) = d.algebra.floor(inverse).atoms
    (part,) = d.algebra.pos(plus(inverse, constant(-1))).atoms
    (at_least_one,) = d.algebra.compare(plus(inverse, constant(-1)), strict=False).atoms
    d.refused(Leaf((Item(1, (FromAtom(whole, "below"),)),)), "only what is not zero")
    d.refused(Then(OpenPositivePart(part), Leaf(())), "only what is not zero")
    d.refused(Cut(at_least_one, Leaf(()), Leaf(())), "only what is not zero")


def test_only_what_is_known_not_to_be_zero_is_inverted() -> None:
    d = Deceit(at_least(X, num(0)), equal(app("*", app("/", num(1), X), Y), Y))
    d.refused(Then(Invert(d.atom(X)), Leaf(())), "only what is not zero")
    d.refused(Then(Invert(d.atom(app("/", num(1), X))), Leaf(())), "nothing to invert|only what is not zero")
    power = Deceit(above(app("^", num(2), N), num(1)))
    power.refused(Then(Invert(power.atom(app("^", num(2), N))), Leaf(())), "nothing to invert")


def test_what_an_inverse_rests_on_is_counted() -> None:
    """x /= 0 lets x be inverted; whatever then mentions 1/x rests on that fact, however it came to be said."""
    facts = (app("!=", X, num(0)), equal(app("*", X, Y), num(0)), above(Y, num(0)))
    d = Deceit(*facts)
    state = d.after(Invert(d.atom(X)))
    divided = Poly({((d.atom(X), -1),): -1})
    leaf = Leaf((EquationItem(divided, row(state, d.poly(app("*", X, Y)))), Item(1, (row(state, d.poly(Y)),))))
    assert check(d.algebra, facts, FALSE, LAWS, Then(Invert(d.atom(X)), leaf)).used == {0, 1, 2}
    later = moved(state, Instance("square", (Poly({((d.atom(X), -1),): 1}),)), LAWS)
    assert all(r.deps == {0} for n, r in later.rows.items() if n not in state.rows)


# ------------------------------------------------------------------ names that moves make
def test_a_fresh_name_is_not_spoken_of_before_it_is_made() -> None:
    """With ~1 in the expression that ~1 is to name, x would come out as ~1 - ~1 = 0."""
    d = Deceit(above(X, num(0)))
    early = of_atom(d.algebra.fresh_atom(1, "real"))
    d.refused(Then(Rename(plus(d.poly(X), early), d.atom(X)), Leaf(())), "not made yet")
    n = Deceit(at_least(N, num(1)))
    soon = of_atom(n.algebra.fresh_atom(1, "nat"))
    (sign,) = n.algebra.compare(plus(n.poly(N), scaled(soon, -1)), strict=False).atoms
    n.refused(Cut(sign, Leaf(()), Leaf(())), "not made yet")
    n.refused(Leaf((Item(1, (FromAtom(n.algebra.fresh_atom(1, "nat"), "nonneg"),)),)), "not made yet")


def test_fresh_names_are_all_different_on_a_branch() -> None:
    d = Deceit(at_least(M, num(2)), at_least(N, num(1)))
    m, n = d.atom(M), d.atom(N)
    state = d.after(Shift(row(d.state, d.poly(app("-", M, num(2)))), m))
    state = moved(state, Shift(row(state, d.poly(app("-", N, num(1)))), n), LAWS)
    state = moved(state, Rename(d.poly(app("+", X, Y)), d.atom(X)), LAWS)
    made = {a.key for image in state.images.values() for a in image.deep if a.newest}
    assert len(made) == 3
    assert state.newest == 3


@pytest.mark.parametrize("name", ["#1", "~1", "#shifted", "~"])
def test_no_formula_has_a_name_that_the_kernel_gives(name: str) -> None:
    fact = at_least(var(name, "int"), num(3))
    with pytest.raises(ReservedName):
        check(Algebra(), [fact], FALSE, LAWS, Leaf(()))
    with pytest.raises(ReservedName):
        check(Algebra(), [at_least(summation(I, num(1), N, app("*", I, var(name, "int"))), N)], FALSE, LAWS, Leaf(()))


def test_a_name_with_a_sign_of_its_own_is_a_name_like_others() -> None:
    """`@1` is a name that obligations may have: no fresh name equals it."""
    facts = (equal(var("@1", "nat"), num(7)), at_least(M, num(0)))
    d = Deceit(*facts)
    state = d.after(Shift(row(d.state, d.poly(M)), d.atom(M)))
    assert state.images[d.atom(M)].atoms.isdisjoint(d.poly(var("@1", "nat")).atoms)


# ------------------------------------------------------------------ atoms that lie
def test_atoms_that_the_algebra_did_not_make_are_refused() -> None:
    d = Deceit(at_least(num(-3), X))
    liar = Atom("var", ("x", "real"), (), integer=True, nonneg=True, positive=True)
    assert liar.key == d.atom(X).key
    at_most = row(d.state, plus(scaled(d.poly(X), -1), constant(-3)))
    d.refused(Leaf((Item(1, (at_most,)), Item(1, (FromAtom(liar, "nonneg"),)))), "did not make")
    d.refused(ByRemainder(liar, (Leaf(()), Leaf(()))), "did not make")
    e = Deceit(equal(X, num(-3)))
    e.refused(Then(Define(row(e.state, e.poly(app("+", X, num(3)))), liar), Leaf(())), "did not make|alone")
    s = Deceit(at_least(X, num(1)))
    s.refused(Then(Shift(row(s.state, s.poly(app("-", X, num(1)))), liar), Leaf(())), "did not make|alone")


# ------------------------------------------------------------------ sums
def test_a_bound_variable_is_not_caught_by_a_sum_inside() -> None:
    """4*i written as a sum over another name: F(i) - F(i - 1) must see that it is 4, whatever the name."""
    for inner in ("#shifted", "#2", "#1"):
        algebra = Algebra()
        bound = of_atom(algebra.bound_atom("#1"))
        four_i = algebra.sum(inner, constant(0), constant(3), bound)
        total = summation(I, num(1), N, app("-", app("*", num(4), I), num(6)))
        fact = equal(total, num(0))
        for atom in sorted(a for a in algebra.normal(fact).deep if a.kind == "sum"):
            for body in (four_i, plus(four_i, scaled(bound, -4))):
                with pytest.raises(NotProved):
                    check(algebra, [fact], FALSE, LAWS, Then(SumLaw("closed", atom, body), Leaf(())))


def test_a_closed_form_needs_the_summand_as_its_difference() -> None:
    d = Deceit(equal(summation(I, num(1), N, I), N))
    bound = of_atom(d.algebra.bound_atom("#1"))
    atom = next(a for a in d.poly(summation(I, num(1), N, I)).atoms if a.kind == "sum")
    d.refused(Then(SumLaw("closed", atom, times(bound, bound)), Leaf(())), "antidifference")
    d.refused(Then(SumLaw("closed", atom), Leaf(())), "antidifference")
    d.refused(Then(SumLaw("closed", atom, of_atom(d.algebra.bound_atom("#2"))), Leaf(())), "bound variable")
    d.refused(Then(SumLaw("closed", d.atom(N), bound), Leaf(())), "not a sum")


def test_a_sum_with_a_fractional_bound_has_no_law() -> None:
    d = Deceit(equal(summation(I, num(1), X, I), X))
    atom = next(a for a in d.poly(summation(I, num(1), X, I)).atoms if a.kind == "sum")
    for kind in ("closed", "empty", "first", "last"):
        d.refused(Then(SumLaw(kind, atom), Leaf(())), "integer bounds")


def test_a_closed_form_says_nothing_where_the_range_is_turned_round() -> None:
    """Below an empty range the closed form is not 0 any more: hi >= lo - 1 stands in the way."""
    d = Deceit(equal(summation(I, num(0), M, num(1)), num(0)), equal(M, num(-5)))
    atom = next(a for a in d.poly(summation(I, num(0), M, num(1))).atoms if a.kind == "sum")
    state = d.after(SumLaw("closed", atom, of_atom(d.algebra.bound_atom("#1"))))
    assert len(state.rows) == len(d.state.rows)


# ------------------------------------------------------------------ adding up
def test_only_exact_positive_numbers_multiply_facts() -> None:
    d = Deceit(at_least(X, num(1)))
    fact = row(d.state, plus(d.poly(X), constant(-1)))
    for factor in (0, -1, Fraction(-1, 2), 0.5, float("nan"), "1"):
        d.refused(Leaf((Item(factor, (fact,)),)), "positive number")  # type: ignore[arg-type]


def test_an_equation_is_multiplied_by_nothing_with_a_loose_variable() -> None:
    d = Deceit(equal(X, num(1)))
    fact = row(d.state, plus(d.poly(X), constant(-1)))
    d.refused(Leaf((EquationItem(of_atom(d.algebra.bound_atom("#1")), fact),)), "bound variable")


def test_a_product_with_a_weak_fact_is_not_strict() -> None:
    """x > 0 and y >= 0 make x*y >= 0 and no more: with x*y <= 0 there is no contradiction."""
    d = Deceit(above(X, num(0)), at_least(Y, num(0)), at_least(num(0), app("*", X, Y)))
    x, y = row(d.state, d.poly(X)), row(d.state, d.poly(Y))
    xy = row(d.state, scaled(d.poly(app("*", X, Y)), -1))
    d.refused(Leaf((Item(1, (x, y)), Item(1, (xy,)))), "do not add up")
    d.refused(Leaf((Item(1, (x, x)), Item(1, ()))), "do not add up")
    assert UNITY.constant == 1


# ------------------------------------------------------------------ names and their sorts
def test_a_shift_needs_an_integer_bound_of_an_integer() -> None:
    d = Deceit(at_least(M, X), at_least(X, num(0)), at_least(app("*", num(2), M), N))
    m, x = d.atom(M), d.atom(X)
    d.refused(Then(Shift(row(d.state, d.poly(app("-", M, X))), m), Leaf(())), "integer bound")
    d.refused(Then(Shift(row(d.state, d.poly(X)), x), Leaf(())), "integer name")
    d.refused(Then(Shift(row(d.state, d.poly(app("-", app("*", num(2), M), N))), m), Leaf(())), "alone, once")


def test_a_definition_does_not_hold_its_own_atom() -> None:
    """x = lg(x) + 1 does not say what x is."""
    d = Deceit(equal(N, app("+", app("lg", N), num(1))), equal(app("*", X, X), X))
    equation = next(n for n, r in d.state.rows.items() if r.relation == "=" and d.atom(N) in r.poly.deep)
    square = next(n for n, r in d.state.rows.items() if r.relation == "=" and d.atom(X) in r.poly.deep)
    d.refused(Then(Define(equation, d.atom(N)), Leaf(())), "alone in one term")
    d.refused(Then(Define(square, d.atom(X)), Leaf(())), "alone in one term")


def test_integers_only_go_where_a_law_says_integer() -> None:
    d = Deceit(at_least(X, num(0)))
    half = constant(Fraction(1, 2))
    for args in ((d.poly(X), half), (d.poly(X), d.poly(X))):
        d.refused(Then(Instance("power step", args), Leaf(())), "needs an integer")
    d.refused(Then(Instance("power at least one", (d.poly(X),)), Leaf(())), "parameters")


def test_two_sorts_of_one_name_are_two_names() -> None:
    """That x is a natural says nothing of a real x."""
    d = Deceit(at_least(num(-1), X), equal(var("x", "nat"), num(2)))
    at_most = row(d.state, plus(scaled(d.poly(X), -1), constant(-1)))
    nat = d.atom(var("x", "nat"))
    d.refused(Leaf((Item(1, (at_most,)), Item(1, (FromAtom(nat, "nonneg"),)))), "do not add up")
    with pytest.raises(ReservedName):
        check(Algebra(), [equal(summation(I, num(1), N, var("i", "real")), N)], FALSE, LAWS, Leaf(()))
