"""Putting a line in order: equations put in, names shifted to their lower bounds, what is pinned down decided."""

from __future__ import annotations

from workbench.algebra.polynomial import Atom, Poly, minus, of_atom, scaled
from workbench.proof.kernel import Define, Shift
from workbench.proof.line import Line

# Rounds of putting in order before it is taken to run in circles.
ROUND_LIMIT = 40


def tidy(line: Line) -> None:
    for _ in range(ROUND_LIMIT):
        equals_for_equals(line)
        if not (line.compare_three_ways() or _shift(line) or _pinned(line)):
            return


def equals_for_equals(line: Line) -> None:
    """Every equation that says what a name or another atom equals is put in everywhere."""
    for _ in range(ROUND_LIMIT):
        found = _definition(line)
        if found is None:
            return
        line.effort.tick()
        line.move(found)


def _definition(line: Line) -> Define | None:
    best: tuple[tuple[int, int, int], Define] | None = None
    for number, row in line.state.rows.items():
        if row.relation != "=" or not row.poly.terms:
            continue
        for atom in sorted(row.poly.atoms):
            slope = row.poly.coefficient(atom)
            if slope is None or atom.idempotent or atom.loose:
                continue
            rest = minus(row.poly, scaled(of_atom(atom), slope))
            if atom.integer and not (slope in (1, -1) and rest.is_integer):
                continue
            rank = (_rank(atom, rest, line.effort.middle), len(rest.terms), number)
            if best is None or rank < best[0]:
                best = (rank, Define(number, atom))
    return None if best is None else best[1]


def _rank(atom: Atom, rest: Poly, middle: frozenset[str]) -> int:
    """Middle states first, then reals, integers, naturals; other atoms by size, the largest first."""
    if atom.kind == "var":
        if str(atom.data[0]) in middle:
            return 0
        if not atom.integer:
            return 1
        return 2 if not atom.nonneg else 3 if rest.constant is None else 1
    return 10_000 - min(len(atom.key), 9_000)


def _shift(line: Line) -> bool:
    """An integer name that a fact bounds from below becomes the bound and a natural."""
    for number, row in line.state.rows.items():
        if row.relation != ">=":
            continue
        for atom in sorted(row.poly.atoms):
            if atom.kind != "var" or not atom.integer or row.poly.coefficient(atom) != 1:
                continue
            if atom in line.state.inverted:
                continue  # it was given this name so that its powers cancel
            bound = minus(of_atom(atom), row.poly)
            if not row.deps and bound.constant is None:
                continue  # the failed goal, or a case, says something of two names: neither is the other's lower bound
            if not bound.is_integer or (atom.nonneg and not (bound.terms and bound.nonneg)):
                continue
            line.move(Shift(number, atom))
            return True
    return False


def _pinned(line: Line) -> bool:
    """-x >= 0 for a natural x: x = 0."""
    for row in line.state.rows.values():
        if row.relation != ">=" or len(row.poly.terms) != 1:
            continue
        (mono, c), = row.poly.terms.items()
        if c < 0 and len(mono) == 1 and mono[0][0].nonneg and not mono[0][0].loose:
            equation = line.effort.algebra.equal(of_atom(mono[0][0]))
            for atom in equation.atoms:
                if atom.kind == "ind" and atom not in line.state.images and line.proves(atom, True):
                    return True
    return False
