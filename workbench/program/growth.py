"""How much names grow on one path through a loop's body, as far as the path's facts say so."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import NOTHING, UNITY, Atom, Poly, constant, minus, of_atom, plus, times
from workbench.algebra.terms import Term, names
from workbench.program.paths import Path
from workbench.program.priced import Loop

# Middle states replaced, at most, in one expression.
ROUND_LIMIT = 60


@dataclass(frozen=True, slots=True)
class Cost:
    """How much a name grows in one iteration: exactly `low`, if it equals `high`; None: no bound is known."""

    low: Poly | None
    high: Poly | None

    @property
    def exact(self) -> Poly | None:
        return self.low if self.low is not None and self.low == self.high else None


class Solved:
    """One path with what its facts say of fresh names: equal to, at most, at least."""

    def __init__(self, algebra: Algebra, loop: Loop, path: Path) -> None:
        self.algebra = algebra
        self.loop = loop
        self.path = path
        self.equal: dict[Atom, Term] = {}
        self.above: dict[Atom, list[Term]] = {}
        self.below: dict[Atom, list[Term]] = {}
        self.not_negative: list[Poly] = []
        for fact in path.facts:
            self._learn(fact.formula)
        for fact in path.facts:
            self._learn_under_condition(fact.formula)

    def _learn(self, formula: Term) -> None:
        work = [formula]
        while work:
            f = work.pop()
            if f.op == "and":
                work.extend(f.args)
            elif f.op in ("<", ">"):
                self._learn_order(f)
            elif f.op in ("=", "<=", ">="):
                if f.op != "=":
                    self._learn_order(f)
                for here, there, op in ((f.args[0], f.args[1], f.op), (f.args[1], f.args[0], _turned(f.op))):
                    if here.op == "var" and "@" in here.name and here.name not in names(there):
                        self._note(self.algebra.variable_atom(here.name, here.sort), there, op)

    def _learn_order(self, f: Term) -> None:
        small, large = f.args if f.op in ("<=", "<") else f.args[::-1]
        gap = minus(self.algebra.normal(large), self.algebra.normal(small))
        self.not_negative.append(minus(gap, UNITY) if f.op in ("<", ">") and gap.is_integer else gap)

    def _learn_under_condition(self, formula: Term) -> None:
        """What an implication says, where the facts decide its condition at sight."""
        while formula.op == "implies":
            if self._settled(self.algebra.normal(formula.args[0])) != UNITY:
                return
            formula = formula.args[1]
            self._learn(formula)

    def _note(self, atom: Atom, value: Term, op: str) -> None:
        if op == "=":
            self.equal.setdefault(atom, value)
        else:
            (self.above if op == "<=" else self.below).setdefault(atom, []).append(value)

    def growth(self, name: Term) -> Poly:
        return minus(self.algebra.normal(self.path.value(name)), self.algebra.normal(name))

    def own_area(self, level: Term, area: Term, time: Term) -> Poly:
        """The area without the rectangle that was held at the start."""
        return minus(self.growth(area), times(self.algebra.normal(level), self.growth(time)))

    def reached(self, level: Term, peak: Term) -> Cost | None:
        """How far above the starting level the path gets; None where no bound of it is known."""
        found = self._height(self.path.value(peak), level, peak, ROUND_LIMIT)
        if found is None:
            return None
        return Cost(found.low or NOTHING, found.high) if found.high is not None else None

    def _height(self, t: Term, level: Term, peak: Term, rounds: int) -> Cost | None:
        """Bounds of how far the value of a peak lies above the level; both None where it is the peak at the start."""
        if t == peak:
            return Cost(None, NOTHING)
        if not rounds:
            return None
        if t.op == "max":
            a, b = (self._height(x, level, peak, rounds - 1) for x in t.args)
            return None if a is None or b is None else self._higher(a, b)
        if t.op == "if":
            a, b = (self._height(x, level, peak, rounds - 1) for x in t.args[1:])
            condition = self._settled(self.algebra.normal(t.args[0]))
            if a is None or b is None or any(self._strange(x) for x in condition.deep if x.kind in ("var", "truth")):
                return None
            return Cost(
                self._either_one(condition, a.low, b.low), self._either_one(condition, a.high, b.high) or NOTHING
            )
        atom = self.algebra.variable_atom(t.name, t.sort) if t.op == "var" and "@" in t.name else None
        if atom is not None and atom in self.equal:
            return self._height(self.equal[atom], level, peak, rounds - 1)
        if atom is not None:
            bounds = [b for b in self.above.get(atom, []) if b != t]
            bounded = self._height(bounds[0], level, peak, rounds - 1) if bounds else None
            return None if bounded is None else Cost(None, bounded.high)
        above = minus(self.algebra.normal(t), self.algebra.normal(level))
        high = self.resolved(above, up=True)
        return None if high is None else Cost(self.resolved(above, up=False), high)

    def _higher(self, a: Cost, b: Cost) -> Cost:
        """Of the maximum of two; what was there at the start counts for nothing beside a level that is reached."""
        lows = [x for x in (a.low, b.low) if x is not None]
        low = lows[0] if lows else None
        if len(lows) == 2:
            low = self._greater(lows[0], lows[1])
        if a.high is None or b.high is None:
            return Cost(low, None)
        return Cost(low, self._greater(a.high, b.high))

    def _greater(self, p: Poly, q: Poly) -> Poly:
        difference = minus(p, q)
        return self._settled(plus(q, self.algebra.pos(difference)))

    def _either_one(self, condition: Poly, yes: Poly | None, no: Poly | None) -> Poly | None:
        if yes is None and no is None:
            return None
        yes, no = yes or NOTHING, no or NOTHING
        return plus(no, times(condition, minus(yes, no)))

    def resolved(self, poly: Poly, *, up: bool) -> Poly | None:
        """The expression over names that the loop cannot change and its variable: an upper or lower bound of it."""
        for _ in range(ROUND_LIMIT):
            strangers = sorted(a for a in poly.deep if a.kind in ("var", "truth") and self._strange(a))
            if not strangers:
                return self._settled(poly)
            atom = next((a for a in strangers if a in self.equal), None)
            if atom is not None:
                poly = self.algebra.rewrite(poly, {atom: self.algebra.normal(self.equal[atom])})
                continue
            step = self._bounded(poly, strangers, up=up)
            if step is None:
                return None
            poly = step
        return None

    def _settled(self, poly: Poly) -> Poly:
        """Comparisons and positive parts that the path's facts decide at sight are decided."""
        known: dict[Atom, Poly] = {}
        for atom in poly.deep:
            inner = atom.parts[0] if atom.kind in ("ind", "pos") else None
            if inner is None or atom.data == ("eq",) or atom.data == ("gt",):
                continue
            if self._plainly_not_negative(inner):
                known[atom] = inner if atom.kind == "pos" else UNITY
        return self.algebra.rewrite(poly, known) if known else poly

    def _plainly_not_negative(self, p: Poly) -> bool:
        """No less than a fact, or than a fact times something that is never negative."""
        factors = [UNITY, *(of_atom(a) for a in sorted(p.atoms) if a.nonneg)]
        return any(minus(p, times(x, f)).nonneg for f in self.not_negative for x in factors)

    def _bounded(self, poly: Poly, strangers: Sequence[Atom], *, up: bool) -> Poly | None:
        for atom in strangers:
            slope = poly.coefficient(atom)
            if slope is None:
                continue
            at_most = (slope > 0) == up
            bounds = (self.above if at_most else self.below).get(atom, [])
            if bounds:
                return self.algebra.rewrite(poly, {atom: self._tightest(bounds, at_most=at_most)})
            if not at_most and atom.nonneg:
                return self.algebra.rewrite(poly, {atom: constant(0)})
        return None

    def _tightest(self, bounds: Sequence[Term], *, at_most: bool) -> Poly:
        best, *others = map(self.algebra.normal, bounds)
        for b in others:
            difference = minus(best, b) if at_most else minus(b, best)
            if difference.nonneg:
                best = b
        return best

    def _strange(self, atom: Atom) -> bool:
        name = str(atom.data[0] if atom.kind == "var" else atom.data[1])
        if name == "@k":
            return False
        return "@" in name or (name in self.loop.changed and name != self.loop.variable)


def _turned(op: str) -> str:
    return {"=": "=", "<=": ">=", ">=": "<="}[op]
