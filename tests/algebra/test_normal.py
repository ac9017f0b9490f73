"""The normal form keeps values: compared with evaluation, on random terms and on the edges of every operator."""

from __future__ import annotations

import random
from collections.abc import Iterator
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.proof.obligations import functions, true_ones
from tests.proof.reading import POOL, Unknown, inside, total, value_of
from tests.proof.shaping import NAMES, I, J, K, M, N, P, Q, X, Y, formula, number
from workbench.algebra.normal import Algebra
from workbench.algebra.operators import ReservedName
from workbench.algebra.polynomial import NOTHING, UNITY, Poly, TooLargeToNormalize, constant, minus, of_atom, primitive
from workbench.algebra.terms import Rational, Term, app, call, num, summation, var

Values = dict[str, Rational]


def values_of(rng: random.Random) -> Values:
    return {v.name: rng.choice(POOL[v.sort]) for v in (*NAMES, P, Q)}


def some(rng: random.Random, count: int) -> Iterator[Values]:
    for _ in range(count):
        yield values_of(rng)


def keeps(algebra: Algebra, t: Term, values: Values) -> int:
    """Whether term and normal form have one value here, which atoms and polynomial describe truly; 1 if it is known."""
    try:
        expected = total(t, values, functions())
        p = algebra.normal(t)
        assert value_of(p, values, functions()) == expected, (t, p, values)
        describes(p, values)
    except (Unknown, TooLargeToNormalize, OverflowError):
        return 0
    return 1


def describes(p: Poly, values: Values) -> None:
    value = value_of(p, values, functions())
    assert not p.is_integer or value.denominator == 1, (p, values)
    assert not p.nonneg or value >= 0, (p, values)
    assert not p.positive or value > 0, (p, values)
    for atom in p.atoms:
        if not atom.loose:
            own = inside(atom, values, functions())
            assert not atom.integer or own.denominator == 1, (atom, values)
            assert not atom.nonneg or own >= 0, (atom, values)
            assert not atom.positive or own > 0, (atom, values)
            assert not atom.idempotent or own in (0, 1), (atom, values)


# ------------------------------------------------------------------ random terms
@pytest.mark.parametrize("seed", range(4))
def test_random_terms_keep_their_values(seed: int) -> None:
    rng = random.Random(seed)
    known = sum(keeps(Algebra(), number(rng, 3), v) for _ in range(200) for v in some(rng, 4))
    assert known > 500


@pytest.mark.parametrize("seed", range(3))
def test_random_formulas_keep_their_values(seed: int) -> None:
    rng = random.Random(100 + seed)
    known = sum(keeps(Algebra(), formula(rng, 3), v) for _ in range(120) for v in some(rng, 4))
    assert known > 300


@given(st.integers(0, 10**9))
@settings(max_examples=150, deadline=None)
def test_any_term_keeps_its_value(seed: int) -> None:
    rng = random.Random(seed)
    keeps(Algebra(), formula(rng, 2), values_of(rng))


@pytest.mark.parametrize("obligation", true_ones()[::6], ids=lambda o: o.name)
def test_obligations_keep_their_values(obligation: object) -> None:
    rng = random.Random(5)
    algebra = Algebra()
    for t in (*obligation.facts, obligation.goal):  # type: ignore[attr-defined]
        for _ in range(6):
            names = {a.data[0]: a.data[1] for a in algebra.normal(t).deep if a.kind == "var" and not a.loose}
            truths = {a.data[1]: "bool" for a in algebra.normal(t).deep if a.kind == "truth" and a.data[0] == "var"}
            values = {str(n): rng.choice(POOL[str(s)]) for n, s in (names | truths).items()}
            try:
                expected = total(t, {**_zeros(t), **values}, functions())
                assert value_of(algebra.normal(t), values, functions()) == expected
            except Unknown:
                continue


def _zeros(t: Term) -> Values:
    """Names that the normal form has lost have no influence: any value will do."""
    found: Values = {}
    stack = [t]
    while stack:
        s = stack.pop()
        if s.op == "var":
            found[s.name] = 0
        stack.extend(s.args)
    return found


