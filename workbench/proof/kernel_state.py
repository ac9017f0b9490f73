"""What is known on one branch of a proof, and the moves that make more known: each sound, with the reason beside it.

All facts are indicators (see `algebra.normal`): polynomials that equal 1.
Bound variables of sums (`#1`, …) never occur free in a state, so rewriting cannot reach into a sum by accident.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import NOTHING, UNIT, UNITY, Atom, Poly, constant, minus, of_atom, plus, scaled, times
from workbench.algebra.terms import Sort
from workbench.proof.kernel_facts import NONE, Dependencies, Known, NotProved, Row, row_of
from workbench.proof.kernel_laws import law_instance, sum_instance
from workbench.proof.laws import Law


class State:
    """What is known on one branch. Every change makes a new state; rows keep their number for good."""

    __slots__ = ("algebra", "rows", "pending", "images", "rests", "next_row")

    def __init__(self, algebra: Algebra) -> None:
        self.algebra = algebra
        self.rows: dict[int, Row] = {}
        self.pending: list[Known] = []
        self.images: dict[Atom, Poly] = {}  # atom -> what it equals here; no key occurs in an image
        self.rests: dict[Atom, Dependencies] = {}
        self.next_row = 0

    def copy(self) -> State:
        other = State(self.algebra)
        other.rows = dict(self.rows)
        other.pending = list(self.pending)
        other.images = dict(self.images)
        other.rests = dict(self.rests)
        other.next_row = self.next_row
        return other

    # ---------------------------------------------------------- knowing more (in place, on a copy)
    def know(self, indicators: Iterable[Known]) -> None:
        """Take indicators as equal to 1, and draw the direct conclusions until nothing new follows."""
        work = [self._rewritten(k) for k in indicators]
        while work:
            known = work.pop()
            learned = self._conclusions(known)
            if learned:
                work.extend(self._replace(learned))

    def _rewritten(self, k: Known) -> Known:
        used: set[Atom] = set()
        poly = self.algebra.rewrite(k.poly, self.images, None, used)
        return Known(poly, k.deps.union(*(self.rests[a] for a in used)))

    def _conclusions(self, k: Known) -> dict[Atom, tuple[Poly, Dependencies]]:
        """Atoms decided by poly = 1: a product of indicators is 1 when each is; c*a + d = 1 fixes a."""
        k = self._rewritten(k)
        rest = minus(k.poly, UNITY)
        if not rest.terms:
            return {}
        if rest.constant is not None:
            self._add_row(Row(rest, "=", k.deps))
            return {}
        if len(k.poly.terms) == 1:
            (mono, c), = k.poly.terms.items()
            if c == 1 and all(a.idempotent for a, _ in mono):
                return self._decided({a: True for a, _ in mono}, k.deps)
        atoms = rest.atoms
        if len(atoms) == 1:
            (atom,) = atoms
            slope, offset = rest.terms.get(((atom, 1),)), rest.terms.get(UNIT, 0)
            if atom.idempotent and slope is not None:
                value = Fraction(-offset) / slope
                if value in (0, 1):
                    return self._decided({atom: value == 1}, k.deps)
                self._add_row(Row(UNITY, "=", k.deps))  # an indicator is 0 or 1
                return {}
        self.pending.append(k)
        return {}

    def _decided(self, truths: dict[Atom, bool], deps: Dependencies) -> dict[Atom, tuple[Poly, Dependencies]]:
        for atom, holds in truths.items():
            row = row_of(atom, holds, deps)
            if row is not None:
                self._add_row(row)
        return {atom: (UNITY if holds else NOTHING, deps) for atom, holds in truths.items()}

    def _add_row(self, row: Row) -> None:
        self.rows[self.next_row] = row
        self.next_row += 1

    def _replace(self, new: dict[Atom, tuple[Poly, Dependencies]]) -> list[Known]:
        """Put equals for equals everywhere; returns pending indicators that changed, to be looked at again."""
        for atom in new:
            if atom.loose:
                raise NotProved("a bound variable outside its sum")
        images = {a: image for a, (image, _) in new.items()}
        self.rests.update({a: deps for a, (_, deps) in new.items()})
        for a, image in list(self.images.items()):
            if not image.deep.isdisjoint(images):
                used: set[Atom] = set()
                self.images[a] = self.algebra.rewrite(image, images, None, used)
                self.rests[a] = self.rests[a].union(*(self.rests[u] for u in used))
        self.images.update(images)
        for number, row in self.rows.items():
            if not row.poly.deep.isdisjoint(images):
                used = set()
                poly = self.algebra.rewrite(row.poly, self.images, None, used)
                self.rows[number] = Row(poly, row.relation, row.deps.union(*(self.rests[u] for u in used)))
        changed = [k for k in self.pending if not k.poly.deep.isdisjoint(images)]
        if changed:
            self.pending = [k for k in self.pending if k.poly.deep.isdisjoint(images)]
        return changed

    # ---------------------------------------------------------- moves: each returns a new state
    def assume(self, atom: Atom, holds: bool) -> State:
        """One branch of a case split on an indicator."""
        if not atom.idempotent or atom in self.images or atom.loose:
            raise NotProved("only an undecided comparison or truth value can be split")
        other = self.copy()
        other.know([Known(of_atom(atom) if holds else minus(UNITY, of_atom(atom)), NONE)])
        return other

    def define(self, number: int, atom: Atom) -> State:
        """c*atom + rest = 0 with the atom nowhere in the rest: the atom is -rest/c everywhere."""
        row = self.rows.get(number)
        slope = row.poly.coefficient(atom) if row is not None and row.relation == "=" else None
        if row is None or slope is None or atom.loose:
            raise NotProved("a definition needs an equation with the atom alone in one term")
        rest = minus(row.poly, scaled(of_atom(atom), slope))
        image = scaled(rest, Fraction(-1) / slope)
        return self._with_image(atom, image, row.deps)

    def _with_image(self, atom: Atom, image: Poly, deps: Dependencies) -> State:
        """The atom equals the image. What its sort said of its sign is kept as a row."""
        other = self.copy()
        changed = other._replace({atom: (image, deps)})
        if atom.nonneg and not image.nonneg:
            other._add_row(Row(image, ">" if atom.positive else ">=", deps))
        other.know(changed)
        return other

    def shift(self, number: int, atom: Atom) -> State:
        """name - t >= 0 for an integer name and an integer t: name = t + m for a fresh natural m."""
        row = self.rows.get(number)
        if row is None or row.relation != ">=" or atom.kind != "var" or not atom.integer or atom.loose:
            raise NotProved("a shift needs a lower bound of an integer name")
        if row.poly.coefficient(atom) != 1:
            raise NotProved("a shift needs the name alone, once")
        bound = minus(of_atom(atom), row.poly)
        if not bound.is_integer:
            raise NotProved("a shift needs an integer bound")
        above = self._fresh_name("nat")
        return self._with_image(atom, plus(bound, of_atom(above)), row.deps)

    def _fresh_name(self, sort: Sort) -> Atom:
        """A name that stands nowhere on this branch: as many images as there are, none of their keys is ever used again."""
        return self.algebra.variable_atom(f"@{len(self.images) + 1}", sort)

    def rename(self, p: Poly, atom: Atom) -> State:
        """p = c*atom + rest with c = 1 or -1 and the atom nowhere in the rest: for u = p, the atom is c*(u - rest)."""
        slope = p.coefficient(atom)
        if slope not in (1, -1) or atom.loose or atom in self.images or not p.deep.isdisjoint(self.images):
            raise NotProved("a new name needs an expression with the atom alone, once")
        fresh = self._fresh_name("int" if p.is_integer else "real")
        rest = minus(p, scaled(of_atom(atom), slope))
        return self._with_image(atom, scaled(minus(of_atom(fresh), rest), slope), NONE)

    def invertible(self, atom: Atom) -> State:
        """Where atom /= 0 is known, 1/atom is atom^-1, and atom*atom^-1 cancels."""
        p = of_atom(atom)
        inverse = self.algebra.inverse(p)
        inverse_atom = next(iter(inverse.atoms), None)
        if inverse_atom is None or inverse_atom.kind != "inv" or atom.loose:
            raise NotProved("nothing to invert")
        used: set[Atom] = set()
        zero = self.algebra.rewrite(self.algebra.equal(p), self.images, None, used)
        if zero.terms and not atom.positive:
            raise NotProved("only what is not zero can be divided by")
        deps = NONE.union(*(self.rests[u] for u in used))
        return self._with_image(inverse_atom, of_atom(atom, -1), deps)

    def remainder(self, atom: Atom, divisor: int, left: int) -> State:
        """One of the cases of division with remainder: an integer name is divisor*q + left, q an integer (a natural, if the name is)."""
        if atom.kind != "var" or not atom.integer or atom.loose or atom in self.images:
            raise NotProved("only an integer name can be divided with remainder")
        quotient = of_atom(self._fresh_name("nat" if atom.nonneg else "int"))
        return self._with_image(atom, plus(scaled(quotient, divisor), constant(left)), NONE)

    def open_positive_part(self, atom: Atom) -> State:
        """pos(p) = [p >= 0]*p, for all p."""
        if atom.kind != "pos" or atom.loose or atom in self.images:
            raise NotProved("no positive part to open")
        inner = atom.parts[0]
        image = self.algebra.rewrite(times(self.algebra.compare(inner, strict=False), inner), self.images)
        if atom in image.deep:
            raise NotProved("a positive part inside itself")
        other = self.copy()
        used: set[Atom] = set()
        self.algebra.rewrite(times(self.algebra.compare(inner, strict=False), inner), self.images, None, used)
        other.know(other._replace({atom: (image, NONE.union(*(self.rests[u] for u in used)))}))
        return other

    def three_ways(self, atom: Atom) -> State:
        """[p > 0] + [p = 0] = [p >= 0], for all p."""
        if atom.kind != "ind" or atom.data != ("eq",) or atom.loose:
            raise NotProved("only an equation has three ways to fail or hold")
        p = atom.parts[0]
        above = self.algebra.compare(p, strict=True)
        weak = self.algebra.compare(p, strict=False)
        return self._knowing(plus(minus(minus(UNITY, above), self.algebra.equal(p)), weak))

    def instance(self, law: Law, args: Sequence[Poly]) -> State:
        """A law with expressions for its parameters: (sorts and condition) implies formula."""
        return self._knowing(law_instance(self.algebra, law, args))

    def sum_law(self, kind: str, atom: Atom, antidifference: Poly | None) -> State:
        return self._knowing(sum_instance(self.algebra, kind, atom, antidifference))

    def _knowing(self, indicator: Poly) -> State:
        if indicator.loose:
            raise NotProved("a bound variable outside its sum")
        other = self.copy()
        other.know([Known(indicator, NONE)])
        return other
