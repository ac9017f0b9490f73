"""What the kernel knows on a branch: rows of a comparison each, indicators that equal 1, and what every atom says
for free.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Literal, TypeAlias

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import UNITY, Atom, Poly, constant, denominator, minus, of_atom, plus, scaled
from workbench.errors import UllageError

Relation: TypeAlias = Literal[">=", ">", "="]
Dependencies: TypeAlias = frozenset[int]  # indices of the facts that a row rests on
NONE: Dependencies = frozenset()


class NotProved(UllageError):
    """A certificate does not prove what it is for; says which step fails."""


@dataclass(frozen=True, slots=True)
class Row:
    """poly >= 0, > 0 or = 0."""

    poly: Poly
    relation: Relation
    deps: Dependencies = NONE


@dataclass(frozen=True, slots=True)
class Known:
    """An indicator that equals 1, and what that rests on."""

    poly: Poly
    deps: Dependencies


def row_of(atom: Atom, holds: bool, deps: Dependencies) -> Row | None:
    """The row that a decided comparison gives; a name that is true or false, or p /= 0, gives none."""
    if atom.kind != "ind":
        return None
    p = atom.parts[0]
    match atom.data[0], holds:
        case "ge", True:
            return Row(p, ">=", deps)
        case "gt", True:
            return Row(p, ">", deps)
        case "eq", True:
            return Row(p, "=", deps)
        case "ge", False:
            if p.is_integer:
                return Row(minus(scaled(p, -1), UNITY), ">=", deps)
            return Row(scaled(p, -1), ">", deps)
        case "gt", False:
            return Row(scaled(p, -1), ">=", deps)
    return None



# ---------------------------------------------------------------- what atoms say without condition
def atom_row(algebra: Algebra, atom: Atom, which: str) -> Row:
    """Rows that hold for every value: signs, floor and positive part against what is inside, indicators in [0, 1]."""
    me = of_atom(atom)
    match which:
        case "one" if atom.positive and atom.integer:
            return Row(minus(me, UNITY), ">=")
        case "nonneg" if atom.positive:
            return Row(me, ">")
        case "nonneg" if atom.nonneg:
            return Row(me, ">=")
        case "below" if atom.kind == "floor":
            return Row(minus(atom.parts[0], me), ">=")
        case "above" if atom.kind == "floor":
            return _floor_above(atom)
        case "below" if atom.kind == "pos":
            return Row(minus(me, atom.parts[0]), ">=")
        case "below" if atom.idempotent:
            return Row(minus(UNITY, me), ">=")
    raise NotProved(f"no such fact about {atom.kind}: {which}")


def _floor_above(atom: Atom) -> Row:
    """p < floor(p) + 1; and if D*p is an integer, p <= floor(p) + (D - 1)/D."""
    p = atom.parts[0]
    gap = minus(plus(of_atom(atom), UNITY), p)
    below = denominator(p)
    if scaled(p, below).is_integer:
        return Row(minus(gap, constant(Fraction(1, below))), ">=")
    return Row(gap, ">")


def atom_facts(atom: Atom) -> tuple[str, ...]:
    """Which facts `atom_row` has for the atom."""
    signs: tuple[str, ...] = ("nonneg",) if atom.nonneg else ()
    if atom.positive and atom.integer:
        signs = ("nonneg", "one")
    if atom.kind == "floor":
        return (*signs, "below", "above")
    if atom.kind == "pos" or atom.idempotent:
        return (*signs, "below")
    return signs
