"""Claims of a `for` loop that nobody needs to write: what its body does once, summed over what is left of the range.

These are candidates. They are proved like any other claim and dropped where they are not, so nothing here is trusted.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from fractions import Fraction
from math import comb

from workbench.algebra.denormal import term_of
from workbench.algebra.formulas import show
from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import (
    NOTHING,
    UNITY,
    Poly,
    TooLargeToNormalize,
    minus,
    plus,
    scaled,
    times,
)
from workbench.algebra.terms import ONE, Term, app, names, num, substitute, summation, var
from workbench.program.growth import Cost, Solved
from workbench.program.paths import Path
from workbench.program.priced import Claim, Loop
from workbench.program.specifying import Names

# Powers of the loop's variable that are summed in closed form.
DEGREE_LIMIT = 8
Iteration = Callable[[], tuple[list[Path], list[Path]]]


def inferred(known: Names, loop: Loop, iteration: Iteration) -> tuple[Claim, ...]:
    """Candidates for the names that the loop changes and its written claims do not mention."""
    spoken = {n.rstrip("'") for c in loop.spec.claims for n in names(c.formula) if n.endswith("'")}
    wanted = [n for n in sorted(loop.changed) if n != loop.variable and n not in spoken and known.sorts[n] != "bool"]
    if not wanted or loop.variable is None or loop.upper is None:
        return ()
    bodies, exits = iteration()
    try:
        return tuple(_Summing(known, loop, bodies, exits).claims(wanted))
    except TooLargeToNormalize:
        return ()


class _Summing:
    def __init__(self, known: Names, loop: Loop, bodies: Sequence[Path], exits: Sequence[Path]) -> None:
        self.algebra = Algebra()
        self.known = known
        self.loop = loop
        self.bodies = [Solved(self.algebra, loop, p) for p in bodies]
        self.exits = [Solved(self.algebra, loop, p) for p in exits]
        self.variable = known.present(loop.variable or "")
        self.upper = loop.upper or self.variable

    def claims(self, wanted: Sequence[str]) -> list[Claim]:
        found: list[Claim] = []
        for name in wanted:
            root, _, part = name.partition(".")
            if part == "peak":
                found += self._peak(root)
            elif part == "area":
                found += self._area(root)
            else:
                aspect = "net" if root in self.known.program.gauges else "spent"
                found += self._growth(name, aspect if self.known.is_resource(name) else "")
        return found

    # -------------------------------------------------------------- one name
    def _cost(self, paths: Iterable[Solved], grown: Callable[[Solved], Poly]) -> Cost:
        """Over all paths: the least lower and the greatest upper bound that can be told apart."""
        lows, highs = [], []
        for p in paths:
            poly = grown(p)
            lows.append(p.resolved(poly, up=False))
            highs.append(p.resolved(poly, up=True))
        return Cost(self._extreme(lows, up=False), self._extreme(highs, up=True))

    def _extreme(self, bounds: Sequence[Poly | None], *, up: bool) -> Poly | None:
        best = bounds[0]
        for b in bounds[1:]:
            if best is None or b is None:
                return None
            difference = minus(b, best)
            if difference.nonneg:
                best = b if up else best
            elif scaled(difference, -1).nonneg:
                best = best if up else b
            else:
                above = self.algebra.pos(difference)
                best = plus(best, above) if up else minus(b, above)
        return best

    def _growth(self, name: str, aspect: str) -> list[Claim]:
        me = self.known.present(name)
        cost = self._cost(self.bodies, lambda p: p.growth(me))
        last = self._cost(self.exits, lambda p: p.growth(me))
        if last.exact is None:
            return []
        made = []
        relations = [("=", cost.exact)] if cost.exact is not None else [("<=", cost.high), (">=", cost.low)]
        for relation, poly in relations:
            if poly is not None:
                total = _plus(self.summed(poly), self.term(last.exact))
                formula = app(relation, var(name + "'", me.sort), app("+", me, total))
                text = f"{aspect} {name} {relation} {show(total)}" if aspect else show(formula)
                made.append(self._claim(f"{aspect or 'change'} {name}", relation, formula, text))
        return made

    def _peak(self, gauge: str) -> list[Claim]:
        level, peak = self.known.present(gauge), self.known.present(f"{gauge}.peak")
        net = self._cost(self.bodies, lambda p: p.growth(level)).exact
        reached = [r for p in self.bodies if (r := p.reached(level, peak)) is not None]
        if net is None or len(reached) != len(self.bodies):
            return []
        exact = reached[0].exact is not None and all(r.exact == reached[0].exact for r in reached)
        highest = self._extreme([r.high for r in reached], up=True)
        if highest is None:
            return []
        made: list[Claim] = []
        seen: set[Term] = set()
        for place in (self.upper, self.variable):
            at = substitute(self.term(highest), {self.variable: place})
            before = self.partial(net, place)
            top = _plus(before, at)
            formula = _if_any(self, app("max", peak, app("+", level, top)), peak, "=" if exact else "<=", gauge)
            if formula not in seen:
                seen.add(formula)
                relation = "=" if exact else "<="
                value = Term("if", (app("<=", self.variable, self.upper), top, num(0)))
                label = f"peak {gauge}" if not made else f"peak {gauge} ({len(made) + 1})"
                made.append(self._claim(label, relation, formula, f"peak {gauge} {relation} {show(value)}"))
        return made

    def _area(self, gauge: str) -> list[Claim]:
        clock = self.known.program.gauges[gauge].clock
        if clock is None:
            return []
        level, area = self.known.present(gauge), self.known.present(f"{gauge}.area")
        time = self.known.present(clock)
        net = self._cost(self.bodies, lambda p: p.growth(level)).exact
        spent = self._cost(self.bodies, lambda p: p.growth(time))
        last = self._cost(self.exits, lambda p: p.growth(time)).exact
        own = self._cost(self.bodies, lambda p: p.own_area(level, area, time))
        if net is None or last is None:
            return []
        made = []
        relations = [("=", own.exact)] if own.exact is not None else [("<=", own.high), (">=", own.low)]
        for relation, poly in relations:
            if poly is None or (net.terms and spent.exact is None):
                continue
            total = self.summed(poly)
            if net.terms and spent.exact is not None:
                total = _plus(total, self._held(net, spent.exact))
                total = _plus(total, app("*", self.summed(net), self.term(last)))
            duration = app("-", var(time.name + "'", "real"), time)
            rectangle = app("+", app("+", area, app("*", level, duration)), total)
            formula = app(relation, var(area.name + "'", "real"), rectangle)
            made.append(self._claim(f"area {gauge}", relation, formula, f"area {gauge} {relation} {show(total)}"))
        return made

    def _claim(self, label: str, relation: str, formula: Term, text: str) -> Claim:
        bound = {"=": "", "<=": " at most", ">=": " at least"}[relation]
        return Claim(f"{label}{bound}", formula, text, (), self.loop.span, inferred=True)

    # -------------------------------------------------------------- sums
    def term(self, poly: Poly) -> Term:
        return term_of(poly)

    def summed(self, poly: Poly) -> Term:
        """The sum over the variable's values that are left, as a term over the variable where it stands."""
        return self._sum(poly, self.variable, self.upper)

    def partial(self, poly: Poly, place: Term) -> Term:
        """The sum over the values from the variable on to before `place`."""
        if place == self.variable or not poly.terms:
            return num(0)
        return self._sum(poly, self.variable, app("-", place, ONE))

    def variable_at_k(self) -> Term:
        """A name for the iteration that a sum is at."""
        return var("@k", "int")

    def _held(self, net: Poly, spent: Poly) -> Term:
        """Σ over the iterations k left of (what those before k have taken) * (what k spends)."""
        k = self.variable_at_k()
        taken = self._closed(self._at(net, k), k, self.variable, app("-", k, ONE))
        if taken is None:
            inner = var(self._free_name() + "0", "int")
            taken = self.algebra.normal(
                summation(inner, self.variable, app("-", k, ONE), substitute(self.term(net), {self.variable: inner}))
            )
        return self._closed_or_sum(times(taken, self._at(spent, k)), k, self.variable, self.upper)

    def _at(self, poly: Poly, k: Term) -> Poly:
        return self.algebra.normal(substitute(self.term(poly), {self.variable: k}))

    def _sum(self, poly: Poly, low: Term, high: Term) -> Term:
        k = self.variable_at_k()
        return self._closed_or_sum(self._at(poly, k), k, low, high)

    def _closed_or_sum(self, poly: Poly, k: Term, low: Term, high: Term) -> Term:
        if not poly.terms:
            return num(0)
        closed = self._closed(poly, k, low, high)
        if closed is not None:
            return Term("if", (app("<=", low, app("+", high, ONE)), self.term(closed), num(0)))
        bound = var(self._free_name(), "int")
        return summation(bound, low, high, substitute(self.term(poly), {k: bound}))

    def _free_name(self) -> str:
        taken = set(self.known.sorts) | set(self.known.program.constants)
        return next(n for n in ("j", "m", "q", *(f"j{i}" for i in range(1000))) if n not in taken)

    def _closed(self, poly: Poly, k: Term, low: Term, high: Term) -> Poly | None:
        """F(high) - F(low - 1) for F(m) the sum of the polynomial over 1 … m."""
        atom = self.algebra.variable_atom(k.name, k.sort)
        by_degree: dict[int, Poly] = {}
        for mono, c in poly.terms.items():
            degree = sum(e for a, e in mono if a == atom)
            others = tuple((a, e) for a, e in mono if a != atom)
            if not 0 <= degree <= DEGREE_LIMIT or any(atom in a.deep for a, _ in others):
                return None
            by_degree[degree] = plus(by_degree.get(degree, NOTHING), Poly({others: c}))
        top, below = self.algebra.normal(high), minus(self.algebra.normal(low), UNITY)
        total = NOTHING
        for degree, coefficient in by_degree.items():
            total = plus(total, times(coefficient, minus(_power_sum(degree, top), _power_sum(degree, below))))
        return total


