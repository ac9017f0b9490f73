"""The exact normal form: terms and formulas as polynomials over atoms.

Equal normal forms mean equal values. A formula's normal form is its indicator: a polynomial that is 1 where the
formula holds and 0 elsewhere, over indicators of single comparisons and of names that are true or false.

All operators are read as total functions here, each extended beyond its domain in a fixed way, which the rules below
respect: x/0 = 0, 0^negative = 0, lg x = 0 for x < 1, fact and binom are naturals everywhere, a function that is
declared `nat` or `int` yields one everywhere, a floor is an integer everywhere. That a term is used inside its domain
only is an obligation of its own; no rule here may rely on it.

Every rule that needs a condition on values is a law (see `proof.laws`), not a rewriting here.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from math import comb, factorial, floor, gcd
from typing import TypeAlias

from workbench.algebra.polynomial import (
    NOTHING,
    UNIT,
    UNITY,
    Atom,
    Monomial,
    Poly,
    TooLargeToNormalize,
    constant,
    denominator,
    minus,
    of_atom,
    plus,
    primitive,
    scaled,
    times,
    total,
)
from workbench.algebra.terms import Rational, Sort, Term, subterms, substitute, var

# Powers written out in full up to this exponent; beyond it they stay atoms.
POWER_LIMIT = 24
# Bits of a number that is worked out; beyond it the power stays an atom.
BIT_LIMIT = 4096
# Bases are split into primes below this bound only.
PRIME_LIMIT = 1000
FACTORIAL_LIMIT = 60


# An atom's image under a rewriting, and the atoms that fired in it.
Rewritten: TypeAlias = dict[Atom, tuple[Poly, frozenset[Atom]]]


class Algebra:
    """Builds normal forms and keeps one object for equal atoms. One serves one sheet: it only grows."""

    def __init__(self) -> None:
        self._atoms: dict[str, Atom] = {}
        self._memo: dict[Term, Poly] = {}
        self._heights: dict[Term, int] = {}

    # -------------------------------------------------------------- atoms
    def atom(
        self,
        kind: str,
        data: tuple[str | int, ...] = (),
        parts: tuple[Poly, ...] = (),
        *,
        integer: bool = False,
        nonneg: bool = False,
        positive: bool = False,
    ) -> Atom:
        made = Atom(kind, data, parts, integer, nonneg, positive)
        return self._atoms.setdefault(made.key, made)

    def variable(self, name: str, sort: Sort) -> Poly:
        if sort == "bool":
            return of_atom(self.atom("truth", ("var", name), integer=True, nonneg=True))
        return of_atom(self.variable_atom(name, sort))

    def variable_atom(self, name: str, sort: Sort) -> Atom:
        return self.atom("var", (name, sort), integer=sort in ("nat", "int"), nonneg=sort == "nat")

    # -------------------------------------------------------------- terms
    def normal(self, term: Term, values: Mapping[Term, Poly] | None = None) -> Poly:
        """The normal form; `values` stand for variables of the term (laws and functions use it)."""
        memo: dict[Term, Poly] = self._memo if values is None else dict(values)
        stack = [term]
        while stack:
            t = stack[-1]
            if t in memo:
                stack.pop()
                continue
            if t.op == "sum":
                t_canonical = self._canonical_sum(t)
                bound, low, high, body = t_canonical.args
                needed = [low, high, body]
            else:
                needed = [a for a in t.args]
            missing = [a for a in needed if a not in memo]
            if missing:
                stack.extend(missing)
                continue
            if t.op == "sum":
                memo[t] = self.sum(bound.name, memo[low], memo[high], memo[body])
            else:
                memo[t] = self._build(t, [memo[a] for a in t.args])
            stack.pop()
        return memo[term]

    def _build(self, t: Term, args: list[Poly]) -> Poly:
        op = t.op
        match op:
            case "num":
                return constant(t.value)
            case "var":
                return self.variable(t.name, t.sort)
            case "+":
                return plus(*args)
            case "-":
                return minus(*args)
            case "neg":
                return scaled(args[0], -1)
            case "*":
                return times(*args)
            case "/":
                return times(args[0], self.inverse(args[1]))
            case "div":
                return self.floor(times(args[0], self.inverse(args[1])))
            case "mod":
                return minus(args[0], times(args[1], self.floor(times(args[0], self.inverse(args[1])))))
            case "^":
                return self.power(*args)
            case "abs":
                return minus(scaled(self.pos(args[0]), 2), args[0])
            case "floor":
                return self.floor(args[0])
            case "ceil":
                return scaled(self.floor(scaled(args[0], -1)), -1)
            case "max":
                return plus(args[1], self.pos(minus(args[0], args[1])))
            case "min":
                return minus(args[0], self.pos(minus(args[0], args[1])))
            case "lg":
                return self.lg(args[0])
            case "fact":
                return self.fact(args[0])
            case "binom":
                return self.binom(*args)
            case "if":
                return plus(args[2], times(args[0], minus(args[1], args[2])))
            case "call":
                return self.call(t.name, t.sort, tuple(args))
        return self._formula(op, args)

    def _formula(self, op: str, args: list[Poly]) -> Poly:
        match op:
            case "true":
                return UNITY
            case "false":
                return NOTHING
            case "not":
                return minus(UNITY, args[0])
            case "and":
                return times(*args)
            case "or":
                return minus(plus(*args), times(*args))
            case "implies":
                return plus(minus(UNITY, args[0]), times(*args))
            case "iff":
                return plus(minus(UNITY, plus(*args)), scaled(times(*args), 2))
            case "=":
                return self.equal(minus(*args))
            case "!=":
                return minus(UNITY, self.equal(minus(*args)))
            case "<=":
                return self.compare(minus(args[1], args[0]), strict=False)
            case "<":
                return self.compare(minus(args[1], args[0]), strict=True)
            case ">=":
                return self.compare(minus(*args), strict=False)
            case ">":
                return self.compare(minus(*args), strict=True)
        raise ValueError(f"no such operator: {op}")

    # -------------------------------------------------------------- comparisons
    def compare(self, p: Poly, *, strict: bool) -> Poly:
        """The indicator of p >= 0, or p > 0: an atom over a primitive polynomial that leads positively, or 1 minus one.

        Among integers p > 0 is p - 1 >= 0, and the constant is rounded down to a multiple of what divides the rest.
        """
        if strict and p.is_integer:
            p, strict = minus(p, UNITY), False
        value = p.constant
        if value is not None:
            return UNITY if (value > 0 if strict else value >= 0) else NOTHING
        p = _tightened(p) if not strict else primitive(p)[0]
        value = p.constant
        if (p.positive if strict else p.nonneg):
            return UNITY
        negative = scaled(p, -1)
        if (negative.nonneg if strict else negative.positive):
            return NOTHING
        if p.terms[p.lead] < 0:
            return minus(UNITY, self.compare(negative, strict=not strict))
        return of_atom(self.atom("ind", ("gt" if strict else "ge",), (p,), integer=True, nonneg=True))

    def equal(self, p: Poly) -> Poly:
        """The indicator of p = 0."""
        value = p.constant
        if value is not None:
            return NOTHING if value else UNITY
        p = primitive(p)[0]
        if p.terms[p.lead] < 0:
            p = scaled(p, -1)
        if p.positive or scaled(p, -1).positive:
            return NOTHING
        if all(a.integer and e > 0 for mono in p.terms for a, e in mono):
            divisor = gcd(*(int(c) for mono, c in p.terms.items() if mono != UNIT))
            if p.terms.get(UNIT, 0) % divisor:
                return NOTHING  # an integer combination of integers that would have to be a fraction
        lone = next(iter(p.terms)) if len(p.terms) == 1 else UNIT
        if len(lone) == 1 and lone[0][0].idempotent:
            return minus(UNITY, of_atom(lone[0][0]))
        return of_atom(self.atom("ind", ("eq",), (p,), integer=True, nonneg=True))

    # -------------------------------------------------------------- functions
    def pos(self, p: Poly) -> Poly:
        """max(p, 0). pos(c p) = c pos(p) for c > 0; pos(-p) = pos(p) - p."""
        value = p.constant
        if value is not None:
            return constant(max(value, 0))
        if p.nonneg:
            return p
        if scaled(p, -1).nonneg:
            return NOTHING
        inner, factor = primitive(p)
        if inner.terms[inner.lead] < 0:
            return scaled(minus(self.pos(scaled(inner, -1)), scaled(inner, -1)), factor)
        return scaled(of_atom(self.atom("pos", (), (inner,), integer=inner.is_integer, nonneg=True)), factor)

    def floor(self, p: Poly) -> Poly:
        """floor(p): integer parts stand outside, and floor((floor(x) + c)/b) = floor((x + c)/b) for integer c, natural b > 0."""
        if p.is_integer:
            return p
        outside: dict[Monomial, Rational] = {}
        inside: dict[Monomial, Rational] = {}
        for mono, c in p.terms.items():
            if all(a.integer and e > 0 for a, e in mono):
                whole = floor(c)
                if whole:
                    outside[mono] = whole
                if c != whole:
                    inside[mono] = c - whole
            else:
                inside[mono] = c
        rest = Poly(inside)
        if rest.constant is not None:
            return Poly(outside)  # 0 <= the constant < 1
        flattened = self._flattened(rest)
        if flattened is not None:
            return plus(Poly(outside), self.floor(flattened))
        return plus(
            Poly(outside), of_atom(self.atom("floor", (), (rest,), integer=True, nonneg=rest.nonneg))
        )

    @staticmethod
    def _flattened(p: Poly) -> Poly | None:
        """(floor(x) + c)/b as (x + c)/b, where p has that shape."""
        rest = [mono for mono in p.terms if mono != UNIT]
        if len(rest) != 1 or len(rest[0]) != 1 or rest[0][0][1] != 1 or rest[0][0][0].kind != "floor":
            return None
        c = p.terms[rest[0]]
        added = p.terms.get(UNIT, 0) / Fraction(c)
        if c <= 0 or Fraction(c).numerator != 1 or added.denominator != 1:
            return None
        return plus(scaled(rest[0][0][0].parts[0], c), constant(p.terms.get(UNIT, 0)))

    def inverse(self, p: Poly) -> Poly:
        """1/p, with 1/0 = 0: multiplicative, so that single products invert factor by factor."""
        value = p.constant
        if value is not None:
            return constant(Fraction(1) / value) if value else NOTHING
        if len(p.terms) == 1:
            (mono, c), = p.terms.items()
            result = constant(Fraction(1) / c)
            for a, e in mono:
                if a.kind == "inv":
                    result = times(result, self._raised(a.parts[0], e))
                elif _invertible(a):
                    result = times(result, of_atom(a, -e))
                elif a.idempotent:
                    result = times(result, of_atom(a))
                else:
                    inverted = self.atom("inv", (), (of_atom(a),), nonneg=a.nonneg, positive=a.positive)
                    result = times(result, of_atom(inverted, e))
            return result
        inner, factor = primitive(p)
        if inner.terms[inner.lead] < 0:
            inner, factor = scaled(inner, -1), -factor
        inverted = self.atom("inv", (), (inner,), nonneg=inner.nonneg, positive=inner.positive)
        return scaled(of_atom(inverted), Fraction(1) / factor)

    def _raised(self, p: Poly, exponent: int) -> Poly:
        result = UNITY
        for _ in range(exponent):
            result = times(result, p)
        return result

    def power(self, base: Poly, exponent: Poly) -> Poly:
        """base^exponent. For a positive numeric base b^(x + y) = b^x b^y holds for all exponents; for others nothing is assumed."""
        fixed = exponent.constant
        number = base.constant
        if fixed is not None and not isinstance(fixed, Fraction):
            if number is not None and abs(fixed) * _bits(number) <= BIT_LIMIT and (number or fixed >= 0):
                return constant(Fraction(number) ** fixed if fixed < 0 else number**fixed)
            if number is None and 0 <= fixed <= POWER_LIMIT:
                return self._raised(base, fixed)
            if number is None and -POWER_LIMIT <= fixed < 0:
                return self._raised(self.inverse(base), -fixed)
        if number is not None and number > 0:
            result = UNITY
            for prime, multiplicity in _factors(number):
                result = times(result, self._prime_power(prime, scaled(exponent, multiplicity)))
            return result
        natural = exponent.is_integer and exponent.nonneg
        return of_atom(
            self.atom(
                "pow", (), (base, exponent),
                integer=base.is_integer and natural, nonneg=base.nonneg, positive=base.positive,
            )
        )

    def _prime_power(self, prime: int, exponent: Poly) -> Poly:
        result = UNITY
        for mono, c in exponent.terms.items():
            part = Fraction(c)
            if mono == UNIT:
                whole = floor(part)
                if abs(whole) * prime.bit_length() > BIT_LIMIT:
                    raise TooLargeToNormalize(f"{prime}^{whole} is too large")
                result = scaled(result, Fraction(prime) ** whole)
                if part != whole:
                    result = times(result, self._power_atom(prime, constant(part - whole), 1))
            else:
                inner = Poly({mono: Fraction(1, part.denominator) if part.denominator > 1 else 1})
                result = times(result, self._power_atom(prime, inner, part.numerator))
        return Poly({m: c.numerator if isinstance(c, Fraction) and c.denominator == 1 else c for m, c in result.terms.items()})

    def _power_atom(self, prime: int, exponent: Poly, times_over: int) -> Poly:
        natural = exponent.is_integer and exponent.nonneg
        return of_atom(
            self.atom("pow", (prime,), (constant(prime), exponent), integer=natural, positive=True), times_over
        )

    def lg(self, p: Poly) -> Poly:
        """floor(log2 p); lg(2^k) = k for natural k."""
        value = p.constant
        if value is not None:
            return constant(floor(value).bit_length() - 1 if value >= 1 else 0)
        if len(p.terms) == 1:
            (mono, c), = p.terms.items()
            exponents = NOTHING
            if isinstance(c, int) and c > 0 and c & (c - 1) == 0:
                exponents = constant(c.bit_length() - 1)
                for a, e in mono:
                    if a.kind != "pow" or a.data != (2,) or not a.integer or e < 0:
                        break
                    exponents = plus(exponents, scaled(a.parts[1], e))
                else:
                    return exponents
        return of_atom(self.atom("lg", (), (p,), integer=True, nonneg=True))

    def fact(self, p: Poly) -> Poly:
        value = p.constant
        if isinstance(value, int) and 0 <= value <= FACTORIAL_LIMIT:
            return constant(factorial(value))
        return of_atom(self.atom("fact", (), (p,), integer=True, positive=True))

    def binom(self, n: Poly, k: Poly) -> Poly:
        above, below = n.constant, k.constant
        if isinstance(above, int) and isinstance(below, int) and 0 <= above <= FACTORIAL_LIMIT and below >= 0:
            return constant(comb(above, below))
        return of_atom(self.atom("binom", (), (n, k), integer=True, nonneg=True))

    def call(self, name: str, sort: Sort, args: tuple[Poly, ...]) -> Poly:
        kind = "truth" if sort == "bool" else "call"
        return of_atom(
            self.atom(
                kind, ("call", name, sort), args,
                integer=sort != "real", nonneg=sort in ("nat", "bool"),
            )
        )

    # -------------------------------------------------------------- sums
    def _canonical_sum(self, t: Term) -> Term:
        """Bound variables are named by the height of the sum, so that equal sums look equal and none catches another's."""
        bound, low, high, body = t.args
        canonical = var(f"#{self._height(body) + 1}", "int")
        if bound == canonical:
            return t
        return Term("sum", (canonical, low, high, substitute(body, {bound: canonical})))

    def _height(self, term: Term) -> int:
        if term not in self._heights:
            nested = [s for s in subterms(term) if s.op == "sum" and s is not term]
            below = max((self._height(s) for s in nested), default=0)
            self._heights[term] = below + 1 if term.op == "sum" else below
        return self._heights[term]

    def sum(self, bound: str, low: Poly, high: Poly, body: Poly) -> Poly:
        """Linear in the body; factors free of the bound variable stand outside."""
        parts: list[Poly] = []
        for mono, c in body.terms.items():
            outside = Poly({tuple(f for f in mono if bound not in f[0].loose): c})
            inside = Poly({tuple(f for f in mono if bound in f[0].loose): 1})
            atom = self.atom(
                "sum", (bound,), (low, high, inside),
                integer=inside.is_integer, nonneg=inside.nonneg,
            )
            parts.append(times(outside, of_atom(atom)))
        return total(parts)

    # -------------------------------------------------------------- rewriting
    def rewrite(self, p: Poly, known: Mapping[Atom, Poly], memo: Rewritten | None = None, used: set[Atom] | None = None) -> Poly:
        """p with atoms replaced by equals, inside other atoms too; atoms that fired are added to `used`.

        The caller answers for it that no key of `known` occurs in an image. `memo` may be shared between calls with the same `known`.
        """
        if p.deep.isdisjoint(known):
            return p
        if memo is None:
            memo = {}
        parts: list[Poly] = []
        for mono, c in p.terms.items():
            product = constant(c)
            for a, e in mono:
                if a not in known and a.deep.isdisjoint(known):
                    product = times(product, of_atom(a, e))
                    continue
                if a not in memo:
                    memo[a] = self._image(a, known, memo)
                image, fired = memo[a]
                if used is not None:
                    used |= fired
                product = times(product, self._to_the(image, e))
            parts.append(product)
        return total(parts)

    def _to_the(self, p: Poly, exponent: int) -> Poly:
        return self._raised(p, exponent) if exponent >= 0 else self._raised(self.inverse(p), -exponent)

    def _image(self, a: Atom, known: Mapping[Atom, Poly], memo: Rewritten) -> tuple[Poly, frozenset[Atom]]:
        if a in known:
            return known[a], frozenset((a,))
        fired: set[Atom] = set()
        if a.kind == "sum":
            within = {k: v for k, v in known.items() if k.data != (a.data[0], "int")}
            low, high, body = a.parts
            parts = (
                self.rewrite(low, known, memo, fired),
                self.rewrite(high, known, memo, fired),
                self.rewrite(body, within, None, fired),
            )
        else:
            parts = tuple(self.rewrite(part, known, memo, fired) for part in a.parts)
        built = self.rebuilt(a, parts)
        if not built.deep.isdisjoint(known):  # it became something that is known
            built = self.rewrite(built, {k: v for k, v in known.items() if k != a}, None, fired)
        return built, frozenset(fired)

    def rebuilt(self, a: Atom, parts: tuple[Poly, ...]) -> Poly:
        """The atom's operator over other parts."""
        match a.kind:
            case "ind":
                if a.data == ("eq",):
                    return self.equal(parts[0])
                return self.compare(parts[0], strict=a.data == ("gt",))
            case "pos":
                return self.pos(parts[0])
            case "floor":
                return self.floor(parts[0])
            case "inv":
                return self.inverse(parts[0])
            case "pow":
                return self.power(*parts)
            case "lg":
                return self.lg(parts[0])
            case "fact":
                return self.fact(parts[0])
            case "binom":
                return self.binom(*parts)
            case "sum":
                return self.sum(str(a.data[0]), *parts)
            case "call" | "truth":
                return self.call(str(a.data[1]), a.data[2], parts)  # type: ignore[arg-type]
        raise ValueError(f"nothing to rebuild in {a.kind}")


