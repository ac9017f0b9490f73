"""Operators on polynomials: each gives an exact normal form, where need be over a new atom.

Equal normal forms mean equal values. All operators are read as total functions here, each extended beyond its domain
in a fixed way, which the rules below respect: x/0 = 0, 0^negative = 0, lg x = 0 for x < 1, fact and binom are naturals
everywhere (fact is positive), a function that is declared `nat` or `int` yields one everywhere, a floor is an integer
everywhere. That a term is used inside its domain only is an obligation of its own; no rule here may rely on it.

Every rule that needs a condition on values is a law (see `proof.laws`), not a rewriting here.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import comb, factorial, floor, gcd

from workbench.algebra.polynomial import (
    BOUND,
    FRESH,
    NOTHING,
    TERM_LIMIT,
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
    tidy,
    times,
    total,
)
from workbench.algebra.terms import Rational, Sort
from workbench.errors import UllageError

# Powers written out in full up to this exponent; beyond it they stay atoms.
POWER_LIMIT = 24
# Bits of a number that is worked out; beyond it the power stays an atom.
BIT_LIMIT = 4096
# Bases are split into primes below this bound only.
PRIME_LIMIT = 1000
FACTORIAL_LIMIT = 60
# Pairs of terms multiplied between two looks at the clock: about 2 ms.
PATIENCE = 2_000


class ReservedName(UllageError):
    """A formula has a name that only the algebra and the kernel may give."""


def _never() -> None:
    """No clock to look at."""


class Operators:
    """Builds normal forms and keeps one object for equal atoms.

    `tick` is called now and then during long work; what it raises ends that work and leaves no harm behind.
    """

    def __init__(self) -> None:
        self._atoms: dict[str, Atom] = {}
        self._work = 0
        self.tick: Callable[[], None] = _never

    def times(self, p: Poly, q: Poly) -> Poly:
        """The product, with an eye on the clock."""
        self._work += len(p.terms) * len(q.terms)
        if self._work > PATIENCE:
            self._work = 0
            self.tick()
        return times(p, q)

    # -------------------------------------------------------------- atoms
    def _atom(
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

    def owns(self, atom: Atom) -> bool:
        """Whether the atom, with all it says of its values, was made here."""
        return self._atoms.get(atom.key) is atom

    def variable(self, name: str, sort: Sort) -> Poly:
        """A name of a formula."""
        if sort == "bool":
            return of_atom(self._atom("truth", ("var", name), integer=True, nonneg=True))
        return of_atom(self.variable_atom(name, sort))

    def variable_atom(self, name: str, sort: Sort) -> Atom:
        """A name of a formula that stands for a number."""
        if name.startswith((BOUND, FRESH)):
            raise ReservedName(f"no formula may have the name '{name}'")
        return self._name(name, sort)

    def bound_atom(self, name: str) -> Atom:
        """The variable that a sum binds, by the name that its atom has."""
        if not name.startswith(BOUND):
            raise ReservedName(f"no sum binds the name '{name}'")
        return self._name(name, "int")

    def fresh_atom(self, number: int, sort: Sort) -> Atom:
        """A name that no formula has."""
        return self._name(f"{FRESH}{number}", sort)

    def _name(self, name: str, sort: Sort) -> Atom:
        return self._atom("var", (name, sort), integer=sort in ("nat", "int"), nonneg=sort == "nat")

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
        if p.positive if strict else p.nonneg:
            return UNITY
        negative = scaled(p, -1)
        if negative.nonneg if strict else negative.positive:
            return NOTHING
        if p.terms[p.lead] < 0:
            return minus(UNITY, self.compare(negative, strict=not strict))
        return of_atom(self._atom("ind", ("gt" if strict else "ge",), (p,), integer=True, nonneg=True))

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
        return of_atom(self._atom("ind", ("eq",), (p,), integer=True, nonneg=True))

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
        return scaled(of_atom(self._atom("pos", (), (inner,), integer=inner.is_integer, nonneg=True)), factor)

    def floor(self, p: Poly) -> Poly:
        """floor(p): integer parts stand outside.

        floor((floor(x) + c)/b) = floor((x + c)/b) for an integer c and a natural b > 0.
        """
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
        return plus(Poly(outside), of_atom(self._atom("floor", (), (rest,), integer=True, nonneg=rest.nonneg)))

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
                if e < 0 or a.is_power_of_prime:  # not 0 where it stands
                    result = self.times(result, of_atom(a, -e))
                elif a.kind == "inv":
                    result = self.times(result, self.raised(a.parts[0], e))
                elif a.idempotent:
                    result = self.times(result, of_atom(a))
                else:
                    inverted = self._atom("inv", (), (of_atom(a),), nonneg=a.nonneg, positive=a.positive)
                    result = self.times(result, of_atom(inverted, e))
            return result
        common = _common(p)
        if common:
            rest = Poly({_without(mono, common): c for mono, c in p.terms.items()})
            return self.times(self.inverse(Poly({common: 1})), self.inverse(rest))
        inner, factor = primitive(p)
        if inner.terms[inner.lead] < 0:
            inner, factor = scaled(inner, -1), -factor
        inverted = self._atom("inv", (), (inner,), nonneg=inner.nonneg, positive=inner.positive)
        return scaled(of_atom(inverted), Fraction(1) / factor)

    def raised(self, p: Poly, exponent: int) -> Poly:
        """p^exponent, written out; with a negative exponent the power of the inverse."""
        if exponent < 0:
            return self.raised(self.inverse(p), -exponent)
        if len(p.terms) == 1:
            (mono, c), = p.terms.items()
            if exponent * _bits(c) > BIT_LIMIT:
                raise TooLargeToNormalize("a number of too many digits")
            power = tuple((a, e if a.idempotent else e * exponent) for a, e in mono) if exponent else UNIT
            return Poly({power: tidy(c**exponent)})
        if exponent * len(p.terms) > TERM_LIMIT:
            raise TooLargeToNormalize("a high power of a sum")
        result = UNITY
        for _ in range(exponent):
            result = self.times(result, p)
        return result

    def power(self, base: Poly, exponent: Poly) -> Poly:
        """base^exponent. For a number b > 0, b^(x + y) = b^x b^y whatever x and y; of other bases nothing is
        assumed.
        """
        fixed = exponent.constant
        number = base.constant
        if fixed is not None and not isinstance(fixed, Fraction):
            if number is not None and abs(fixed) * _bits(number) <= BIT_LIMIT:
                return constant(Fraction(number) ** fixed) if number or fixed >= 0 else NOTHING
            if number is None and abs(fixed) <= POWER_LIMIT:
                return self.raised(base, fixed)
        if number is not None and number > 0:
            result = UNITY
            for prime, multiplicity in _factors(number):
                result = self.times(result, self._prime_power(prime, scaled(exponent, multiplicity)))
            return result
        natural = exponent.is_integer and exponent.nonneg
        return of_atom(
            self._atom(
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
                result = scaled(result, tidy(Fraction(prime) ** whole))
                if part != whole:
                    result = self.times(result, self._power_atom(prime, constant(part - whole), 1))
            else:
                inner = Poly({mono: Fraction(1, part.denominator) if part.denominator > 1 else 1})
                result = self.times(result, self._power_atom(prime, inner, part.numerator))
        return result

    def _power_atom(self, prime: int, exponent: Poly, times_over: int) -> Poly:
        natural = exponent.is_integer and exponent.nonneg
        return of_atom(
            self._atom("pow", (prime,), (constant(prime), exponent), integer=natural, positive=True), times_over
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
        return of_atom(self._atom("lg", (), (p,), integer=True, nonneg=True))

    def fact(self, p: Poly) -> Poly:
        value = p.constant
        if isinstance(value, int) and 0 <= value <= FACTORIAL_LIMIT:
            return constant(factorial(value))
        return of_atom(self._atom("fact", (), (p,), integer=True, positive=True))

    def binom(self, n: Poly, k: Poly) -> Poly:
        above, below = n.constant, k.constant
        if isinstance(above, int) and isinstance(below, int) and 0 <= above <= FACTORIAL_LIMIT and below >= 0:
            return constant(comb(above, below))
        return of_atom(self._atom("binom", (), (n, k), integer=True, nonneg=True))

    def call(self, name: str, sort: Sort, args: tuple[Poly, ...]) -> Poly:
        kind = "truth" if sort == "bool" else "call"
        return of_atom(
            self._atom(
                kind, ("call", name, sort), args,
                integer=sort != "real", nonneg=sort in ("nat", "bool"),
            )
        )

    def sum(self, bound: str, low: Poly, high: Poly, body: Poly) -> Poly:
        """Linear in the body; factors free of the bound variable stand outside."""
        parts: list[Poly] = []
        for mono, c in body.terms.items():
            outside = Poly({tuple(f for f in mono if bound not in f[0].loose): c})
            inside = Poly({tuple(f for f in mono if bound in f[0].loose): 1})
            atom = self._atom(
                "sum", (bound,), (low, high, inside),
                integer=inside.is_integer, nonneg=inside.nonneg,
            )
            parts.append(self.times(outside, of_atom(atom)))
        return total(parts)

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


def _common(p: Poly) -> Monomial:
    """What all its terms have as a factor."""
    first, *others = p.terms
    return tuple(
        (a, least) for a, e in first if (least := min((e, *(dict(mono).get(a, 0) for mono in others)))) > 0
    )


def _without(mono: Monomial, factor: Monomial) -> Monomial:
    taken = dict(factor)
    return tuple((a, e - taken.get(a, 0)) for a, e in mono if e != taken.get(a, 0))


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
    divisor = gcd(*(int(c) for mono, c in p.terms.items() if mono != UNIT))
    rest = Poly({mono: int(c) // divisor for mono, c in p.terms.items() if mono != UNIT})
    return plus(rest, constant(int(p.terms.get(UNIT, 0)) // divisor))