# ------------------------------------------------------------------ equals for equals
@pytest.mark.parametrize("seed", range(3))
def test_rewriting_is_putting_in_a_value(seed: int) -> None:
    rng = random.Random(200 + seed)
    known = 0
    for _ in range(150):
        algebra = Algebra()
        try:
            p, image = algebra.normal(number(rng, 3)), algebra.normal(number(rng, 1))
            atom = rng.choice(sorted(p.deep, key=lambda a: a.key)) if p.deep else None
            if atom is None or atom.kind not in ("var", "truth") or atom.loose or atom in image.deep:
                continue
            if atom.kind == "truth":
                image = UNITY
            used: set[object] = set()
            rewritten = algebra.rewrite(p, {atom: image}, None, used)  # type: ignore[arg-type]
            assert used <= {atom}
            for values in some(rng, 3):
                name = str(atom.data[atom.kind == "truth"])
                put_in = {**values, name: value_of(image, values, functions())}
                if (atom.integer and put_in[name].denominator != 1) or (atom.nonneg and put_in[name] < 0):
                    continue
                assert value_of(rewritten, values, functions()) == value_of(p, put_in, functions()), (p, atom, image)
                known += 1
        except (Unknown, TooLargeToNormalize):
            continue
    assert known > 60


def test_what_an_atom_becomes_is_replaced_too() -> None:
    algebra = Algebra()
    (x,), (lg,) = algebra.normal(X).atoms, algebra.normal(app("lg", Y)).atoms
    p = algebra.normal(app("lg", X))
    used: set[object] = set()
    result = algebra.rewrite(p, {x: algebra.normal(Y), lg: constant(4)}, None, used)  # type: ignore[arg-type]
    assert result == constant(4) and used == {x, lg}


# ------------------------------------------------------------------ edges
EDGES: list[Term] = [
    app("/", X, num(0)), app("/", X, Y), app("/", num(1), app("*", X, Y)), app("/", app("*", X, Y), Y),
    app("/", num(1), app("/", num(1), X)), app("/", num(1), app("+", app("*", N, N), N)),
    app("/", X, app("^", num(2), M)), app("/", num(1), app("+", app("*", X, Y), app("*", num(2), X))),
    app("div", X, Y), app("mod", X, Y), app("div", M, num(0)), app("mod", M, num(0)), app("mod", M, num(3)),
    app("mod", X, num(-2)), app("^", num(0), M), app("^", num(0), num(-1)), app("^", num(0), num(0)),
    app("^", X, num(-2)), app("^", X, num(0)), app("^", X, M), app("^", num(-2), M), app("^", num(6), M),
    app("^", num(Fraction(2, 3)), app("-", M, num(2))), app("^", num(1), X), app("^", num(4), app("*", num(3), M)),
    app("^", num(2), app("/", M, num(2))),
    app("floor", app("/", app("+", app("*", num(2), app("floor", X)), num(1)), num(3))),
    app("^", app("^", num(2), N), K), app("^", num(2), app("*", N, K)), app("^", X, num(30)),
    app("lg", X), app("lg", num(Fraction(7, 2))), app("lg", app("^", num(2), N)), app("lg", app("^", num(2), M)),
    app("lg", app("*", num(8), app("^", num(4), N))), app("lg", app("*", num(3), app("^", num(2), N))),
    app("lg", app("/", app("^", num(2), N), num(4))),
    app("floor", X), app("floor", app("/", app("+", app("floor", X), num(1)), num(3))),
    app("floor", app("/", app("floor", app("/", N, num(2))), num(3))), app("floor", app("+", X, M)),
    app("floor", app("/", app("*", N, app("+", N, num(1))), num(2))), app("ceil", app("/", M, num(2))),
    app("floor", app("+", app("*", num(Fraction(7, 3)), M), num(Fraction(5, 2)))),
    app("floor", app("-", app("floor", X), app("/", app("floor", X), num(2)))),
    app("max", X, Y), app("max", Y, X), app("min", X, app("max", Y, N)), app("abs", app("-", X, M)),
    app("max", app("max", X, Y), app("max", N, M)), app("max", N, num(0)), app("min", N, num(0)),
    app("fact", num(4)), app("fact", M), app("fact", X), app("binom", num(5), num(2)), app("binom", M, K),
    app("binom", num(3), num(7)), app("binom", N, X),
    app("=", app("*", num(2), M), num(1)), app("=", app("*", X, Y), num(0)), app("=", N, num(-1)),
    app("!=", app("-", X, Y), num(0)), app(">", app("*", num(3), M), num(1)), app(">=", app("*", num(-2), N), num(-3)),
    app("<", app("/", M, num(2)), num(1)), app("<=", app("*", N, K), num(-1)), app("<", num(0), app("^", num(2), M)),
    app("<=", app("+", app("*", num(Fraction(1, 2)), app("*", N, app("+", N, num(1)))), num(Fraction(1, 2))), K),
    app("iff", P, Q), app("implies", P, app("<", X, Y)), app("not", app("and", P, app("or", Q, P))),
    Term("if", (P, X, Y)), Term("if", (P, Q, app("<", X, Y)), sort="bool"), app("+", app("neg", X), X),
    app("=", Term("if", (P, num(1), num(0))), num(0)), app("/", num(1), Term("if", (P, X, num(0)))),
    summation(I, num(1), N, I), summation(I, M, num(-1), num(1)), summation(I, N, M, app("*", I, X)),
    summation(I, num(0), N, summation(J, num(0), I, app("+", app("*", I, J), X))),
    summation(I, num(0), N, summation(I, num(1), num(2), I)), summation(I, num(0), num(2), app("^", X, I)),
    summation(I, num(1), num(3), app("<", I, X)), summation(I, num(0), N, app("/", I, I)),
    call("moves", "nat", (N,)), call("moves", "nat", (X,)), call("price", "real", (app("+", X, Y),)),
    call("even", "bool", (N,)),
]


