"""Exact values of terms: integers and fractions, never floating point.

A term is compiled once into a Python function of its names' values, so that thousands of evaluations are cheap. What
has no value raises `Undefined`; what would take too long or too much room raises `TooLarge`. `and`, `or`, `implies`
and `if` look at what follows them only where it counts.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import comb, factorial, floor
from typing import Any, TypeAlias

from workbench.algebra.terms import Rational, Sort, Term
from workbench.errors import UllageError

Value: TypeAlias = Rational | bool
Compiled: TypeAlias = Callable[[Mapping[str, Value]], Value]

# Bits of a number that is worked out: 10 to the power of about 6,000.
BIT_LIMIT = 20_000
# Terms of a sum.
RANGE_LIMIT = 20_000
# Calls of functions in one evaluation, and how deep they nest (each takes a few Python frames).
CALL_LIMIT = 50_000
DEPTH_LIMIT = 150


class Undefined(UllageError):
    """The expression has no value: a division by zero, lg of nothing, a fraction where a whole number must stand."""


class TooLarge(UllageError):
    """The value, or the work for it, grows beyond the limits."""


@dataclass(frozen=True, slots=True)
class Definition:
    """A function as evaluation takes it. `given`: what it is defined for, beside the types of its parameters."""

    parameters: tuple[tuple[str, Sort], ...]
    sort: Sort
    body: Term
    given: Term | None = None


def evaluate(term: Term, values: Mapping[str, Value], functions: Mapping[str, Definition] | None = None) -> Value:
    """The term's value. Raises Undefined, TooLarge, or KeyError for a name without a value."""
    return compile_term(term, functions)(values)


def compile_term(term: Term, functions: Mapping[str, Definition] | None = None) -> Compiled:
    """The term as a function of its names' values; raises as `evaluate` does."""
    return _Compiler(functions or {}).function(term)


class Evaluator:
    """Compiles each term once: obligations of one program share most of their facts."""

    def __init__(self, functions: Mapping[str, Definition]) -> None:
        self.functions = functions
        self._known: dict[Term, Compiled] = {}

    def compiled(self, term: Term) -> Compiled:
        """As `compile_term`."""
        found = self._known.get(term)
        if found is None:
            found = self._known[term] = compile_term(term, self.functions)
        return found


