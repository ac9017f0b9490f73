"""Polynomials over atoms: sums, products, what they say of their values, and where they end."""

from __future__ import annotations

from fractions import Fraction

import pytest

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import (
    NOTHING,
    TERM_LIMIT,
    UNIT,
    UNITY,
    Poly,
    TooLargeToNormalize,
    constant,
    denominator,
    minus,
    of_atom,
    plus,
    scaled,
    times,
    total,
)
from workbench.algebra.terms import Term, app, num, var

ALGEBRA = Algebra()
N, M = var("n", "nat"), var("m", "int")
X, Y = var("x", "real"), var("y", "real")


def poly(t: Term) -> Poly:
    return ALGEBRA.normal(t)


def test_nothing_is_added_and_one_is_multiplied_without_effect() -> None:
    p = poly(app("+", X, num(2)))
    assert plus(p, NOTHING) is p and plus(NOTHING, p) is p
    assert times(p, UNITY) == p == times(UNITY, p)
    assert times(p, NOTHING) == NOTHING == times(NOTHING, p) == scaled(p, 0)
    assert minus(p, p) == NOTHING == constant(0)
    assert total([p, scaled(p, -1)]) == NOTHING


def test_fractions_that_are_whole_become_integers() -> None:
    half = scaled(poly(X), Fraction(1, 2))
    assert all(type(c) is int for c in plus(half, half).terms.values())
    assert all(type(c) is int for c in scaled(half, 2).terms.values())
    assert type(constant(Fraction(4, 2)).terms[UNIT]) is int
    assert denominator(plus(half, scaled(poly(Y), Fraction(2, 3)))) == 6


def test_an_indicator_is_its_own_square() -> None:
    p = poly(app("<", X, Y))
    assert times(p, p) == p
    assert times(minus(UNITY, p), p) == NOTHING


def test_an_atom_and_its_inverse_cancel() -> None:
    (x,) = poly(X).atoms
    assert times(of_atom(x), of_atom(x, -1)) == UNITY
    assert of_atom(x, -1).inverted == {x}
    assert poly(app("^", num(2), app("neg", N))).inverted == frozenset()
    inside = ALGEBRA.floor(times(of_atom(x, -1), poly(Y)))
    assert inside.inverted == {x}


def test_a_coefficient_stands_alone_or_not_at_all() -> None:
    (x,) = poly(X).atoms
    assert poly(app("+", app("*", num(3), X), Y)).coefficient(x) == 3
    assert poly(app("+", X, app("*", X, Y))).coefficient(x) is None
    assert poly(app("+", X, app("floor", X))).coefficient(x) is None
    assert poly(app("*", X, X)).coefficient(x) is None


def test_sign_and_type_are_seen_from_coefficients_and_atoms() -> None:
    two_to_n = app("^", num(2), N)
    assert poly(app("*", N, two_to_n)).nonneg and poly(app("+", N, num(1))).positive
    assert poly(two_to_n).positive and not poly(N).positive
    assert poly(app("*", M, M)).nonneg and not poly(M).nonneg
    assert not poly(app("-", N, num(1))).nonneg and not poly(app("*", X, Y)).nonneg
    assert poly(app("/", app("*", N, app("+", N, num(1))), num(2))).is_integer
    assert not poly(app("/", N, num(2))).is_integer and not poly(X).is_integer
    assert poly(app("/", app("*", app("*", M, app("+", M, num(1))), app("+", M, num(2))), num(6))).is_integer
    assert not poly(app("/", app("*", N, M), num(1_000_003))).is_integer  # too many residues to try


def test_the_deepest_atom_leads() -> None:
    nested = app("max", app("max", X, Y), N)
    p = minus(poly(nested), poly(app("*", num(5), Y)))
    ((atom, _),) = p.lead
    assert atom.kind == "pos"
    assert poly(app("-", Y, num(7))).lead != UNIT


def test_keys_tell_polynomials_apart() -> None:
    p, q = poly(app("+", X, Y)), poly(app("+", Y, X))
    assert p == q and hash(p) == hash(q) and p.key == q.key == repr(p)
    assert poly(app("floor", X)).key != poly(app("lg", X)).key
    (atom,) = poly(app("floor", X)).atoms
    assert repr(atom) == atom.key
    assert poly(var("n", "int")) != poly(N)


def test_what_is_inside_is_seen_at_any_depth() -> None:
    p = poly(app("floor", app("/", app("lg", app("+", X, N)), num(3))))
    (x,) = poly(X).atoms
    assert x in p.deep and x not in p.atoms and p.depth == 3
    assert p.newest == 0 and plus(p, of_atom(ALGEBRA.fresh_atom(12, "nat"))).newest == 12
    bound = of_atom(ALGEBRA.bound_atom("#4"))
    assert ALGEBRA.floor(scaled(times(bound, poly(X)), Fraction(1, 2))).loose == {"#4"}
    assert p.loose == frozenset() and NOTHING.depth == 0 and UNITY.constant == 1 and p.constant is None


def test_long_sums_and_products_are_refused() -> None:
    names = [of_atom(ALGEBRA.variable_atom(f"v{i}", "real")) for i in range(TERM_LIMIT + 1)]
    with pytest.raises(TooLargeToNormalize, match="too many terms"):
        total(names)
    long = total(names[:200])
    with pytest.raises(TooLargeToNormalize, match="two long sums"):
        times(long, long)
    large = constant(3**8000)
    with pytest.raises(TooLargeToNormalize, match="digits"):
        times(large, large)
