"""Polynomials over atoms with exact rational coefficients: the carrier of the normal form.

An atom is whatever the polynomial arithmetic does not look into: a name, `b^n`, floor, lg, the positive part,
an indicator, a function's value. Atoms carry what is known of their values for free: whether they are integers,
never negative, positive. `normal` builds atoms; this module only adds, multiplies and compares.
"""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from itertools import product
from math import gcd
from typing import TypeAlias

from workbench.algebra.terms import Rational
from workbench.errors import UllageError

# An expression of more terms than this helps no proof and would only eat time.
TERM_LIMIT = 3000
# Pairs of terms in one product: 10 ms.
PAIR_LIMIT = 12_000
# Bits of a coefficient: repeated squaring passes every bound soon.
BIT_LIMIT = 20_000
# Terms worked out, at most, when a polynomial with fractional coefficients may still be integer-valued: 1 ms.
RESIDUE_LIMIT = 1200
# Atoms inside atoms, and the length of an atom's key: rewriting goes down by recursion, and keys of atoms that share
# parts double with every level.
NESTING_LIMIT = 100
KEY_LIMIT = 40_000
# First signs of names that no formula can have: bound variables of sums, and names that the kernel makes.
BOUND = "#"
FRESH = "~"


class TooLargeToNormalize(UllageError):
    """An expression grows beyond the limits of the normal form."""


class Atom:
    """Made by `operators.Operators` alone, which keeps one object for equal atoms.

    kind: var truth pow floor pos ind lg fact binom inv sum call. `parts` are the polynomials inside it, `data` the
    rest. `positive` implies `nonneg`. Looked up at any depth, the atom itself included: `deep` are all atoms; `loose`
    the bound variables of sums (`#1`, …) outside their sum; `newest` the highest number of a fresh name (`~1`, …), 0
    without one; `inverted` the atoms with a negative exponent, powers of prime numbers apart, which are never 0.
    """

    __slots__ = (
        "kind", "data", "parts", "key", "integer", "nonneg", "positive", "deep", "loose", "newest", "inverted", "depth",
        "_hash",
    )

    def __init__(
        self,
        kind: str,
        data: tuple[str | int, ...],
        parts: tuple[Poly, ...],
        integer: bool,
        nonneg: bool,
        positive: bool,
    ) -> None:
        self.kind = kind
        self.data = data
        self.parts = parts
        self.integer = integer
        self.nonneg = nonneg or positive
        self.positive = positive
        self.key = f"{kind}{data}" + "".join(f"<{p.key}>" for p in parts)
        self.depth = 1 + max((p.depth for p in parts), default=0)
        if self.depth > NESTING_LIMIT or len(self.key) > KEY_LIMIT:
            raise TooLargeToNormalize("an expression nested too deeply")
        self.deep: frozenset[Atom] = frozenset((self,)).union(*(p.deep for p in parts))
        self.loose: frozenset[str] = _loose(self)
        self.newest: int = _newest(self)
        self.inverted: frozenset[Atom] = frozenset().union(*(p.inverted for p in parts))

    def __lt__(self, other: Atom) -> bool:
        return self.key < other.key

    def __repr__(self) -> str:
        return self.key

    @property
    def idempotent(self) -> bool:
        """Its square is itself: it is 0 or 1."""
        return self.kind in ("ind", "truth")

    @property
    def is_power_of_prime(self) -> bool:
        """p^x for a prime number p (or one too large to be split): never 0, and its inverse is p^(-x)."""
        return self.kind == "pow" and bool(self.data)


def _loose(atom: Atom) -> frozenset[str]:
    if atom.kind == "var":
        name = str(atom.data[0])
        return frozenset((name,)) if name.startswith(BOUND) else frozenset()
    found: frozenset[str] = frozenset()
    for i, part in enumerate(atom.parts):
        inside = part.loose
        found |= inside - {str(atom.data[0])} if atom.kind == "sum" and i == 2 else inside
    return found


def _newest(atom: Atom) -> int:
    if atom.kind == "var" and str(atom.data[0]).startswith(FRESH):
        return int(str(atom.data[0])[1:])
    return max((p.newest for p in atom.parts), default=0)


Monomial: TypeAlias = tuple[tuple[Atom, int], ...]
UNIT: Monomial = ()


