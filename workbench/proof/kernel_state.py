"""What is known on one branch of a proof, and the moves that make more known: each sound, with the reason beside it.

All facts are indicators (see `algebra.normal`): polynomials that equal 1. Three things keep rewriting honest:
bound variables of sums (`#1`, …) never occur free in a state; names that a move makes (`~1`, …) are numbered in order,
and nothing that comes with a certificate may speak of one before it is made; and x^-1 stands only where x /= 0 is
known, with what that rests on.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction

from workbench.algebra.normal import Algebra, Rewritten
from workbench.algebra.polynomial import NOTHING, UNIT, UNITY, Atom, Poly, constant, minus, of_atom, plus, scaled
from workbench.algebra.terms import Sort
from workbench.proof.kernel_facts import NONE, Dependencies, Known, NotProved, Row, atom_facts, atom_row, row_of
from workbench.proof.kernel_laws import law_instance, sum_instance
from workbench.proof.laws import Law

# Rewritings of one expression: what an atom became may be known itself, and so on; more than twice is not seen.
PASSES = 4


class _Rewriting:
    """Some atoms replaced by what they equal, in many expressions: what comes out, and what that rests on."""

    def __init__(self, algebra: Algebra, new: dict[Atom, tuple[Poly, Dependencies]]) -> None:
        self._algebra = algebra
        self._new = new
        self._images = {a: image for a, (image, _) in new.items()}
        self._memo: Rewritten = {}

    def of(self, p: Poly) -> tuple[Poly, Dependencies]:
        used: set[Atom] = set()
        poly = self._algebra.rewrite(p, self._images, self._memo, used)
        return poly, NONE.union(*(self._new[a][1] for a in used))


def _speaks(atom: Atom) -> bool:
    """What it equals is said nowhere else: a decided comparison stands as a row, a positive part is what is inside."""
    return atom.kind not in ("var", "pos", "ind") or atom.data == ("eq",)


class State:
    """What is known on one branch. A move returns a new state; rows keep their number for good."""

    __slots__ = ("algebra", "rows", "pending", "images", "rests", "inverted", "next_row", "newest")

    def __init__(self, algebra: Algebra) -> None:
        self.algebra = algebra
        self.rows: dict[int, Row] = {}
        self.pending: list[Known] = []
        self.images: dict[Atom, Poly] = {}  # atom -> what it equals here; no key occurs in an image
        self.rests: dict[Atom, Dependencies] = {}  # what an image rests on
        self.inverted: dict[Atom, Dependencies] = {}  # atoms that are not 0, and what that rests on
        self.next_row = 0
        self.newest = 0  # number of the latest name that was made on this branch

    def _copy(self) -> State:
        other = State(self.algebra)
        other.rows = dict(self.rows)
        other.pending = list(self.pending)
        other.images = dict(self.images)
        other.rests = dict(self.rests)
        other.inverted = dict(self.inverted)
        other.next_row = self.next_row
        other.newest = self.newest
        return other

    # ---------------------------------------------------------- what a certificate may speak of
    def admitted(self, *polys: Poly, bound: frozenset[str] = frozenset()) -> Dependencies:
        """What the expressions of a certificate rest on; refuses those that mean nothing on this branch.

        `bound`: variables of sums that they may speak of.
        """
        deps = NONE
        for p in polys:
            if not p.loose <= bound:
                raise NotProved("a bound variable outside its sum")
            if p.newest > self.newest:
                raise NotProved("a name that is not made yet")
            for atom in p.inverted:
                if atom not in self.inverted:
                    raise NotProved("only what is not zero can be divided by")
                deps |= self.inverted[atom]
            if not all(map(self.algebra.owns, p.deep)):
                raise NotProved("an atom that the algebra did not make")
        return deps

    # ---------------------------------------------------------- knowing more (in place, on a copy)
    def know(self, indicators: Iterable[Known]) -> None:
        """Take indicators as equal to 1, and draw the direct conclusions until nothing new follows."""
        work = list(indicators)
        while work:
            learned = self._conclusions(self._rewritten(work.pop()))
            if learned:
                work.extend(self._replace(learned))

    def _rewritten(self, k: Known) -> Known:
        poly, deps = self.resolved(k.poly)
        return Known(poly, k.deps | deps)

    def resolved(self, p: Poly) -> tuple[Poly, Dependencies]:
        """Equals put for equals in p, and what that rests on."""
        used: set[Atom] = set()
        for _ in range(PASSES):
            p = self.algebra.rewrite(p, self.images, None, used)
        return p, NONE.union(*(self.rests[a] for a in used))

    def _conclusions(self, k: Known) -> dict[Atom, tuple[Poly, Dependencies]]:
        """Atoms decided by poly = 1: a product of indicators is 1 when each is; c*a + d = 1 fixes a."""
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
        if len(rest.atoms) == 1:
            (atom,) = rest.atoms
            if atom.idempotent:
                value = Fraction(-rest.terms.get(UNIT, 0)) / rest.terms[((atom, 1),)]
                if value in (0, 1):
                    return self._decided({atom: value == 1}, k.deps)
                self._add_row(Row(UNITY, "=", k.deps))  # an indicator is 0 or 1
                return {}
        if all(p.poly != k.poly for p in self.pending):
            self.pending.append(k)
        return {}

    def _decided(self, truths: dict[Atom, bool], deps: Dependencies) -> dict[Atom, tuple[Poly, Dependencies]]:
        for atom, holds in truths.items():
            row = row_of(atom, holds, deps)
            if row is not None:
                self._add_row(row)
        return {atom: (UNITY if holds else NOTHING, deps) for atom, holds in truths.items()}

    def _add_row(self, row: Row) -> None:
        if any(r.relation == row.relation and r.poly == row.poly for r in self.rows.values()):
            return
        self.rows[self.next_row] = row
        self.next_row += 1

    def _replace(self, new: dict[Atom, tuple[Poly, Dependencies]]) -> list[Known]:
        """Put equals for equals everywhere; returns what changed and has to be looked at again."""
        for atom, (image, _) in new.items():
            if atom.loose or image.loose:
                raise NotProved("a bound variable outside its sum")
        keys = new.keys()
        rewriting = _Rewriting(self.algebra, new)
        for a, image in self.images.items():
            if not keys.isdisjoint(image.deep):
                self.images[a], deps = rewriting.of(image)
                self.rests[a] |= deps
        again = [k for k in self.pending if not keys.isdisjoint(k.poly.deep)]
        self.pending = [k for k in self.pending if keys.isdisjoint(k.poly.deep)]
        for a in [a for a in self.images if a.parts and not keys.isdisjoint(a.deep)]:
            if _speaks(a):
                again.append(self._said_again(a, rewriting))
            del self.images[a], self.rests[a]  # nothing is written like that any more
        self.images.update((a, image) for a, (image, _) in new.items())
        self.rests.update((a, deps) for a, (_, deps) in new.items())
        for number, row in self.rows.items():
            if not keys.isdisjoint(row.poly.deep):
                poly, deps = rewriting.of(row.poly)
                poly, more = self.resolved(poly)  # it may have become something that is known
                self.rows[number] = Row(poly, row.relation, row.deps | deps | more)
        return again

    def _said_again(self, a: Atom, rewriting: _Rewriting) -> Known:
        """The atom has a known value, but is written otherwise now that something in it was replaced."""
        poly, deps = rewriting.of(of_atom(a))
        image = self.images[a]
        if a.idempotent and image.constant is not None:
            return Known(poly if image.terms else minus(UNITY, poly), deps | self.rests[a])
        return Known(self.algebra.equal(minus(poly, image)), deps | self.rests[a])

    # ---------------------------------------------------------- moves: each returns a new state
    def assume(self, atom: Atom, holds: bool) -> State:
        """One branch of a case split on an indicator."""
        p = of_atom(atom)
        deps = self.admitted(p)
        if not atom.idempotent or atom in self.images:
            raise NotProved("only an undecided comparison or truth value can be split")
        return self._knowing(Known(p if holds else minus(UNITY, p), deps))

    def define(self, number: int, atom: Atom) -> State:
        """c*atom + rest = 0 with the atom nowhere in the rest: the atom is -rest/c everywhere."""
        row = self.rows.get(number)
        slope = row.poly.coefficient(atom) if row is not None and row.relation == "=" else None
        if row is None or slope is None:
            raise NotProved("a definition needs an equation with the atom alone in one term")
        self.admitted(of_atom(atom))
        rest = minus(row.poly, scaled(of_atom(atom), slope))
        return self._with_image(atom, scaled(rest, Fraction(-1) / slope), row.deps)

    def _with_image(self, atom: Atom, image: Poly, deps: Dependencies) -> State:
        """The atom equals the image. What the atom said of its value for free is kept as rows about the image."""
        other = self._copy()
        other.newest = max(other.newest, image.newest)
        changed = other._replace({atom: (image, deps)})
        for which in atom_facts(atom):
            said = atom_row(self.algebra, atom, which)
            poly, known = other.resolved(said.poly)
            if not (poly.positive if said.relation == ">" else poly.nonneg):
                other._add_row(Row(poly, said.relation, deps | known))
        other.know(changed)
        return other

    def shift(self, number: int, atom: Atom) -> State:
        """name - t >= 0 for an integer name and an integer t: name = t + m for a fresh natural m."""
        row = self.rows.get(number)
        if row is None or row.relation != ">=" or atom.kind != "var" or not atom.integer:
            raise NotProved("a shift needs a lower bound of an integer name")
        if row.poly.coefficient(atom) != 1:
            raise NotProved("a shift needs the name alone, once")
        self.admitted(of_atom(atom))
        bound = minus(of_atom(atom), row.poly)
        if not bound.is_integer:
            raise NotProved("a shift needs an integer bound")
        return self._with_image(atom, plus(bound, self._fresh("nat")), row.deps)

    def _fresh(self, sort: Sort) -> Poly:
        """A name that stands nowhere on this branch: none of its number was made, and none could be spoken of."""
        return of_atom(self.algebra.fresh_atom(self.newest + 1, sort))

    def rename(self, p: Poly, atom: Atom) -> State:
        """p = c*atom + rest with c = 1 or -1 and the atom nowhere in the rest: for u = p, the atom is c*(u - rest)."""
        deps = self.admitted(p)
        slope = p.coefficient(atom)
        if slope not in (1, -1) or not p.deep.isdisjoint(self.images):
            raise NotProved("a new name needs an expression with the atom alone, once")
        rest = minus(p, scaled(of_atom(atom), slope))
        fresh = self._fresh("int" if p.is_integer else "real")
        return self._with_image(atom, scaled(minus(fresh, rest), slope), deps)

    def invert(self, atom: Atom) -> State:
        """Where atom /= 0 is known, 1/atom is atom^-1, and atom*atom^-1 cancels."""
        p = of_atom(atom)
        deps = self.admitted(p)
        inverse = next(iter(self.algebra.inverse(p).atoms))
        if inverse.kind != "inv" or not self.images.keys().isdisjoint(atom.deep):
            raise NotProved("nothing to invert")
        zero, known = self.resolved(self.algebra.equal(p))
        if zero.terms:
            raise NotProved("only what is not zero can be divided by")
        other = self._copy()
        other.inverted[atom] = deps | known
        return other._with_image(inverse, of_atom(atom, -1), deps | known)

    def remainder(self, atom: Atom, divisor: int, left: int) -> State:
        """A case of division with remainder: an integer name is divisor*q + left for an integer q.

        q is a natural, if the name is one. Over all `left` from 0 below the divisor no case is missing.
        """
        self.admitted(of_atom(atom))
        if atom.kind != "var" or not atom.integer or atom in self.images:
            raise NotProved("only an integer name can be divided with remainder")
        quotient = self._fresh("nat" if atom.nonneg else "int")
        return self._with_image(atom, plus(scaled(quotient, divisor), constant(left)), NONE)

    def open_positive_part(self, atom: Atom) -> State:
        """pos(p) = [p >= 0]*p, for all p."""
        deps = self.admitted(of_atom(atom))
        if atom.kind != "pos" or atom in self.images:
            raise NotProved("no positive part to open")
        inner = atom.parts[0]
        image, known = self.resolved(self.algebra.times(self.algebra.compare(inner, strict=False), inner))
        return self._with_image(atom, image, deps | known)

    def three_ways(self, atom: Atom) -> State:
        """[p > 0] + [p = 0] = [p >= 0], for all p."""
        deps = self.admitted(of_atom(atom))
        if atom.kind != "ind" or atom.data != ("eq",):
            raise NotProved("only an equation has three ways to fail or hold")
        p = atom.parts[0]
        strict, weak = self.algebra.compare(p, strict=True), self.algebra.compare(p, strict=False)
        return self._knowing(Known(plus(minus(minus(UNITY, strict), of_atom(atom)), weak), deps))

    def instance(self, law: Law, args: Sequence[Poly]) -> State:
        """A law with expressions for its parameters: (sorts and condition) implies formula."""
        deps = self.admitted(*args)
        return self._knowing(Known(law_instance(self.algebra, law, args), deps))

    def sum_law(self, kind: str, atom: Atom, antidifference: Poly | None) -> State:
        """A law of finite sums. Only the antidifference may speak of the variable that the sum binds."""
        deps = self.admitted(of_atom(atom))
        if antidifference is not None and atom.kind == "sum":
            deps |= self.admitted(antidifference, bound=frozenset(map(str, atom.data)))
        return self._knowing(Known(sum_instance(self.algebra, kind, atom, antidifference), deps))

    def _knowing(self, known: Known) -> State:
        other = self._copy()
        other.know([known])
        return other