@pytest.mark.parametrize("t", EDGES, ids=repr)
def test_edges_of_operators_keep_their_values(t: Term) -> None:
    rng = random.Random(9)
    algebra = Algebra()
    assert sum(keeps(algebra, t, v) for v in some(rng, 60)) > 10


# ------------------------------------------------------------------ one form for what is equal
SAME: list[tuple[Term, Term]] = [
    (app("*", app("+", X, Y), app("-", X, Y)), app("-", app("*", X, X), app("*", Y, Y))),
    (app("max", X, Y), app("max", Y, X)),
    (app("<", X, Y), app("not", app("<=", Y, X))),
    (app(">", M, N), app(">=", M, app("+", N, num(1)))),
    (app("<=", app("*", num(2), M), app("+", app("*", num(2), N), num(1))), app("<=", M, N)),
    (app("^", num(4), N), app("^", app("^", num(2), N), num(2))),
    (app("^", num(6), N), app("*", app("^", num(2), N), app("^", num(3), N))),
    (app("^", num(2), app("-", N, num(1))), app("/", app("^", num(2), N), num(2))),
    (
        app("^", num(2), app("+", M, num(Fraction(7, 2)))),
        app("*", app("*", num(8), app("^", num(2), M)), app("^", num(2), num(Fraction(1, 2)))),
    ),
    (app("/", num(1), app("*", X, Y)), app("*", app("/", num(1), X), app("/", num(1), Y))),
    (
        app("/", num(1), app("+", app("*", N, N), N)),
        app("*", app("/", num(1), N), app("/", num(1), app("+", N, num(1)))),
    ),
    (app("mod", N, num(2)), app("-", N, app("*", num(2), app("div", N, num(2))))),
    (app("div", app("div", N, num(3)), num(4)), app("div", N, num(12))),
    (summation(I, num(0), N, app("*", X, I)), app("*", X, summation(J, num(0), N, J))),
    (app("=", X, Y), app("=", app("*", num(2), Y), app("*", num(2), X))),
    (app("and", P, P), P),
    (app("=", app("*", num(2), N), app("+", app("*", num(2), K), num(1))), Term("false", sort="bool")),
    (app("<=", num(0), app("*", N, K)), Term("true", sort="bool")),
]


@pytest.mark.parametrize(("one", "other"), SAME, ids=repr)
def test_equal_terms_have_one_normal_form(one: Term, other: Term) -> None:
    algebra = Algebra()
    assert minus(algebra.normal(one), algebra.normal(other)) == NOTHING