class _Compiler:
    """Writes Python source: one local name for each shared part, so that its size is that of the term as a graph."""

    def __init__(self, functions: Mapping[str, Definition]) -> None:
        self.functions = functions
        self.constants: dict[str, Any] = {
            "_div": _divide, "_floordiv": _floor_divide, "_mod": _modulo, "_pow": power, "_lg": lg, "_fact": fact,
            "_binom": binom, "_floor": floor, "_ceil": lambda x: -floor(-x), "_sum": _sum, "_abs": abs, "_mul": _times,
            "_max": max, "_min": min,
        }  # fmt: skip
        self._calls = _Calls(functions)
        self.constants["_call"] = self._calls.value

    def function(self, term: Term) -> Compiled:
        source = self._source(term, {})
        namespace = dict(self.constants)
        code = f"lambda _v: {source}" if len(source) < 60_000 else None
        if code is None:
            raise TooLarge("the expression is too long to evaluate")
        try:
            made: Callable[[Mapping[str, Value]], Value] = eval(code, namespace)
        except (RecursionError, MemoryError, SyntaxError):
            raise TooLarge("the expression is nested too deep to evaluate") from None

        def run(values: Mapping[str, Value]) -> Value:
            self._calls.begin()
            try:
                return made(values)
            except RecursionError:
                raise TooLarge("the evaluation nests too deep") from None

        return run

    def _constant(self, value: object) -> str:
        name = f"_k{len(self.constants)}"
        self.constants[name] = value
        return name

    def _source(self, term: Term, bound: Mapping[str, str]) -> str:
        """Shared parts are bound by `:=` where they are certain to be evaluated first; here parts are written out in
        full, which `function` limits in length.
        """
        memo: dict[Term, str] = {}
        stack = [term]
        while stack:
            t = stack[-1]
            if t in memo:
                stack.pop()
                continue
            if t.op == "sum":
                variable, low, high, body = t.args
                missing = [a for a in (low, high) if a not in memo]
            else:
                missing = [a for a in t.args if a not in memo]
            if missing:
                stack.extend(missing)
                continue
            if t.op == "sum":
                local = f"_b{len(bound)}"
                inner = self._source(body, {**bound, variable.name: local})
                memo[t] = f"_sum({memo[low]}, {memo[high]}, lambda {local}: {inner})"
            else:
                memo[t] = self._node(t, [memo[a] for a in t.args], bound)
            if len(memo[t]) > 60_000:
                raise TooLarge("the expression is too long to evaluate")
            stack.pop()
        return memo[term]

    def _node(self, t: Term, a: list[str], bound: Mapping[str, str]) -> str:
        match t.op:
            case "num":
                small = isinstance(t.value, int) and abs(t.value) < 10**9
                return f"({t.value})" if small else self._constant(t.value)
            case "var":
                return bound.get(t.name) or f"_v[{t.name!r}]"
            case "true" | "false":
                return t.op.capitalize()
            case "+" | "-":
                return f"({a[0]} {t.op} {a[1]})"
            case "*":
                return f"_mul({a[0]}, {a[1]})"
            case "neg":
                return f"(-{a[0]})"
            case "/" | "div" | "mod":
                name = {"/": "_div", "div": "_floordiv", "mod": "_mod"}[t.op]
                return f"{name}({a[0]}, {a[1]})"
            case "^":
                return f"_pow({a[0]}, {a[1]})"
            case "max" | "min" | "binom":
                return f"_{t.op}({a[0]}, {a[1]})"
            case "abs" | "floor" | "ceil" | "lg" | "fact":
                return f"_{t.op}({a[0]})"
            case "=" | "iff":
                return f"({a[0]} == {a[1]})"
            case "!=" | "<" | "<=" | ">" | ">=" | "and" | "or":
                return f"({a[0]} {t.op} {a[1]})"
            case "implies":
                return f"(not {a[0]} or {a[1]})"
            case "not":
                return f"(not {a[0]})"
            case "if":
                return f"({a[1]} if {a[0]} else {a[2]})"
            case "call":
                return f"_call({t.name!r}, ({''.join(x + ', ' for x in a)}))"
        raise ValueError(f"no value for the operator {t.op}")


class _Calls:
    """Values of the functions in one evaluation, each worked out once."""

    def __init__(self, functions: Mapping[str, Definition]) -> None:
        self.functions = functions
        self.bodies: dict[str, tuple[Compiled, Compiled | None]] = {}
        self.known: dict[tuple[str, tuple[Value, ...]], Value] = {}
        self.depth = 0

    def begin(self) -> None:
        if len(self.known) > CALL_LIMIT:
            self.known.clear()

    def value(self, name: str, arguments: tuple[Value, ...]) -> Value:
        key = (name, arguments)
        if key in self.known:
            return self.known[key]
        if name not in self.functions:
            raise Undefined(f"{name} is no function")
        definition = self.functions[name]
        for (parameter, sort), value in zip(definition.parameters, arguments, strict=True):
            if not is_of_sort(value, sort):
                raise Undefined(f"{name} takes a {sort} for {parameter}, not {value}")
        values = {p: v for (p, _), v in zip(definition.parameters, arguments, strict=True)}
        body, given = self._compiled(name, definition)
        if self.depth >= DEPTH_LIMIT or len(self.known) > 2 * CALL_LIMIT:
            raise TooLarge(f"{name} uses itself too often")
        self.depth += 1
        try:
            if given is not None and not given(values):
                raise Undefined(f"{name} is not defined for {', '.join(map(str, arguments))}")
            result = body(values)
        finally:
            self.depth -= 1
        self.known[key] = result
        return result

    def _compiled(self, name: str, definition: Definition) -> tuple[Compiled, Compiled | None]:
        if name not in self.bodies:
            given = None if definition.given is None else self._shared(definition.given)
            self.bodies[name] = (self._shared(definition.body), given)
        return self.bodies[name]

    def _shared(self, term: Term) -> Compiled:
        """Compiled so that nested calls come back to this table."""
        compiler = _Compiler.__new__(_Compiler)
        _Compiler.__init__(compiler, self.functions)
        compiler._calls = self
        compiler.constants["_call"] = self.value
        return compiler.function(term)


