"""The laws that the kernel knows beside its normal form: each a formula that holds for all values of its parameters.

A law is data: parameters with sorts, a condition, a formula, and where it is from. An instance puts expressions for the
parameters; that a `nat` or `int` parameter gets an integer is checked by the kernel, that a `nat` is not negative
and that the condition holds become part of the instance: (sorts and condition) implies formula.
Every law here is tried on a range of values with edges in the tests. Expressions are total as `algebra.normal` says.
"""

from __future__ import annotations

from dataclasses import dataclass

from workbench.algebra.terms import ONE, TRUE, ZERO, Term, app, conjunction, num, var


@dataclass(frozen=True, slots=True)
class Law:
    """(sorts of parameters and `given`) implies `formula`. `lean` names a user's law or function that it rests on."""

    name: str
    parameters: tuple[Term, ...]
    given: Term
    formula: Term
    source: str
    lean: str = ""


def _reals(*names: str) -> tuple[Term, ...]:
    return tuple(var(n, "real") for n in names)


def _integers(*names: str) -> tuple[Term, ...]:
    return tuple(var(n, "int") for n in names)


def _naturals(*names: str) -> tuple[Term, ...]:
    return tuple(var(n, "nat") for n in names)


def _le(a: Term, b: Term) -> Term:
    return app("<=", a, b)


def _lt(a: Term, b: Term) -> Term:
    return app("<", a, b)


def _eq(a: Term, b: Term) -> Term:
    return app("=", a, b)


def _both(*formulas: Term) -> Term:
    return conjunction(list(formulas))


def _plus(a: Term, b: Term) -> Term:
    return app("+", a, b)


def _minus(a: Term, b: Term) -> Term:
    return app("-", a, b)


def _times(a: Term, b: Term) -> Term:
    return app("*", a, b)


def _power(a: Term, b: Term) -> Term:
    return app("^", a, b)


TWO = num(2)
DEFINITION = "definition"
CONCRETE = "Graham, Knuth, Patashnik, Concrete Mathematics, ch. 3 (from memory)"
BINOMIAL = "Graham, Knuth, Patashnik, Concrete Mathematics, table 174 (from memory)"
POWERS = "laws of exponents, common knowledge"


def _inverse_laws() -> list[Law]:
    x, y = _reals("x", "y")
    q, = _integers("q")
    inverse = app("/", ONE, x)
    return [
        Law("quotient", (x,), app("!=", x, ZERO), _eq(_times(x, inverse), ONE), DEFINITION),
        Law("sign of a quotient", (x,), _lt(ZERO, x), _lt(ZERO, inverse), "ordered fields"),
        Law(
            "quotient falls", (x, y), _both(_lt(ZERO, x), _le(x, y)), _le(app("/", ONE, y), inverse), "ordered fields",
        ),
        Law(
            "division", (x, y), _lt(ZERO, y),
            _both(_le(_times(y, app("div", x, y)), x), _lt(x, _plus(_times(y, app("div", x, y)), y))),
            CONCRETE,
        ),
        Law(
            "whole quotient", (x, y, q), _both(_le(_times(q, y), x), _lt(x, _times(_plus(q, ONE), y))),
            _eq(app("div", x, y), q), CONCRETE,
        ),
    ]


def _floor_laws() -> list[Law]:
    x, y = _reals("x", "y")
    return [
        Law("floor grows", (x, y), _le(x, y), _le(app("floor", x), app("floor", y)), CONCRETE),
    ]


def _power_laws() -> list[Law]:
    a, b = _reals("a", "b")
    x, k = _integers("x", "k")
    n, = _naturals("n")
    base_positive = _lt(ZERO, b)
    step = app("or", app("!=", b, ZERO), _le(ZERO, x))
    tangent = _times(_power(b, k), _plus(ONE, _times(_minus(b, ONE), _minus(x, k))))
    return [
        Law("power step", (b, x), step, _eq(_power(b, _plus(x, ONE)), _times(b, _power(b, x))), POWERS),
        Law(
            "power of a sum", (b, x, k), app("or", app("!=", b, ZERO), _both(_le(ZERO, x), _le(ZERO, k))),
            _eq(_power(b, _plus(x, k)), _times(_power(b, x), _power(b, k))), POWERS,
        ),
        Law("sign of a power", (b, x), base_positive, _lt(ZERO, _power(b, x)), POWERS),
        Law("power at least one", (b, n), _le(ONE, b), _le(ONE, _power(b, n)), POWERS),
        Law(
            "power grows", (b, x, k), _both(_le(ONE, b), _le(x, k)), _le(_power(b, x), _power(b, k)), POWERS,
        ),
        Law(
            "power grows with its base", (a, b, n), _both(_le(ZERO, a), _le(a, b)),
            _le(_power(a, n), _power(b, n)), POWERS,
        ),
        Law(
            "tangent of a power", (b, x, k), base_positive, _le(tangent, _power(b, x)),
            "Bernoulli's inequality for integer exponents (from memory)",
        ),
        Law(
            "square below power", (n,), _le(num(4), n), _le(_times(n, n), _power(TWO, n)),
            "induction from 4, common knowledge",
        ),
    ]


