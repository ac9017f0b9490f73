"""Leaves of a proof: rows added up to a contradiction, with or without products of rows.

Collects the rows that a state offers, asks `linear` for a combination, and writes it as the kernel's leaf.
"""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from itertools import combinations_with_replacement

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
        for atom in stack.pop().atoms:
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
    monomials: dict[Monomial, None] = {}
    for offered in offer.rows:
        monomials.update(dict.fromkeys(offered.coefficients))
    for mono in list(monomials)[:MONOMIAL_LIMIT]:
        _sign_of_monomial(state, offer, mono)
    return offer


def _sign_of_monomial(state: State, offer: Offer, mono: Monomial) -> None:
    """A product of atoms that are never negative (or squared) is not negative."""
    if len(mono) < 2 and (not mono or mono[0][1] == 1):
        return
    factors: list[RowRef] = []
    strict = True
    for atom, exponent in mono:
        if exponent < 0 or not atom.nonneg or atom.loose:
            return
        factors.extend([FromAtom(atom, "nonneg")] * exponent)
        strict = strict and atom.positive
    offer.inequality(Poly({mono: 1}), strict, tuple(factors))


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
            product = state.algebra.times(row.poly, other.poly)
        except TooLargeToNormalize:
            continue
        new = sum(1 for mono in product.terms if mono not in wanted)
        strict = row.relation == ">" and other.relation == ">"
        ranked.append((new, len(product.terms), product, strict, (ref, other_ref)))
    ranked.sort(key=lambda r: r[:2])
    for _, _, product, strict, factors in ranked[:PRODUCT_LIMIT]:
        offer.inequality(product, strict, factors)
    _equations_times_monomials(state, offer, wanted)
    for offered in list(offer.rows):
        for mono in list(offered.coefficients)[:MONOMIAL_LIMIT]:
            _sign_of_monomial(state, offer, mono)
    return offer.leaf(deadline)


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
    atoms = relevant_atoms(r.poly for r in state.rows.values())
    for number, row in state.rows.items():
        if row.relation != "=":
            continue
        for atom in atoms:
            product = state.algebra.times(row.poly, of_atom(atom))
            if sum(1 for mono in product.terms if mono not in wanted) <= 2:
                offer.equation(product, of_atom(atom), number)
