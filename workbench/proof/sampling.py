"""Values for names that satisfy given facts: small ones and edges, worked out from equations and bounds where there
are any.
"""

from __future__ import annotations

import random
from collections.abc import Callable, Iterator, Mapping, Sequence
from fractions import Fraction
from math import ceil, floor

from workbench.algebra.evaluate import Evaluator, TooLarge, Undefined
from workbench.algebra.terms import Rational, Term, variables

Value = Rational | bool
Values = dict[str, Value]

_USUAL: dict[str, tuple[Value, ...]] = {
    "nat": (0, 1, 2, 3, 4, 5, 7, 8, 16),
    "int": (0, 1, -1, 2, -2, 3, 5, -7),
    "real": (0, 1, -1, 2, Fraction(1, 2), -3, 7, Fraction(-5, 3)),
    "bool": (False, True),
}
# How far beyond a bound a value is tried.
_STEPS = (0, 0, 0, 1, 1, 2, 5)
Compiled = Callable[[Mapping[str, Value]], Value]


class Sampler:
    """Draws values for the free names of some facts and of whatever else is asked for. Deterministic for a seed."""

    def __init__(
        self, facts: Sequence[Term], also: Sequence[Term], evaluator: Evaluator, seed: int = 1
    ) -> None:
        self._random = random.Random(seed)
        self._facts = [(variables(f), evaluator.compiled(f)) for f in facts]
        names: dict[Term, None] = {}
        for t in (*facts, *also):
            names.update(dict.fromkeys(sorted(variables(t), key=lambda v: v.name)))
        self._plan = _plan(list(names), facts, evaluator)
        self._checks = _checks(self._plan, self._facts)
        self._closed = [check for names_, check in self._facts if not names_]

    def draw(self, tries: int) -> Iterator[Values]:
        """Assignments that satisfy all facts, out of that many tries; the first tries are the smallest values."""
        try:
            if not all(check({}) for check in self._closed):
                return
        except (Undefined, TooLarge):
            return
        for attempt in range(tries):
            values = self._one(attempt)
            if values is not None:
                yield values

    def _one(self, attempt: int) -> Values | None:
        values: Values = {}
        for (name, how), checks in zip(self._plan, self._checks, strict=True):
            try:
                value = how.value(values, attempt, self._random)
            except (Undefined, TooLarge):
                return None
            if value is None:
                return None
            values[name.name] = value
            try:
                if not all(check(values) for check in checks):
                    return None
            except (Undefined, TooLarge):
                return None
        return values


class _Choice:
    """How one name gets its value: from an equation, else between the bounds that are known by then, else a usual
    one.
    """

    __slots__ = ("sort", "equal", "lower", "upper")

    def __init__(self, sort: str) -> None:
        self.sort = sort
        self.equal: Compiled | None = None
        self.lower: list[tuple[Compiled, bool]] = []
        self.upper: list[tuple[Compiled, bool]] = []

    def value(self, values: Values, attempt: int, rng: random.Random) -> Value | None:
        if self.equal is not None:
            return _as_sort(self.equal(values), self.sort)
        usual = _USUAL[self.sort]
        if not self.lower and not self.upper:
            return usual[attempt] if attempt < 3 and attempt < len(usual) else rng.choice(usual)
        low = max((self._end(b, strict, values, up=True) for b, strict in self.lower), default=None)
        high = min((self._end(b, strict, values, up=False) for b, strict in self.upper), default=None)
        if self.sort == "nat":
            low = max(low, 0) if low is not None else 0
        if low is not None and high is not None and low > high:
            return None
        if low is not None and (high is None or rng.random() < 0.5):
            value = low + rng.choice(_STEPS)
            return value if high is None or value <= high else high
        assert high is not None
        value = high - rng.choice(_STEPS)
        return value if low is None or value >= low else low

    def _end(self, bound: Compiled, strict: bool, values: Values, *, up: bool) -> Rational:
        end = bound(values)
        if self.sort == "real":
            return end + (Fraction(1, 2) if up else Fraction(-1, 2)) if strict else end
        if up:
            return floor(end) + 1 if strict else ceil(end)
        return ceil(end) - 1 if strict else floor(end)


def _as_sort(value: Value, sort: str) -> Value | None:
    if sort == "bool":
        return bool(value)
    if sort != "real" and value != floor(value):
        return None
    return None if sort == "nat" and value < 0 else value


def _plan(
    names: Sequence[Term], facts: Sequence[Term], evaluator: Evaluator
) -> list[tuple[Term, _Choice]]:
    """Names in an order in which equations and bounds speak of earlier ones only, as far as that can be had."""
    sides = [s for f in facts for s in _sides(f)]
    equal_first: dict[Term, list[Term]] = {}
    for name, op, other in sides:
        if op == "=":
            equal_first.setdefault(name, []).append(other)
    order: list[tuple[Term, _Choice]] = []
    placed: set[Term] = set()
    waiting = list(names)
    while waiting:
        pick = _next(waiting, equal_first, placed)
        waiting.remove(pick)
        choice = _Choice(pick.sort)
        for name, op, other in sides:
            if name != pick or not variables(other) <= placed:
                continue
            compiled = evaluator.compiled(other)
            if op == "=" and choice.equal is None:
                choice.equal = compiled
            elif op in ("<", "<="):
                choice.upper.append((compiled, op == "<"))
            elif op in (">", ">="):
                choice.lower.append((compiled, op == ">"))
        if pick.sort == "bool":
            choice.lower, choice.upper = [], []
        placed.add(pick)
        order.append((pick, choice))
    return order


def _next(waiting: Sequence[Term], equal: Mapping[Term, Sequence[Term]], placed: set[Term]) -> Term:
    """A name whose equation is ready; else one that has no equation, named by the sheet rather than fresh."""
    for name in waiting:
        if any(variables(e) <= placed for e in equal.get(name, ())):
            return name
    free = [n for n in waiting if n not in equal] or list(waiting)
    return min(free, key=lambda n: ("@" in n.name, "." in n.name))


def _sides(formula: Term) -> Iterator[tuple[Term, str, Term]]:
    """(name, relation, term) for comparisons, among the conjuncts, with a name alone on one side."""
    turned = {"<": ">", "<=": ">=", ">": "<", ">=": "<=", "=": "=", "iff": "="}
    work = [formula]
    while work:
        f = work.pop()
        if f.op == "and":
            work.extend(f.args)
        elif f.op in turned:
            a, b = f.args
            op = "=" if f.op == "iff" else f.op
            if a.op == "var" and a not in variables(b):
                yield a, op, b
            if b.op == "var" and b not in variables(a):
                yield b, turned[op], a
        elif f.op == "var" and f.sort == "bool":
            yield f, "=", Term("true", sort="bool")
        elif f.op == "not" and f.args[0].op == "var":
            yield f.args[0], "=", Term("false", sort="bool")


def _checks(plan: Sequence[tuple[Term, _Choice]], facts: Sequence[tuple[set[Term], Compiled]]) -> list[list[Compiled]]:
    """The facts that can be decided once each name has its value."""
    result: list[list[Compiled]] = []
    placed: set[Term] = set()
    left = list(facts)
    for name, _ in plan:
        placed.add(name)
        result.append([check for names, check in left if names <= placed])
        left = [(names, check) for names, check in left if not names <= placed]
    return result