# ---------------------------------------------------------------- operators
def is_of_sort(value: Value, sort: Sort) -> bool:
    """Whether the value is one of the sort."""
    if sort == "bool":
        return isinstance(value, bool)
    if isinstance(value, bool):
        return False
    return sort == "real" or (value == floor(value) and (sort == "int" or value >= 0))


def _bits(x: Rational) -> int:
    return x.bit_length() if isinstance(x, int) else max(x.numerator.bit_length(), x.denominator.bit_length())


def _times(x: Rational, y: Rational) -> Rational:
    if _bits(x) + _bits(y) > BIT_LIMIT:
        raise TooLarge("a product is too large")
    return x * y


def _tidy(x: Rational) -> Rational:
    return x.numerator if isinstance(x, Fraction) and x.denominator == 1 else x


def _divide(x: Rational, y: Rational) -> Rational:
    if y == 0:
        raise Undefined("a division by zero")
    return _tidy(Fraction(x) / y)


def _floor_divide(x: Rational, y: Rational) -> Rational:
    if y <= 0:
        raise Undefined(f"div by {y}, which is not positive")
    return floor(Fraction(x) / y) if isinstance(x, Fraction) or isinstance(y, Fraction) else x // y


def _modulo(x: Rational, y: Rational) -> Rational:
    if y <= 0:
        raise Undefined(f"mod by {y}, which is not positive")
    return _tidy(x - y * _floor_divide(x, y))


def power(base: Rational, exponent: Rational) -> Rational:
    """base^exponent for an integer exponent; 0^0 = 1. Raises Undefined or TooLarge."""
    if exponent != floor(exponent):
        raise Undefined(f"an exponent of {exponent}, which is no integer")
    whole = int(exponent)
    if base == 0 and whole < 0:
        raise Undefined("a negative power of zero")
    if base not in (0, 1, -1) and abs(whole) * _bits(base) > BIT_LIMIT:
        raise TooLarge("a power is too large")
    if base in (0, 1, -1) and abs(whole) > 2:
        whole = 2 + whole % 2
    return _tidy(Fraction(base) ** whole) if whole < 0 else base**whole


def lg(x: Rational) -> int:
    """floor(log2 x) for x >= 1."""
    if x < 1:
        raise Undefined(f"lg of {x}, which is less than 1")
    return floor(x).bit_length() - 1


def _natural(x: Rational, what: str) -> int:
    if x != floor(x) or x < 0:
        raise Undefined(f"{what} of {x}, which is no natural number")
    return int(x)


def fact(x: Rational) -> int:
    """The factorial of a natural number."""
    n = _natural(x, "fact")
    if n * max(n.bit_length(), 1) > BIT_LIMIT:
        raise TooLarge(f"the factorial of {n} is too large")
    return factorial(n)


def binom(x: Rational, y: Rational) -> int:
    """The binomial coefficient of natural numbers."""
    n, k = _natural(x, "binom"), _natural(y, "binom")
    if min(k, abs(n - k)) * max(n.bit_length(), 1) > BIT_LIMIT and k <= n:
        raise TooLarge(f"binom({n}, {k}) is too large")
    return comb(n, k)


def _sum(low: Rational, high: Rational, body: Callable[[int], Rational]) -> Rational:
    if low != floor(low) or high != floor(high):
        raise Undefined("a sum between bounds that are no integers")
    if high - low > RANGE_LIMIT:
        raise TooLarge("a sum of too many terms")
    total: Rational = 0
    for i in range(int(low), int(high) + 1):
        total += body(i)
    return _tidy(total)
