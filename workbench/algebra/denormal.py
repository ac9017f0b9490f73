"""Normal forms back as terms that people read: for residues, for formulas that the tool makes up."""

from __future__ import annotations

from fractions import Fraction

from workbench.algebra.polynomial import UNIT, Atom, Monomial, Poly, denominator, minus, scaled
from workbench.algebra.terms import (
    ONE,
    ZERO,
    Rational,
    Sort,
    Term,
    add,
    app,
    call,
    mul,
    names,
    num,
    sub,
    substitute,
    summation,
    var,
)


def term_of(poly: Poly) -> Term:
    """A term with that normal form: highest powers first, a common divisor of numbers written once at the end."""
    if not poly.terms:
        return ZERO
    below = denominator(poly)
    if below > 1 and len(poly.terms) > 1:
        return app("/", _sum_of(scaled(poly, below)), num(below))
    return _sum_of(poly)


def _sum_of(poly: Poly) -> Term:
    ordered = sorted(poly.terms.items(), key=lambda item: _rank(*item))
    first = next((i for i, (_, c) in enumerate(ordered) if c > 0), 0)
    ordered = [ordered[first], *ordered[:first], *ordered[first + 1 :]]
    result = _product(*ordered[0])
    for mono, c in ordered[1:]:
        result = add(result, _product(mono, c)) if c > 0 else sub(result, _product(mono, -c))
    return result


def _rank(mono: Monomial, coefficient: Rational) -> tuple[int, int, tuple[str, ...]]:
    """Powers of a name and products before single names, plain numbers last."""
    weight = sum(e * (3 if a.kind == "pow" else 2 if a.kind != "ind" else 0) for a, e in mono)
    return (-weight, -len(mono), tuple(a.key for a, _ in mono))


def _product(mono: Monomial, coefficient: Rational) -> Term:
    """The coefficient stands in front, its denominator and negative powers behind the stroke."""
    c = Fraction(coefficient)
    above = num(abs(c.numerator))
    below = num(c.denominator)
    for atom, exponent in sorted(mono, key=lambda f: (f[0].kind in ("ind", "truth"), f[0].kind == "pow", f[0].key)):
        if atom.kind == "inv":
            below = mul(below, _raised(term_of(atom.parts[0]), exponent))
        elif exponent < 0:
            below = mul(below, _raised(atom_term(atom), -exponent))
        else:
            above = mul(above, _raised(atom_term(atom), exponent))
    result = above if below == ONE else app("/", above, below)
    return app("neg", result) if c < 0 else result


def _raised(base: Term, exponent: int) -> Term:
    if base.op == "^" and base.args[0].op == "num":
        return app("^", base.args[0], mul(num(exponent), base.args[1]))
    return base if exponent == 1 else app("^", base, num(exponent))


def atom_term(atom: Atom) -> Term:
    """The atom as a term; indicators as 1 or 0."""
    parts = atom.parts
    match atom.kind:
        case "var":
            return var(str(atom.data[0]), _sort(atom.data[1]))
        case "truth" if atom.data[0] == "var":
            return _indicator(var(str(atom.data[1]), "bool"))
        case "truth":
            return _indicator(call(str(atom.data[1]), "bool", tuple(map(term_of, parts))))
        case "ind":
            return _indicator(comparison(atom))
        case "pos":
            return _positive_part(parts[0])
        case "inv":
            return app("/", ONE, term_of(parts[0]))
        case "pow":
            return app("^", term_of(parts[0]), term_of(parts[1]))
        case "floor" | "lg" | "fact" | "binom":
            return app(atom.kind, *map(term_of, parts))
        case "sum":
            return _sum_term(atom)
        case "call":
            return call(str(atom.data[1]), _sort(atom.data[2]), tuple(map(term_of, parts)))
    raise ValueError(f"no term for {atom.kind}")


def _sum_term(atom: Atom) -> Term:
    """The bound variable gets a name that a sheet can write and that nothing in the sum has."""
    low, high, body = map(term_of, atom.parts)
    taken = names(low) | names(high) | names(body)
    bound = var(next(n for n in ("j", *(f"j{i}" for i in range(1, 10_000))) if n not in taken), "int")
    return summation(bound, low, high, substitute(body, {var(str(atom.data[0]), "int"): bound}))


def _sort(data: str | int) -> Sort:
    assert data in ("nat", "int", "real", "bool")
    return data  # type: ignore[return-value]


def comparison(atom: Atom) -> Term:
    """What an indicator says: smaller side left, nothing negative on either."""
    return related(atom.parts[0], {"ge": ">=", "gt": ">", "eq": "="}[str(atom.data[0])])


def related(poly: Poly, relation: str) -> Term:
    """poly >= 0, > 0 or = 0 as a comparison of two sides with nothing negative on either."""
    right = Poly({m: c for m, c in poly.terms.items() if c > 0})
    left = scaled(minus(poly, right), -1)
    if relation == "=":
        return app("=", term_of(right), term_of(left))
    return app({">=": "<=", ">": "<"}[relation], term_of(left), term_of(right))


def _indicator(formula: Term) -> Term:
    return Term("if", (formula, ONE, ZERO))


def _positive_part(inner: Poly) -> Term:
    """max(a, b) - b reads worse than max(a - b, 0)."""
    if set(inner.terms) == {UNIT}:
        return term_of(inner)
    return app("max", term_of(inner), ZERO)
