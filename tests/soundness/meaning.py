"""What expressions of the language mean, straight from the syntax tree and language.md §5; a second opinion.

Exact integers and fractions. Nothing of `workbench.program` or `workbench.algebra` is used here.
"""

from __future__ import annotations

import operator
from collections.abc import Callable, Mapping
from fractions import Fraction
from math import comb, factorial, floor
from typing import Any, TypeAlias

from workbench.sheet import tree

Value: TypeAlias = int | Fraction | bool
Lookup: TypeAlias = Callable[[str, bool], Value]

# Bits of a number, terms of a sum, uses of a function inside each other: beyond them nothing is said.
BITS = 4_000
TERMS = 3_000
NESTING = 120


class NoValue(Exception):
    """The expression has no value: what the language makes an obligation is not met."""


class TooMuch(Exception):
    """Too large, too deep or too long to be worked out here; nothing is known."""


def of_sort(value: Value, sort: str) -> bool:
    """Whether the value is one of the sort."""
    if sort == "bool" or isinstance(value, bool):
        return sort == "bool" and isinstance(value, bool)
    return sort == "real" or (value == floor(value) and (sort == "int" or value >= 0))


def fixed(values: Mapping[str, Value]) -> Lookup:
    """Names by a table; primed ones stand in it with their quote."""

    def lookup(name: str, primed: bool) -> Value:
        return values[name + "'" if primed else name]

    return lookup


class Meaning:
    """Expressions of one sheet: its functions, constants and clocks."""

    def __init__(self, sheet: tree.Sheet, constants: Mapping[str, Value]) -> None:
        self.functions = {i.name: i for i in sheet.items if isinstance(i, tree.Function)}
        self.clocks = {
            g.name: g.clock
            for t in sheet.items
            if isinstance(t, tree.Tariff)
            for g in t.items
            if isinstance(g, tree.Gauge)
        }
        self.constants: dict[str, Value] = dict(constants)
        self.depth = 0
        waiting = [i for i in sheet.items if isinstance(i, tree.Constant) and i.value is not None]
        while waiting:
            later = []
            for item in waiting:
                try:
                    assert item.value is not None
                    self.constants[item.name] = self.value(item.value, fixed(self.constants))
                except KeyError:
                    later.append(item)
            if len(later) == len(waiting):
                raise NoValue("constants that need each other")
            waiting = later

    # -------------------------------------------------------------- expressions
    def value(self, e: tree.Expr, look: Lookup) -> Value:
        """The value. Raises NoValue, TooMuch, or KeyError for an unknown name."""
        match e:
            case tree.Number(value):
                return value.numerator if value.denominator == 1 else value
            case tree.Truth(truth):
                return truth
            case tree.Name(name, primed):
                return look(name, primed)
            case tree.Unary("not", operand):
                return not self.value(operand, look)
            case tree.Unary(_, operand):
                return -self.value(operand, look)
            case tree.Binary():
                return self._binary(e, look)
            case tree.Comparison(operands, ops):
                return self._chain(operands, ops, look)
            case tree.Conditional(condition, then, otherwise):
                return self.value(then if self.value(condition, look) else otherwise, look)
            case tree.Application():
                return self._applied(e, look)
            case tree.Summation():
                return self._summed(e, look)
            case tree.Short():
                return self._short(e, look)

    def holds(self, e: tree.Expr, look: Lookup) -> bool:
        """The value of a formula."""
        return bool(self.value(e, look))

    def _chain(self, operands: tuple[tree.Expr, ...], ops: tuple[str, ...], look: Lookup) -> bool:
        left = self.value(operands[0], look)
        for op, operand in zip(ops, operands[1:], strict=True):
            right = self.value(operand, look)
            if not _compared(op, left, right):
                return False
            left = right
        return True

    def _binary(self, e: tree.Binary, look: Lookup) -> Value:
        left = self.value(e.left, look)
        if e.op == "and":
            return bool(left) and self.holds(e.right, look)
        if e.op == "or":
            return bool(left) or self.holds(e.right, look)
        if e.op == "implies":
            return not left or self.holds(e.right, look)
        return _calculated(e.op, left, self.value(e.right, look))

    def _applied(self, e: tree.Application, look: Lookup) -> Value:
        values = [self.value(a, look) for a in e.arguments]
        if e.name in self.functions:
            return self.of_function(self.functions[e.name], values)
        return _built_in(e.name, values)

    def of_function(self, f: tree.Function, values: list[Value]) -> Value:
        """The function's value; no value where its types or its given do not hold."""
        table = dict(self.constants)
        for p, v in zip(f.parameters, values, strict=True):
            if not of_sort(v, p.sort):
                raise NoValue(f"{f.name} gets {v}, no {p.sort}")
            table[p.name] = v
        if self.depth >= NESTING:
            raise TooMuch(f"{f.name} nests too deep")
        self.depth += 1
        try:
            if f.given is not None and not self.holds(f.given, fixed(table)):
                raise NoValue(f"{f.name} is not defined there")
            result = self.value(f.body, fixed(table))
        finally:
            self.depth -= 1
        if not of_sort(result, f.sort):
            raise NoValue(f"{f.name} yields {result}, no {f.sort}")
        return result

    def _summed(self, e: tree.Summation, look: Lookup) -> Value:
        low, high = self.value(e.low, look), self.value(e.high, look)
        if not of_sort(low, "int") or not of_sort(high, "int"):
            raise NoValue("a sum between bounds that are no integers")
        if high - low > TERMS:
            raise TooMuch("a long sum")
        total: Value = 0
        for i in range(int(low), int(high) + 1):

            def inside(name: str, primed: bool, i: int = i) -> Value:
                return i if name == e.variable and not primed else look(name, primed)

            total += self.value(e.body, inside)
        return total

    def _short(self, e: tree.Short, look: Lookup) -> bool:
        """The table of short forms in language.md §6."""
        name, bound = e.resource, self.value(e.bound, look)
        if e.aspect in ("spent", "net"):
            return _compared(e.op, look(name, True), look(name, False) + bound)
        if e.aspect == "peak":
            reached = max(look(f"{name}.peak", False), look(name, False) + bound)
            return _compared(e.op, look(f"{name}.peak", True), reached)
        clock = self.clocks[name]
        assert clock is not None
        time = look(clock, True) - look(clock, False)
        area = look(f"{name}.area", True) - look(f"{name}.area", False) - look(name, False) * time
        return _compared(e.op, area, bound if e.aspect == "area" else bound * time)


