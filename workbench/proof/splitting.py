"""Which cases to tell apart on a line, outermost first."""

from __future__ import annotations

from collections.abc import Iterable

from workbench.algebra.polynomial import Atom, Poly, denominator, of_atom, scaled
from workbench.proof import instances
from workbench.proof.kernel import OpenPositivePart
from workbench.proof.line import Line

# Divisors up to this are split by remainder.
DIVISOR_LIMIT = 8
# Conditions that are asked of the facts before anything else; each takes about a millisecond.
DECIDED_FIRST_LIMIT = 8


def row_splits(line: Line) -> list[Atom]:
    """Indicators and positive parts that stand in rows, those of the goal (which rests on no fact) first, outermost
    first.
    """
    found: dict[Atom, None] = {}
    rows = sorted(line.state.rows.values(), key=lambda r: bool(r.deps))
    for row in rows:
        for atom in sorted(row.poly.atoms, key=lambda a: (a.kind == "pos", *_size(a))):
            if atom.idempotent or atom.kind == "pos":
                found[atom] = None
    for row in rows:
        for atom in sorted(row.poly.deep - row.poly.atoms, key=_size):
            if (atom.idempotent or atom.kind == "pos") and not atom.loose and not _inside_sum(row.poly, atom):
                found[atom] = None
    for known in line.state.pending:
        if not known.deps:
            for atom in sorted(known.poly.atoms, key=_size):
                found[atom] = None
    return [a for a in found if a not in line.state.images]


def decide_first(line: Line) -> None:
    """Conditions and signs in the goal that the facts decide as they stand: each one decided is a case less to tell
    apart.
    """
    tried: set[Atom] = set()
    while len(tried) < DECIDED_FIRST_LIMIT:
        atom = next((a for a in (*_in_failed_equations(line), *row_splits(line)) if a not in tried), None)
        if atom is None:
            return
        tried.add(atom)
        if atom.kind != "pos":
            line.decide(atom)
            continue
        inner = line.effort.algebra.rewrite(
            line.effort.algebra.compare(atom.parts[0], strict=False), line.state.images
        )
        if all(line.decide(sign) for sign in sorted(inner.atoms) if sign.idempotent):
            line.attempt(OpenPositivePart(atom))


def _in_failed_equations(line: Line) -> Iterable[Atom]:
    """Conditions and signs inside what is said not to be equal, a goal's two sides above all."""
    for atom, image in line.state.images.items():
        if atom.kind == "ind" and atom.data == ("eq",) and not image.terms:
            for inside in sorted(atom.parts[0].deep, key=_size):
                if (inside.idempotent or inside.kind == "pos") and inside not in line.state.images and not inside.loose:
                    yield inside


def undecided(line: Line) -> Iterable[Atom]:
    """Comparisons and truth values in facts that are not decided yet."""
    for known in line.state.pending:
        for atom in sorted(known.poly.atoms, key=_size):
            if atom.idempotent and atom not in line.state.images and not atom.loose:
                yield atom


def _inside_sum(poly: Poly, atom: Atom) -> bool:
    return any(a.kind == "sum" and atom in a.parts[2].deep for a in poly.deep)


def _size(atom: Atom) -> tuple[int, Atom]:
    return len(atom.key), atom


def remainders(line: Line) -> Iterable[tuple[Atom, int]]:
    """Integer names under a floor, with the divisor."""
    for atom in instances.deep_atoms(line.state):
        divisor = _divisor(atom) if atom.kind == "floor" else None
        if divisor is None:
            continue
        for name in sorted(atom.parts[0].atoms):
            if name.kind == "var" and name.integer and not name.loose:
                yield name, divisor


def _divisor(atom: Atom) -> int | None:
    """d, where the floor is of integers divided by d."""
    d = denominator(atom.parts[0])
    return d if 2 <= d <= DIVISOR_LIMIT and scaled(atom.parts[0], d).is_integer else None


def zeros(line: Line) -> Iterable[Atom]:
    """Equations x = 0 for naturals: those inside other atoms first, then those of the goal, then all."""
    rows = sorted(line.state.rows.values(), key=lambda r: bool(r.deps))
    inside = (a for r in rows for b in sorted(r.poly.atoms) if b.kind != "var" for a in sorted(b.deep))
    outside = (a for r in rows for a in sorted(r.poly.atoms))
    for name in dict.fromkeys((*inside, *outside)):
        if name.kind == "var" and name.nonneg and name.integer and not name.loose:
            for atom in line.effort.algebra.equal(of_atom(name)).atoms:
                if atom.kind == "ind" and atom not in line.state.images:
                    yield atom
