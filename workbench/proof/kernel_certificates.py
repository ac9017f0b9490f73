"""Certificates: what a proof is made of. Data alone; `kernel` says what each node means and whether it holds."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

from workbench.algebra.polynomial import Atom, Poly
from workbench.algebra.terms import Rational


@dataclass(frozen=True, slots=True)
class FromAtom:
    """A row of `atom_row`."""

    atom: Atom
    which: str


RowRef: TypeAlias = int | FromAtom


@dataclass(frozen=True, slots=True)
class Item:
    """coefficient * (product of inequality rows): never negative."""

    coefficient: Rational
    factors: tuple[RowRef, ...]


@dataclass(frozen=True, slots=True)
class EquationItem:
    """multiplier * (an equation's row): zero."""

    multiplier: Poly
    equation: RowRef


@dataclass(frozen=True, slots=True)
class Leaf:
    """The items add up to a negative number, or to zero with a strict one among them."""

    items: tuple[Item | EquationItem, ...]


@dataclass(frozen=True, slots=True)
class Define:
    row: int
    atom: Atom


@dataclass(frozen=True, slots=True)
class Shift:
    row: int
    atom: Atom


@dataclass(frozen=True, slots=True)
class OpenPositivePart:
    atom: Atom


@dataclass(frozen=True, slots=True)
class ThreeWays:
    atom: Atom


@dataclass(frozen=True, slots=True)
class Instance:
    law: str
    args: tuple[Poly, ...]


@dataclass(frozen=True, slots=True)
class SumLaw:
    kind: str
    atom: Atom
    antidifference: Poly | None = None


@dataclass(frozen=True, slots=True)
class Rename:
    poly: Poly
    atom: Atom


@dataclass(frozen=True, slots=True)
class Invert:
    atom: Atom


Move: TypeAlias = Define | Shift | Rename | Invert | OpenPositivePart | ThreeWays | Instance | SumLaw


@dataclass(frozen=True, slots=True)
class Then:
    move: Move
    rest: Certificate


@dataclass(frozen=True, slots=True)
class Cut:
    atom: Atom
    yes: Certificate
    no: Certificate


@dataclass(frozen=True, slots=True)
class ByRemainder:
    """One branch for every remainder of the name by a natural divisor, which is their number."""

    atom: Atom
    branches: tuple[Certificate, ...]


Certificate: TypeAlias = Leaf | Then | Cut | ByRemainder
