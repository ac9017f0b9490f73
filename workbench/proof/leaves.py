"""Leaves of a proof: rows added up to a contradiction, with or without products of rows.

Collects the rows that a state offers, asks `linear` for a combination, and writes it as the kernel's leaf.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction
from itertools import combinations_with_replacement, product
from typing import TypeAlias

from workbench.algebra.polynomial import (
    NOTHING,
    UNIT,
    UNITY,
    Atom,
    Monomial,
    Poly,
    TooLargeToNormalize,
    of_atom,
    plus,
    scaled,
)
from workbench.proof import linear
from workbench.proof.kernel import EquationItem, FromAtom, Item, Leaf, Row, RowRef, State, atom_facts, atom_row

# Products of facts that go into one attempt: more of them found nothing more on the shipped sheets, only later.
PRODUCT_LIMIT = 260
# Terms of a fact that is multiplied by more than one factor, and how many such products go into one attempt.
FACTOR_TERMS = 4
TRIPLE_LIMIT = 60
# Monomials that get a sign of their own in one attempt.
MONOMIAL_LIMIT = 120


class Offer:
    """Rows to combine, each with how the kernel gets it."""

    def __init__(self) -> None:
        self.rows: list[linear.Row] = []
        self.items: list[tuple[RowRef, ...] | tuple[Poly, RowRef]] = []
        self._seen: set[tuple[Poly, bool | None]] = set()

    def inequality(self, poly: Poly, strict: bool, factors: tuple[RowRef, ...]) -> None:
        if poly.terms and (poly, strict) not in self._seen:
            self._seen.add((poly, strict))
            self.rows.append(linear.Row(poly.terms, strict=strict))
            self.items.append(factors)

    def equation(self, poly: Poly, multiplier: Poly, ref: RowRef) -> None:
        if poly.terms and (poly, None) not in self._seen:
            self._seen.add((poly, None))
            self.rows.append(linear.Row(poly.terms, equation=True))
            self.items.append((multiplier, ref))

    def leaf(self, deadline: float | None) -> Leaf | None:
        found = linear.find_combination(self.rows, deadline=deadline)
        return None if found is None else self._leaf(found)

    def _leaf(self, found: Iterable[tuple[int, int | Fraction]]) -> Leaf:
        taken: dict[RowRef, Poly] = {}
        items: list[Item | EquationItem] = []
        for index, multiplier in found:
            item = self.items[index]
            if self.rows[index].equation:
                factor, ref = item
                assert isinstance(factor, Poly)
                taken[ref] = plus(taken.get(ref, NOTHING), scaled(factor, multiplier))
            else:
                items.append(Item(multiplier, item))  # type: ignore[arg-type]
        items.extend(EquationItem(multiplier, ref) for ref, multiplier in taken.items())
        return Leaf(tuple(items))


def relevant_atoms(polys: Iterable[Poly]) -> list[Atom]:
    """Atoms of the polynomials, and those inside floors and positive parts, whose bounds speak of what is inside."""
    found: dict[Atom, None] = {}
    stack = list(polys)
    while stack:
        for atom in sorted(stack.pop().atoms):
            if atom in found or atom.loose:
                continue
            found[atom] = None
            if atom.kind in ("floor", "pos"):
                stack.append(atom.parts[0])
    return list(found)


def basic_offer(state: State) -> Offer:
    """The state's rows, what atoms give for free, and the signs of monomials."""
    offer = Offer()
    for number, row in state.rows.items():
        if row.relation == "=":
            offer.equation(row.poly, UNITY, number)
        else:
            offer.inequality(row.poly, row.relation == ">", (number,))
    atoms = relevant_atoms(r.poly for r in state.rows.values())
    for atom in atoms:
        for which in atom_facts(atom):
            row = atom_row(state.algebra, atom, which)
            offer.inequality(row.poly, row.relation == ">", (FromAtom(atom, which),))
    signs = _signs(state)
    monomials: dict[Monomial, None] = {}
    for offered in offer.rows:
        monomials.update(dict.fromkeys(offered.coefficients))
    for mono in list(monomials)[:MONOMIAL_LIMIT]:
        _sign_of_monomial(offer, signs, mono)
    return offer


# How an atom is known not to be negative, and whether it is known to be positive.
Sign: TypeAlias = tuple[RowRef, bool]


def _signs(state: State) -> dict[Atom, Sign]:
    """Atoms that a fact says not to be negative."""
    found: dict[Atom, Sign] = {}
    for number, row in state.rows.items():
        if len(row.poly.terms) == 1 and row.relation != "=":
            (mono, c), = row.poly.terms.items()
            if c == 1 and len(mono) == 1 and mono[0][1] == 1:
                found[mono[0][0]] = (number, row.relation == ">")
    return found


def _sign(signs: Mapping[Atom, Sign], mono: Monomial) -> tuple[tuple[RowRef, ...], bool] | None:
    """The facts whose product says that the monomial is not negative, and whether it is positive."""
    factors: list[RowRef] = []
    strict = True
    for atom, exponent in mono:
        if exponent < 0 or atom.loose:
            return None
        sign = (FromAtom(atom, "nonneg"), atom.positive) if atom.nonneg else signs.get(atom)
        if sign is None:
            return None
        factors.extend([sign[0]] * exponent)
        strict = strict and sign[1]
    return tuple(factors), strict