_COMPARE: dict[str, Callable[[Any, Any], bool]] = {
    "=": operator.eq, "!=": operator.ne, "<": operator.lt, "<=": operator.le, ">": operator.gt, ">=": operator.ge,
}  # fmt: skip


def _compared(op: str, a: Value, b: Value) -> bool:
    return _COMPARE[op](a, b)


def _small(x: Any) -> Value:
    f = Fraction(x)
    if f.numerator.bit_length() + f.denominator.bit_length() > BITS:
        raise TooMuch("a large number")
    return f.numerator if f.denominator == 1 else f


def _calculated(op: str, a: Any, b: Any) -> Value:
    if op in ("+", "-"):
        return _small(a + b if op == "+" else a - b)
    if op == "*":
        return _small(a * b)
    if op == "/":
        if b == 0:
            raise NoValue("a division by zero")
        return _small(Fraction(a) / b)
    if op in ("div", "mod"):
        if b <= 0:
            raise NoValue(f"{op} by {b}")
        whole = floor(Fraction(a) / b)
        return whole if op == "div" else _small(Fraction(a) - b * whole)
    return _power(a, b)


def _power(base: Value, exponent: Value) -> Value:
    if exponent != floor(exponent):
        raise NoValue("an exponent that is no integer")
    if base == 0 and exponent < 0:
        raise NoValue("a negative power of 0")
    size = Fraction(base)
    if abs(int(exponent)) * max(size.numerator.bit_length() + size.denominator.bit_length(), 2) > BITS:
        raise TooMuch("a large power")
    return _small(size ** int(exponent))


def _built_in(name: str, values: list[Any]) -> Value:
    x = values[0]
    if name in ("max", "min"):
        return _small(max(values) if name == "max" else min(values))
    if name == "abs":
        return _small(abs(x))
    if name == "floor":
        return _small(floor(x))
    if name == "ceil":
        return _small(-floor(-x))
    if name == "lg":
        if x < 1:
            raise NoValue(f"lg of {x}")
        k = 0
        while 2 ** (k + 1) <= x:
            k += 1
        return k
    if any(not of_sort(v, "nat") for v in values):
        raise NoValue(f"{name} of {values}")
    if max(values) > 300:
        raise TooMuch(f"{name} of {values}")
    return factorial(int(x)) if name == "fact" else comb(int(x), int(values[1]))