def _invertible(a: Atom) -> bool:
    """Powers of primes are never 0: their inverse is the power with the exponent negated."""
    return a.kind == "pow" and bool(a.data)


def _bits(value: Rational) -> int:
    part = Fraction(value)
    return max(part.numerator.bit_length(), part.denominator.bit_length())


def _factors(value: Rational) -> list[tuple[int, int]]:
    """(factor, multiplicity) with value = Π factor^multiplicity; a factor beyond the limit stays whole."""
    part = Fraction(value)
    found: dict[int, int] = {}
    for number, sign in ((part.numerator, 1), (part.denominator, -1)):
        candidate = 2
        while candidate <= PRIME_LIMIT and candidate * candidate <= number:
            while number % candidate == 0:
                found[candidate] = found.get(candidate, 0) + sign
                number //= candidate
            candidate += 1
        if number > 1:
            found[number] = found.get(number, 0) + sign
    return sorted(found.items())


def _tightened(p: Poly) -> Poly:
    """p >= 0 over coprime integers; with integer atoms the constant is rounded down to what the rest can reach."""
    if not p.is_integer:
        return primitive(p)[0]
    p = scaled(p, denominator(p))
    if not all(a.integer and e > 0 for mono in p.terms for a, e in mono):
        return primitive(p)[0]
    divisor = gcd(*(int(c) for mono, c in p.terms.items() if mono != UNIT))
    rest = Poly({mono: int(c) // divisor for mono, c in p.terms.items() if mono != UNIT})
    return plus(rest, constant(int(p.terms.get(UNIT, 0)) // divisor))
