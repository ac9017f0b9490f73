"""The exact normal form: terms and formulas as polynomials over atoms.

A formula's normal form is its indicator: a polynomial that is 1 where the formula holds and 0 elsewhere, over
indicators of single comparisons and of names that are true or false. How operators are read, also beyond their
domains, stands in `operators`.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TypeAlias

from workbench.algebra.operators import Operators, ReservedName
from workbench.algebra.polynomial import (
    BOUND,
    NOTHING,
    UNITY,
    Atom,
    Poly,
    TooLargeToNormalize,
    constant,
    minus,
    of_atom,
    plus,
    scaled,
    total,
)
from workbench.algebra.terms import Term, substitute, variables

# An atom's image under a rewriting, and the atoms that fired in it.
Rewritten: TypeAlias = dict[Atom, tuple[Poly, frozenset[Atom]]]


class Algebra(Operators):
    """Normal forms of terms, and equals put for equals in them. One serves one sheet: it only grows."""

    def __init__(self) -> None:
        super().__init__()
        self._memo: dict[Term, Poly] = {}
        self._heights: dict[Term, int] = {}

    # -------------------------------------------------------------- terms
    def normal(self, term: Term, values: Mapping[Term, Poly] | None = None) -> Poly:
        """The normal form; `values` stand for variables of the term (laws and functions use it)."""
        memo: dict[Term, Poly] = self._memo if values is None else dict(values)
        sums: dict[Term, tuple[Term, ...]] = {}
        stack = [term]
        while stack:
            t = stack[-1]
            if t in memo:
                stack.pop()
                continue
            if t.op == "sum" and t not in sums:
                self.tick()
                sums[t] = self._canonical_sum(t).args
            needed = sums.get(t, t.args)
            missing = [a for a in needed if a not in memo]
            if missing:
                stack.extend(missing)
                continue
            args = [memo[a] for a in needed]
            memo[t] = self.sum(needed[0].name, *args[1:]) if t.op == "sum" else self._build(t, args)
            stack.pop()
        return memo[term]

    def _build(self, t: Term, args: list[Poly]) -> Poly:
        op = t.op
        match op:
            case "num":
                return constant(t.value)
            case "var":
                return self.variable(t.name, t.sort)
            case "bound":
                return of_atom(self.bound_atom(t.name))
            case "+":
                return plus(*args)
            case "-":
                return minus(*args)
            case "neg":
                return scaled(args[0], -1)
            case "*":
                return self.times(*args)
            case "/":
                return self.times(args[0], self.inverse(args[1]))
            case "div":
                return self.floor(self.times(args[0], self.inverse(args[1])))
            case "mod":
                return minus(args[0], self.times(args[1], self.floor(self.times(args[0], self.inverse(args[1])))))
            case "^":
                return self.power(*args)
            case "abs":
                return minus(scaled(self.pos(args[0]), 2), args[0])
            case "floor":
                return self.floor(args[0])
            case "ceil":
                return scaled(self.floor(scaled(args[0], -1)), -1)
            case "max":
                return plus(args[1], self.pos(minus(args[0], args[1])))
            case "min":
                return minus(args[0], self.pos(minus(args[0], args[1])))
            case "lg":
                return self.lg(args[0])
            case "fact":
                return self.fact(args[0])
            case "binom":
                return self.binom(*args)
            case "if":
                return plus(args[2], self.times(args[0], minus(args[1], args[2])))
            case "call":
                return self.call(t.name, t.sort, tuple(args))
        return self._formula(op, args)

    def _formula(self, op: str, args: list[Poly]) -> Poly:
        match op:
            case "true":
                return UNITY
            case "false":
                return NOTHING
            case "not":
                return minus(UNITY, args[0])
            case "and":
                return self.times(*args)
            case "or":
                return minus(plus(*args), self.times(*args))
            case "implies":
                return plus(minus(UNITY, args[0]), self.times(*args))
            case "iff":
                return plus(minus(UNITY, plus(*args)), scaled(self.times(*args), 2))
            case "=":
                return self.equal(minus(*args))
            case "!=":
                return minus(UNITY, self.equal(minus(*args)))
            case "<=":
                return self.compare(minus(args[1], args[0]), strict=False)
            case "<":
                return self.compare(minus(args[1], args[0]), strict=True)
            case ">=":
                return self.compare(minus(*args), strict=False)
            case ">":
                return self.compare(minus(*args), strict=True)
        raise ValueError(f"no such operator: {op}")

    # -------------------------------------------------------------- sums
    def _canonical_sum(self, t: Term) -> Term:
        """Bound variables are named by the height of the sum: equal sums look equal, and none catches another's.

        The name stands in the body as an operator of its own, so that it cannot be taken for a name of the formula.
        """
        bound, low, high, body = t.args
        if any(v.name == bound.name and v != bound for v in variables(body)):
            raise ReservedName(f"the name '{bound.name}' is bound in a sum and has another type inside it")
        canonical = Term("bound", name=f"{BOUND}{self._height(body) + 1}", sort="int")
        return Term("sum", (canonical, low, high, substitute(body, {bound: canonical})))

    def _height(self, term: Term) -> int:
        """How deep the sums in it are nested."""
        stack = [term]
        while stack:
            t = stack[-1]
            if t in self._heights:
                stack.pop()
                continue
            missing = [a for a in t.args if a not in self._heights]
            if missing:
                stack.extend(missing)
                continue
            below = max((self._heights[a] for a in t.args), default=0)
            self._heights[t] = below + 1 if t.op == "sum" else below
            stack.pop()
        return self._heights[term]

    # -------------------------------------------------------------- rewriting
    def rewrite(
        self, p: Poly, known: Mapping[Atom, Poly], memo: Rewritten | None = None, used: set[Atom] | None = None
    ) -> Poly:
        """p with atoms replaced by equals, inside other atoms too; atoms that fired are added to `used`.

        The caller answers for it that no key of `known` occurs in an image. `memo` may be shared between calls with
        the same `known`.
        """
        return self._rewritten(p, known, {} if memo is None else memo, used, again=True)

    def instantiated(self, p: Poly, bound: Atom, value: Poly) -> Poly:
        """p with the value for the variable that a sum binds; the value may contain that very variable."""
        return self._rewritten(p, {bound: value}, {}, None, again=False)

    def _rewritten(
        self, p: Poly, known: Mapping[Atom, Poly], memo: Rewritten, used: set[Atom] | None, *, again: bool
    ) -> Poly:
        untouched = known.keys().isdisjoint
        if untouched(p.deep):
            return p
        parts: list[Poly] = []
        for mono, c in p.terms.items():
            kept = tuple(f for f in mono if untouched(f[0].deep))
            product = Poly({kept: c})
            for a, e in mono if len(kept) < len(mono) else ():
                if untouched(a.deep):
                    continue
                if a not in memo:
                    memo[a] = self._image(a, known, memo, again=again)
                image, fired = memo[a]
                if used is not None:
                    used |= fired
                product = self.times(product, image if e == 1 else self.raised(image, e))
            parts.append(product)
        return total(parts)

    def _image(
        self, a: Atom, known: Mapping[Atom, Poly], memo: Rewritten, *, again: bool
    ) -> tuple[Poly, frozenset[Atom]]:
        if a in known:
            return known[a], frozenset((a,))
        fired: set[Atom] = set()
        parts = [self._rewritten(part, known, memo, fired, again=again) for part in a.parts[:2]]
        if a.kind == "sum":
            within = self._within(str(a.data[0]), a.parts[2], known)
            parts.append(self._rewritten(a.parts[2], within, {}, fired, again=again))
        else:
            parts.extend(self._rewritten(part, known, memo, fired, again=again) for part in a.parts[2:])
        built = self.rebuilt(a, tuple(parts))
        if again and not known.keys().isdisjoint(built.deep):  # it became something that is known
            built = self._rewritten(built, known, {}, fired, again=False)
        return built, frozenset(fired)

    @staticmethod
    def _within(bound: str, body: Poly, known: Mapping[Atom, Poly]) -> dict[Atom, Poly]:
        """What may be replaced in the body of a sum: not the variable bound there, and by nothing with its name."""
        within = {k: v for k, v in known.items() if k in body.deep and not (k.kind == "var" and k.data[0] == bound)}
        if any(bound in v.loose for v in within.values()):
            raise TooLargeToNormalize("a sum inside a sum over the same variable")
        return within