def _if_any(s: _Summing, reached: Term, peak: Term, relation: str, gauge: str) -> Term:
    """Where no iteration is left, the peak stays."""
    value = Term("if", (app("<=", s.variable, s.upper), reached, peak))
    return app(relation, var(f"{gauge}.peak'", "real"), value)


def _plus(a: Term, b: Term) -> Term:
    if a == num(0):
        return b
    return a if b == num(0) else app("+", a, b)


def _power_sum(degree: int, m: Poly) -> Poly:
    """1^d + … + m^d as a polynomial in m, by Bernoulli's numbers (Faulhaber's formula)."""
    result = NOTHING
    powers = [UNITY]
    for _ in range(degree + 1):
        powers.append(times(powers[-1], m))
    for j in range(degree + 1):
        factor = Fraction(comb(degree + 1, j), degree + 1) * _bernoulli(j)
        result = plus(result, scaled(powers[degree + 1 - j], factor))
    return result


def _bernoulli(n: int) -> Fraction:
    """Bernoulli's numbers with B1 = +1/2, by their recurrence."""
    numbers: list[Fraction] = []
    for m in range(n + 1):
        rest = sum((comb(m + 1, j) * numbers[j] for j in range(m)), Fraction(0))
        numbers.append((m + 1 - rest) / (m + 1))
    return numbers[n]
