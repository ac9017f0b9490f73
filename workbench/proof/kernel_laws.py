"""Instances of laws, and the laws of finite sums, as indicators that equal 1 for all values."""

from __future__ import annotations

from collections.abc import Sequence

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import NOTHING, UNITY, Atom, Poly, minus, of_atom, plus, scaled
from workbench.algebra.terms import Term
from workbench.proof.kernel_facts import NotProved
from workbench.proof.laws import Law


def law_instance(algebra: Algebra, law: Law, args: Sequence[Poly]) -> Poly:
    """The indicator of (sorts and condition) implies formula. Integer parameters need arguments that are
    integer-valued for sure.
    """
    if len(args) != len(law.parameters):
        raise NotProved(f"the law '{law.name}' has {len(law.parameters)} parameters")
    guard = UNITY
    values: dict[Term, Poly] = {}
    for parameter, arg in zip(law.parameters, args, strict=True):
        if parameter.sort in ("nat", "int") and not arg.is_integer:
            raise NotProved(f"the law '{law.name}' needs an integer for {parameter.name}")
        if parameter.sort == "bool" and algebra.times(arg, arg) != arg:  # what is its own square is 0 or 1
            raise NotProved(f"the law '{law.name}' needs a truth value for {parameter.name}")
        if parameter.sort == "nat":
            guard = algebra.times(guard, algebra.compare(arg, strict=False))
        values[parameter] = arg
    guard = algebra.times(guard, algebra.normal(law.given, values))
    formula = algebra.normal(law.formula, values)
    return plus(minus(UNITY, guard), algebra.times(guard, formula))


def sum_instance(algebra: Algebra, kind: str, atom: Atom, antidifference: Poly | None) -> Poly:
    """Laws of finite sums over i from a to b of f(i), for integer a and b.

    closed: if F(i) - F(i - 1) = f(i) for all i and b >= a - 1, the sum is F(b) - F(a - 1).
    empty:  b < a gives 0.   first / last: a <= b splits off f(a) / f(b).
    """
    if atom.kind != "sum":
        raise NotProved("not a sum")
    low, high, body = atom.parts
    if not (low.is_integer and high.is_integer):
        raise NotProved("a sum needs integer bounds")
    bound = algebra.bound_atom(str(atom.data[0]))
    me, length = of_atom(atom), minus(high, low)

    def at(p: Poly, value: Poly) -> Poly:
        return algebra.instantiated(p, bound, value)

    if kind == "closed":
        if antidifference is None:
            raise NotProved("a closed form needs an antidifference")
        step = minus(antidifference, at(antidifference, minus(of_atom(bound), UNITY)))
        if minus(step, body).terms:
            raise NotProved("not an antidifference of the summand")
        guard = algebra.compare(plus(length, UNITY), strict=False)
        value = minus(at(antidifference, high), at(antidifference, minus(low, UNITY)))
    elif kind == "empty":
        guard = algebra.compare(scaled(length, -1), strict=True)
        value = NOTHING
    else:
        guard = algebra.compare(length, strict=False)
        if kind == "first":
            value = plus(at(body, low), algebra.sum(str(atom.data[0]), plus(low, UNITY), high, body))
        elif kind == "last":
            value = plus(at(body, high), algebra.sum(str(atom.data[0]), low, minus(high, UNITY), body))
        else:
            raise NotProved(f"no such law of sums: {kind}")
    return plus(minus(UNITY, guard), algebra.times(guard, algebra.equal(minus(me, value))))
