"""Obligations for a general SMT solver (z3): a second opinion, and something to measure against.

Integers and reals are the solver's own. Powers with a numeric base, lg, sums, factorials, binomials and the sheet's
functions are uninterpreted, with the equations that define them on the terms that occur. An answer `proved` means
that the negation has no model.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

import z3

from workbench.algebra.terms import ONE, Term, app, num, substitute
from workbench.program.priced import Function


@dataclass
class Encoding:
    """Terms as expressions of the solver. `axioms` fill up as terms are met; `exact` says that nothing is
    uninterpreted.
    """

    functions: Mapping[str, Function] = field(default_factory=dict)
    axioms: list[Any] = field(default_factory=list)
    exact: bool = True
    depth: int = 0
    _memo: dict[Term, Any] = field(default_factory=dict)
    _unfolded: set[tuple[str, str]] = field(default_factory=set)

    def formula(self, t: Term) -> Any:
        """A formula as a solver's boolean."""
        match t.op:
            case "true" | "false":
                return z3.BoolVal(t.op == "true")
            case "not":
                return z3.Not(self.formula(t.args[0]))
            case "and":
                return z3.And(*map(self.formula, t.args))
            case "or":
                return z3.Or(*map(self.formula, t.args))
            case "implies":
                return z3.Implies(*map(self.formula, t.args))
            case "iff":
                return self.formula(t.args[0]) == self.formula(t.args[1])
            case "if":
                return z3.If(*map(self.formula, t.args))
            case "var":
                return z3.Bool(t.name)
            case "call":
                return self._uninterpreted(t, z3.BoolSort())
        left, right = map(self.number, t.args)
        return {"=": left == right, "!=": left != right, "<": left < right, "<=": left <= right,
                ">": left > right, ">=": left >= right}[t.op]  # fmt: skip

    def number(self, t: Term) -> Any:
        """A number as a real; integers are converted where they are named."""
        if t not in self._memo:
            self._memo[t] = self._number(t)
        return self._memo[t]

    def _number(self, t: Term) -> Any:
        op = t.op
        if op == "num":
            value = Fraction(t.value)
            return z3.RealVal(f"{value.numerator}/{value.denominator}")
        if op == "var":
            return self._name(t)
        if op == "if":
            return z3.If(self.formula(t.args[0]), self.number(t.args[1]), self.number(t.args[2]))
        if op in ("sum", "call", "lg", "fact", "binom"):
            return self._uninterpreted(t, z3.RealSort())
        a = [self.number(x) for x in t.args]
        match op:
            case "+":
                return a[0] + a[1]
            case "-":
                return a[0] - a[1]
            case "*":
                return a[0] * a[1]
            case "neg":
                return -a[0]
            case "/":
                return a[0] / a[1]
            case "floor":
                return z3.ToReal(z3.ToInt(a[0]))
            case "ceil":
                return -z3.ToReal(z3.ToInt(-a[0]))
            case "div":
                return z3.ToReal(z3.ToInt(a[0] / a[1]))
            case "mod":
                return a[0] - a[1] * z3.ToReal(z3.ToInt(a[0] / a[1]))
            case "max":
                return z3.If(a[0] >= a[1], a[0], a[1])
            case "min":
                return z3.If(a[0] <= a[1], a[0], a[1])
            case "abs":
                return z3.If(a[0] >= 0, a[0], -a[0])
            case "^":
                return self._power(t, a)
        raise ValueError(op)

    def _name(self, t: Term) -> Any:
        if t.sort == "real":
            return z3.Real(t.name)
        whole = z3.Int(t.name)
        if t.sort == "nat":
            self.axioms.append(whole >= 0)
        return z3.ToReal(whole)

    def _power(self, t: Term, a: Sequence[Any]) -> Any:
        """b^e: written out for small numbers; else a value with b^(e+1) = b*b^e and its sign."""
        exponent = t.args[1]
        if exponent.op == "num" and isinstance(exponent.value, int) and 0 <= exponent.value <= 8:
            result = z3.RealVal(1)
            for _ in range(exponent.value):
                result = result * a[0]
            return result
        self.exact = False
        power = z3.Function("power", z3.RealSort(), z3.RealSort(), z3.RealSort())
        base, value = a[0], power(a[0], a[1])
        self.axioms += [
            z3.Implies(base > 0, value > 0),
            z3.Implies(z3.And(base >= 1, a[1] >= 0), value >= 1),
            z3.Implies(base != 0, power(base, a[1] + 1) == base * value),
            z3.Implies(base != 0, value == base * power(base, a[1] - 1)),
            power(base, z3.RealVal(0)) == 1,
        ]
        return value

    def _uninterpreted(self, t: Term, sort: Any) -> Any:
        self.exact = False
        name = f"{t.op}_{t.name}"
        if t.op == "sum":
            name = f"sum_{abs(hash(t))}"
            return z3.Const(name, sort)
        arguments = [self.number(x) for x in t.args]
        function = z3.Function(name, *(z3.RealSort() for _ in arguments), sort)
        value = function(*arguments)
        key = (name, str(value))
        if key not in self._unfolded and self.depth < 2:
            self._unfolded.add(key)
            self.depth += 1
            self._define(t, value, arguments)
            self.depth -= 1
        return value

    def _define(self, t: Term, value: Any, a: Sequence[Any]) -> None:
        if t.op == "call" and t.name in self.functions and t.sort != "bool":
            f = self.functions[t.name]
            parameters = {Term("var", name=p.name, sort=p.sort): x for p, x in zip(f.parameters, t.args, strict=True)}
            self.axioms.append(value == self.number(substitute(f.body, parameters)))
            if f.sort == "nat":
                self.axioms.append(value >= 0)
        elif t.op == "lg":
            two = self.number(app("^", num(2), t))
            self.axioms += [z3.Implies(a[0] >= 1, z3.And(value >= 0, two <= a[0], a[0] < 2 * two)), z3.IsInt(value)]
        elif t.op == "fact":
            before = self.number(app("fact", app("-", t.args[0], ONE)))
            self.axioms += [value >= 1, z3.Implies(a[0] >= 1, value == a[0] * before), z3.Implies(a[0] == 0, value ==
            1)]


@dataclass(frozen=True)
class Answer:
    """`verdict`: proved, refuted (a model in which nothing is uninterpreted), or open."""

    verdict: str
    exact: bool


def ask(facts: Sequence[Term], goal: Term, functions: Mapping[str, Function], milliseconds: int = 2_000) -> Answer:
    """Whether the negation of facts => goal has a model."""
    encoding = Encoding(functions)
    solver = z3.Solver()
    solver.set("timeout", milliseconds)
    try:
        formulas = [encoding.formula(f) for f in facts]
        negated = z3.Not(encoding.formula(goal))
    except RecursionError:
        return Answer("open", False)
    solver.add(*formulas, negated, *encoding.axioms)
    found = solver.check()
    if found == z3.unsat:
        return Answer("proved", encoding.exact)
    if found == z3.sat and encoding.exact:
        return Answer("refuted", True)
    return Answer("open", encoding.exact)