def test_sums_keep_their_variables_apart() -> None:
    """Σi Σj (i + j) is not Σi Σi (i + i), whatever the variables are called."""
    algebra = Algebra()
    nested = summation(I, num(0), N, summation(J, num(0), I, app("+", I, J)))
    renamed = summation(J, num(0), N, summation(I, num(0), J, app("+", J, I)))
    shadowed = summation(I, num(0), N, summation(I, num(0), I, app("+", I, I)))
    assert algebra.normal(nested) == algebra.normal(renamed) != algebra.normal(shadowed)


def test_a_value_with_a_sum_in_it_is_put_into_a_sum() -> None:
    algebra = Algebra()
    (x,) = algebra.normal(X).atoms
    outer = algebra.normal(summation(I, num(0), N, app("*", I, app("^", X, I))))
    inner = algebra.normal(summation(I, num(1), K, app("^", num(2), I)))
    rewritten = algebra.rewrite(outer, {x: inner})
    values: Values = {"n": 3, "k": 2}
    assert value_of(rewritten, values) == 6 + 2 * 36 + 3 * 216
    assert value_of(outer, {**values, "x": value_of(inner, values)}) == value_of(rewritten, values)


def test_a_value_that_a_sum_would_bind_is_not_put_in() -> None:
    algebra = Algebra()
    (x,) = algebra.normal(X).atoms
    outer = algebra.normal(summation(I, num(0), N, app("^", X, I)))
    (atom,) = outer.atoms
    caught = of_atom(algebra.bound_atom(str(atom.data[0])))
    with pytest.raises(TooLargeToNormalize):
        algebra.rewrite(outer, {x: caught})


def test_the_variable_of_a_sum_is_instantiated_at_once() -> None:
    algebra = Algebra()
    bound = algebra.bound_atom("#1")
    body = algebra.times(of_atom(bound), of_atom(bound))
    shifted = algebra.instantiated(body, bound, minus(of_atom(bound), UNITY))
    assert value_of(shifted, {"#1": 5}) == 16


def test_names_of_the_algebras_own_are_refused() -> None:
    algebra = Algebra()
    for name in ("#1", "~3"):
        with pytest.raises(ReservedName):
            algebra.normal(var(name, "int"))
    with pytest.raises(ReservedName):
        algebra.bound_atom("i")
    with pytest.raises(ReservedName):
        algebra.normal(summation(I, num(0), N, var("i", "real")))


def test_what_is_too_large_is_said_to_be() -> None:
    algebra = Algebra()
    squared, nested, long = num(3), X, app("+", app("+", X, Y), app("+", N, M))
    for _ in range(40):
        squared = app("*", squared, squared)
    for _ in range(150):
        nested = app("floor", app("*", nested, X))
    for t in (squared, nested, app("^", num(9), num(10**6)), app("^", app("^", long, num(20)), num(20))):
        with pytest.raises(TooLargeToNormalize):
            algebra.normal(t)
    for t in (app("*", num(3), X), app("+", X, Y)):
        with pytest.raises(TooLargeToNormalize):
            algebra.raised(algebra.normal(t), 10**6)


def test_an_unknown_operator_is_an_error_of_the_caller() -> None:
    algebra = Algebra()
    with pytest.raises(ValueError, match="no such operator"):
        algebra.normal(app("sine", X))
    (x,) = algebra.normal(X).atoms
    with pytest.raises(ValueError, match="nothing to rebuild"):
        algebra.rebuilt(x, ())


def test_long_work_looks_at_the_clock() -> None:
    class Late(Exception):
        pass

    def tick() -> None:
        raise Late

    algebra = Algebra()
    algebra.tick = tick
    with pytest.raises(Late):
        algebra.normal(app("^", app("+", app("+", X, Y), app("+", N, M)), num(16)))


def test_primitive_polynomials_have_coprime_integers() -> None:
    algebra = Algebra()
    p, factor = primitive(algebra.normal(app("+", app("*", num(Fraction(4, 3)), X), num(Fraction(2, 9)))))
    assert sorted(p.terms.values()) == [1, 6] and factor == Fraction(2, 9)
    assert primitive(NOTHING) == (NOTHING, 1)