def _sign_of_monomial(offer: Offer, signs: Mapping[Atom, Sign], mono: Monomial) -> None:
    """A product of what is never negative is not negative."""
    if len(mono) > 1 or (mono and mono[0][1] > 1):
        sign = _sign(signs, mono)
        if sign is not None:
            offer.inequality(Poly({mono: 1}), sign[1], sign[0])


def linear_leaf(state: State, deadline: float | None = None) -> Leaf | None:
    for number, row in state.rows.items():
        value = row.poly.constant
        if value is not None and (value < 0 or (row.relation == ">" and value == 0) or (row.relation == "=" and value)):
            if row.relation == "=":
                return Leaf((EquationItem(scaled(UNITY, Fraction(-1) / value), number),))
            return Leaf((Item(1, (number,)),))
    return basic_offer(state).leaf(deadline)


def product_leaf(state: State, deadline: float | None = None) -> Leaf | None:
    """With products of two facts, and equations times monomials, the likeliest to matter first."""
    offer = basic_offer(state)
    wanted = _wanted(state)
    inequalities = _factors(state)
    ranked: list[tuple[int, int, Poly, bool, tuple[RowRef, ...]]] = []
    for (ref, row), (other_ref, other) in combinations_with_replacement(inequalities, 2):
        if len(row.poly.terms) * len(other.poly.terms) > 160:
            continue
        try:
            multiplied = state.algebra.times(row.poly, other.poly)
        except TooLargeToNormalize:
            continue
        new = sum(1 for mono in multiplied.terms if mono not in wanted)
        strict = row.relation == ">" and other.relation == ">"
        ranked.append((new, len(multiplied.terms), multiplied, strict, (ref, other_ref)))
    ranked.sort(key=lambda r: r[:2])
    for _, _, multiplied, strict, factors in ranked[:PRODUCT_LIMIT]:
        offer.inequality(multiplied, strict, factors)
    signs = _signs(state)
    _facts_times_monomials(state, offer, inequalities, signs)
    _equations_times_monomials(state, offer, wanted)
    for offered in list(offer.rows):
        for mono in list(offered.coefficients)[:MONOMIAL_LIMIT]:
            _sign_of_monomial(offer, signs, mono)
    return offer.leaf(deadline)


def _facts_times_monomials(
    state: State, offer: Offer, inequalities: list[tuple[RowRef, Row]], signs: Mapping[Atom, Sign]
) -> None:
    """Facts times what makes one of their monomials one that stands in a row already, of degree three or more."""
    rows = state.rows.values()
    wanted = dict.fromkeys(m for row in rows for m in row.poly.terms if sum(e for _, e in m) > 2)
    products: dict[tuple[RowRef, Monomial], Row] = {}
    for (ref, row), mono in product(inequalities, wanted):
        for own in row.poly.terms if len(row.poly.terms) <= FACTOR_TERMS else ():
            rest = _quotient(mono, own)
            if rest and sum(e for _, e in rest) > 1:
                products[ref, rest] = row
    for (ref, rest), row in list(products.items())[:TRIPLE_LIMIT]:
        sign = _sign(signs, rest)
        if sign is not None:
            poly = state.algebra.times(row.poly, Poly({rest: 1}))
            offer.inequality(poly, sign[1] and row.relation == ">", (ref, *sign[0]))


def _quotient(mono: Monomial, divisor: Monomial) -> Monomial | None:
    left = dict(mono)
    for atom, exponent in divisor:
        if left.get(atom, 0) < exponent:
            return None
        left[atom] = left.get(atom, 0) - exponent
    return tuple((a, e) for a, e in left.items() if e)


def _wanted(state: State) -> set[Monomial]:
    """Monomials of rows that stand already: products that stay among them are the likeliest to help."""
    return {mono for row in state.rows.values() for mono in row.poly.terms} | {UNIT}


def _factors(state: State) -> list[tuple[RowRef, Row]]:
    rows: list[tuple[RowRef, Row]] = [
        (n, r) for n, r in state.rows.items() if r.relation != "=" and r.poly.constant is None
    ]
    for atom in relevant_atoms(r.poly for r in state.rows.values()):
        rows.extend((FromAtom(atom, which), atom_row(state.algebra, atom, which)) for which in atom_facts(atom))
    return rows


def _equations_times_monomials(state: State, offer: Offer, wanted: set[Monomial]) -> None:
    factors = [of_atom(a) for a in relevant_atoms(r.poly for r in state.rows.values())]
    factors += [of_atom(a, -1) for a in state.inverted if state.images.keys().isdisjoint(a.deep)]
    for number, row in state.rows.items():
        if row.relation != "=":
            continue
        for factor in factors:
            multiple = state.algebra.times(row.poly, factor)
            if sum(1 for mono in multiple.terms if mono not in wanted) <= 2:
                offer.equation(multiple, factor, number)