class Poly:
    """An immutable polynomial: monomial -> coefficient, none of them zero, integers as int."""

    __slots__ = ("terms", "_hash", "_key", "_deep", "_integer", "_inverted", "_atoms", "_loose")

    def __init__(self, terms: dict[Monomial, Rational]) -> None:
        self.terms = terms
        self._hash: int | None = None
        self._key: str | None = None
        self._deep: frozenset[Atom] | None = None
        self._integer: bool | None = None
        self._inverted: frozenset[Atom] | None = None
        self._atoms: frozenset[Atom] | None = None
        self._loose: frozenset[str] | None = None

    def __hash__(self) -> int:
        if self._hash is None:
            self._hash = hash(frozenset(self.terms.items()))
        return self._hash

    def __eq__(self, other: object) -> bool:
        return self is other or (isinstance(other, Poly) and self.terms == other.terms)

    def __repr__(self) -> str:
        return self.key

    @property
    def key(self) -> str:
        """A text that is the same for equal polynomials."""
        if self._key is None:
            shown = sorted(
                ("*".join(f"{a.key}^{e}" for a, e in mono), str(coefficient))
                for mono, coefficient in self.terms.items()
            )
            self._key = "+".join(f"{c}*{m}" for m, c in shown)
        return self._key

    @property
    def deep(self) -> frozenset[Atom]:
        """All atoms in it, at any depth."""
        if self._deep is None:
            self._deep = frozenset().union(*(a.deep for a in self.atoms))
        return self._deep

    @property
    def loose(self) -> frozenset[str]:
        """Bound variables of sums that occur outside their sum."""
        if self._loose is None:
            self._loose = frozenset().union(*(a.loose for a in self.atoms))
        return self._loose

    @property
    def newest(self) -> int:
        """The highest number of a fresh name in it, at any depth; 0 without one."""
        return max((a.newest for a in self.atoms), default=0)

    @property
    def inverted(self) -> frozenset[Atom]:
        """Atoms with a negative exponent, at any depth, powers of prime numbers apart."""
        if self._inverted is None:
            here = {a for mono in self.terms for a, e in mono if e < 0 and not a.is_power_of_prime}
            self._inverted = frozenset(here).union(*(a.inverted for a in self.atoms))
        return self._inverted

    @property
    def depth(self) -> int:
        """How deep its atoms are nested; 0 for a number."""
        return max((a.depth for a in self.atoms), default=0)

    @property
    def atoms(self) -> frozenset[Atom]:
        """Atoms that it is a polynomial in."""
        if self._atoms is None:
            self._atoms = frozenset(a for mono in self.terms for a, _ in mono)
        return self._atoms

    @property
    def constant(self) -> Rational | None:
        """Its value, if it is a number."""
        if not self.terms:
            return 0
        if len(self.terms) == 1 and UNIT in self.terms:
            return self.terms[UNIT]
        return None

    @property
    def is_integer(self) -> bool:
        """Integer-valued, for whatever values the atoms take. Sufficient, not necessary."""
        if self._integer is None:
            self._integer = _integer_valued(self)
        return self._integer

    @property
    def nonneg(self) -> bool:
        """Never negative, seen from coefficients and atoms alone. Sufficient, not necessary."""
        return all(
            c > 0 and all(a.nonneg or e % 2 == 0 for a, e in mono) for mono, c in self.terms.items()
        )

    @property
    def positive(self) -> bool:
        """Always positive, seen from coefficients and atoms alone. Sufficient, not necessary."""
        return self.nonneg and any(all(a.positive for a, _ in mono) for mono in self.terms)

    @property
    def lead(self) -> Monomial:
        """The monomial that orients comparisons and positive parts: of those with the deepest atoms the greatest.

        With the deepest atom in front, turning round what nests in it is never needed: max(max(a, b), c) stays as
        long as it is written. The constant comes last of all.
        """
        return max(self.terms, key=lambda mono: (max((a.depth for a, _ in mono), default=0), mono))

    def coefficient(self, atom: Atom) -> Rational | None:
        """Its coefficient, if the atom stands alone in exactly one term and nowhere else, not even inside an atom."""
        found = self.terms.get(((atom, 1),))
        if found is None:
            return None
        for mono in self.terms:
            if mono != ((atom, 1),) and any(atom in a.deep for a, _ in mono):
                return None
        return found


def tidy(value: Rational) -> Rational:
    # the exact type: asking whether it is an instance of an abstract class takes ten times as long
    if type(value) is int or value.denominator != 1:
        return value
    return value.numerator


def constant(value: Rational) -> Poly:
    return Poly({UNIT: tidy(value)}) if value else Poly({})


NOTHING = Poly({})
UNITY = Poly({UNIT: 1})


def of_atom(atom: Atom, exponent: int = 1) -> Poly:
    return Poly({((atom, exponent),): 1})