def _logarithm_laws() -> list[Law]:
    x, y = _reals("x", "y")
    n, = _naturals("n")
    lg_x = app("lg", x)
    double = _plus(_times(TWO, n), ONE)
    return [
        Law(
            "definition of lg", (x,), _le(ONE, x),
            _both(_le(_power(TWO, lg_x), x), _lt(x, _times(TWO, _power(TWO, lg_x)))), DEFINITION,
        ),
        Law("lg of half", (x,), _le(TWO, x), _eq(app("lg", app("/", x, TWO)), _minus(lg_x, ONE)), CONCRETE),
        Law(
            "lg of a whole half", (x,), _le(TWO, x),
            _eq(app("lg", app("floor", app("/", x, TWO))), _minus(lg_x, ONE)), CONCRETE,
        ),
        Law("lg of a double", (x,), _le(ONE, x), _eq(app("lg", _times(TWO, x)), _plus(lg_x, ONE)), CONCRETE),
        Law(
            "lg of a double and one", (n,), _le(ONE, n), _eq(app("lg", double), _plus(app("lg", n), ONE)), CONCRETE,
        ),
        Law("lg grows", (x, y), _le(x, y), _le(lg_x, app("lg", y)), CONCRETE),
        Law("lg below its argument", (x,), _le(ONE, x), _le(lg_x, _minus(x, ONE)), CONCRETE),
    ]


def _counting_laws() -> list[Law]:
    n, k = _naturals("n", "k")
    x, = _integers("x")
    one_less = _minus(n, ONE)
    binom = app("binom", n, k)
    return [
        Law("factorial step", (n,), _le(ONE, n), _eq(app("fact", n), _times(n, app("fact", one_less))), DEFINITION),
        Law("factorial above its argument", (x,), TRUE, _le(x, app("fact", x)), "induction, common knowledge"),
        Law(
            "addition of binomials", (n, k), _both(_le(ONE, n), _le(ONE, k)),
            _eq(binom, _plus(app("binom", one_less, _minus(k, ONE)), app("binom", one_less, k))), BINOMIAL,
        ),
        Law(
            "absorption", (n, k), _le(ONE, k),
            _eq(_times(k, binom), _times(n, app("binom", one_less, _minus(k, ONE)))), BINOMIAL,
        ),
        Law("symmetry of binomials", (n, k), _le(k, n), _eq(binom, app("binom", n, _minus(n, k))), BINOMIAL),
        Law("binomial at the edges", (n,), TRUE, _both(
            _eq(app("binom", n, ZERO), ONE), _eq(app("binom", n, n), ONE), _eq(app("binom", n, ONE), n),
        ), BINOMIAL),
        Law("binomial beyond the edge", (n, k), _lt(n, k), _eq(binom, ZERO), BINOMIAL),
        Law("binomial at least one", (n, k), _le(k, n), _le(ONE, binom), BINOMIAL),
        Law("binomials add up", (n, k), TRUE, _le(binom, _power(TWO, n)), BINOMIAL),
    ]


def _order_laws() -> list[Law]:
    x, y = _reals("x", "y")
    return [
        Law(
            "products of signs", (x, y), _both(_le(ZERO, x), _le(ZERO, y)), _le(ZERO, _times(x, y)), "ordered fields",
        ),
        Law("square", (x,), TRUE, _le(ZERO, _times(x, x)), "ordered fields"),
    ]


def built_in_laws() -> tuple[Law, ...]:
    """All laws that need no user's definition."""
    return (
        *_inverse_laws(), *_floor_laws(), *_power_laws(), *_logarithm_laws(), *_counting_laws(), *_order_laws(),
    )