def plus(p: Poly, q: Poly) -> Poly:
    if not p.terms:
        return q
    if not q.terms:
        return p
    if len(p.terms) < len(q.terms):
        p, q = q, p
    terms = dict(p.terms)
    for mono, c in q.terms.items():
        total = terms.get(mono, 0) + c
        if total:
            terms[mono] = tidy(total)
        else:
            terms.pop(mono, None)
    return _limited(terms)


def scaled(p: Poly, factor: Rational) -> Poly:
    if factor == 1:
        return p
    if not factor:
        return NOTHING
    return Poly({mono: tidy(c * factor) for mono, c in p.terms.items()})


def minus(p: Poly, q: Poly) -> Poly:
    return plus(p, scaled(q, -1))


def times_monomials(m: Monomial, n: Monomial) -> Monomial:
    if not m:
        return n
    if not n:
        return m
    result: list[tuple[Atom, int]] = []
    i = j = 0
    while i < len(m) and j < len(n):
        a, b = m[i], n[j]
        if a[0] == b[0]:
            exponent = 1 if a[0].idempotent else a[1] + b[1]
            if exponent:
                result.append((a[0], exponent))
            i += 1
            j += 1
        elif a[0].key < b[0].key:
            result.append(a)
            i += 1
        else:
            result.append(b)
            j += 1
    result.extend(m[i:])
    result.extend(n[j:])
    return tuple(result)


def times(p: Poly, q: Poly) -> Poly:
    if not p.terms or not q.terms:
        return NOTHING
    if len(p.terms) == 1 and UNIT in p.terms:
        return _written_out(scaled(q, p.terms[UNIT]))
    if len(q.terms) == 1 and UNIT in q.terms:
        return _written_out(scaled(p, q.terms[UNIT]))
    if len(p.terms) * len(q.terms) > PAIR_LIMIT:
        raise TooLargeToNormalize("a product of two long sums")
    terms: dict[Monomial, Rational] = {}
    get = terms.get
    for m, c in p.terms.items():
        for n, d in q.terms.items():
            mono = times_monomials(m, n)
            terms[mono] = get(mono, 0) + c * d
    return _written_out(_limited({mono: tidy(c) for mono, c in terms.items() if c}))


def total(parts: Iterable[Poly]) -> Poly:
    terms: dict[Monomial, Rational] = {}
    for part in parts:
        for mono, c in part.terms.items():
            terms[mono] = terms.get(mono, 0) + c
    return _limited({mono: tidy(c) for mono, c in terms.items() if c})


def _written_out(p: Poly) -> Poly:
    for c in p.terms.values():
        if c.numerator.bit_length() + c.denominator.bit_length() > BIT_LIMIT:
            raise TooLargeToNormalize("a number of too many digits")
    return p


def _limited(terms: dict[Monomial, Rational]) -> Poly:
    if len(terms) > TERM_LIMIT:
        raise TooLargeToNormalize("a sum of too many terms")
    return Poly(terms)


def denominator(p: Poly) -> int:
    """The least common denominator of its coefficients."""
    result = 1
    for c in p.terms.values():
        if isinstance(c, Fraction):
            result = result * c.denominator // gcd(result, c.denominator)
    return result


def primitive(p: Poly) -> tuple[Poly, Rational]:
    """(q, c) with p = c*q, c > 0 and the coefficients of q coprime integers."""
    if not p.terms:
        return p, 1
    below = denominator(p)
    above = 0
    for c in p.terms.values():
        above = gcd(above, int(c * below))
    factor = Fraction(above, below)
    return scaled(p, 1 / factor), tidy(factor)


def _integer_valued(p: Poly) -> bool:
    """Integer coefficients over integer atoms; or else fractions whose residues all come out even.

    With least denominator D, D*p mod D has period D in every atom: trying all residues decides it.
    """
    for mono in p.terms:
        if not all(a.integer and e > 0 for a, e in mono):
            return False
    below = denominator(p)
    if below == 1:
        return True
    atoms = sorted(p.atoms)
    if below ** len(atoms) * len(p.terms) > RESIDUE_LIMIT:
        return False
    place = {a: i for i, a in enumerate(atoms)}
    whole = [(int(c * below), [(place[a], e) for a, e in mono]) for mono, c in p.terms.items()]
    for point in product(range(below), repeat=len(atoms)):
        value = 0
        for c, factors in whole:
            for i, e in factors:
                c *= pow(point[i], e, below)
            value += c
        if value % below:
            return False
    return True
