"""Types of expressions: formulas and numbers told apart, names resolved, numbers kept within bounds.

A chain of binary operators is walked in a loop, all other edges by recursion: the reader keeps those few.
"""

from __future__ import annotations

from fractions import Fraction
from math import log10
from typing import Literal, NamedTuple, TypeAlias

from workbench.errors import Span
from workbench.sheet import tree
from workbench.sheet.scopes import STATE, Context, Kind, Scope, Symbol
from workbench.sheet.tree import Expr
from workbench.sheet.words import ARITIES, LARGEST_DIGITS, quoted

Class: TypeAlias = Literal["formula", "number"]
SORTS: dict[Class | None, tree.Sort | None] = {"formula": "bool", "number": "real", None: None}  # of what has a value
LARGEST_BITS = int(LARGEST_DIGITS / log10(2))
LOGICAL = frozenset(("and", "or", "implies"))


class Typed(NamedTuple):
    """What an expression is (None: not known, because of a mistake in it), and its value where numerals alone give
    it."""

    kind: Class | None
    value: Fraction | None = None


UNKNOWN = Typed(None)
NUMBER = Typed("number")
FORMULA = Typed("formula")


def class_of(sort: tree.Sort | None) -> Class | None:
    if sort is None:
        return None
    return "formula" if sort == "bool" else "number"


def spoken(kind: Class | None) -> str:
    return "a formula (true or false)" if kind == "formula" else "a number"


class Typing(Scope):
    """Checks expressions. `routine` is the one whose parts are being checked, if any."""

    routine: tree.Routine | None = None

    # -------------------------------------------------------------- what is wanted
    def require(self, expr: Expr, kind: Class | None, context: Context) -> None:
        """Checks an expression that must be a formula or a number."""
        found = self.typed(expr, context).kind
        self._agree(expr, found, kind)

    def _agree(self, expr: Expr, found: Class | None, wanted: Class | None) -> None:
        if found is not None and wanted is not None and found != wanted:
            mend = "compare it with something, such as … > 0" if wanted == "formula" else None
            self.complain(expr.span, f"expected {spoken(wanted)}, found {spoken(found)}", mend)

    # -------------------------------------------------------------- one case a form
    def typed(self, expr: Expr, context: Context) -> Typed:
        match expr:
            case tree.Name():
                return self._name(expr, context)
            case tree.Number():
                return Typed("number", expr.value)
            case tree.Binary():
                return self._chain(expr, context)
            case tree.Comparison():
                return self._comparison(expr, context)
            case tree.Truth():
                return FORMULA
            case tree.Unary():
                return self._unary(expr, context)
            case tree.Conditional():
                return self._conditional(expr, context)
            case tree.Application():
                return self._application(expr, context)
            case tree.Summation():
                return self._summation(expr, context)
            case tree.Short():
                return self._short(expr, context)

    def _chain(self, expr: tree.Binary, context: Context) -> Typed:
        spine = [expr]
        while isinstance(spine[-1].left, tree.Binary):
            spine.append(spine[-1].left)
        left = self.typed(spine[-1].left, context)
        for node in reversed(spine):
            right = self.typed(node.right, context)
            wanted: Class = "formula" if node.op in LOGICAL else "number"
            self._agree(node.left, left.kind, wanted)
            self._agree(node.right, right.kind, wanted)
            left = FORMULA if wanted == "formula" else self._folded(node, left.value, right.value)
        return left

    def _folded(self, node: tree.Binary, a: Fraction | None, b: Fraction | None) -> Typed:
        """The value of two numerals joined, if it is not too large to be handled."""
        if a is None or b is None:
            return NUMBER
        value: Fraction | None = None
        match node.op:
            case "+":
                value = a + b
            case "-":
                value = a - b
            case "*":
                value = a * b
            case "/" if b:
                value = a / b
            case "div" if b > 0:
                value = Fraction(a // b)
            case "mod" if b > 0:
                value = a % b
            case "^" if b.denominator == 1 and (a or b >= 0):
                if abs(b) * (_bits(a) - 1) > LARGEST_BITS:
                    return self._too_large(node)
                value = a ** int(b)
        if value is not None and _bits(value) > LARGEST_BITS:
            return self._too_large(node)
        return Typed("number", value)

    def _too_large(self, node: Expr) -> Typed:
        self.complain(node.span, f"this number is too large: it has more than {LARGEST_DIGITS:,} digits",
                      "use a smaller one, or a constant without a value")  # fmt: skip
        return NUMBER

    def _unary(self, expr: tree.Unary, context: Context) -> Typed:
        operand = self.typed(expr.operand, context)
        if expr.op == "not":
            self._agree(expr.operand, operand.kind, "formula")
            return FORMULA
        self._agree(expr.operand, operand.kind, "number")
        return Typed("number", None if operand.value is None else -operand.value)

    def _comparison(self, expr: tree.Comparison, context: Context) -> Typed:
        kinds = [self.typed(o, context).kind for o in expr.operands]
        for at, op in enumerate(expr.ops):
            left, right = kinds[at : at + 2]
            if op in ("=", "!=") and "number" not in (left, right):
                continue  # formulas may be equal, too
            wanted: Class = "number"
            self._agree(expr.operands[at], left, wanted)
            self._agree(expr.operands[at + 1], right, wanted)
            kinds[at + 1] = None if right == "formula" else right  # said once
        return FORMULA

    def _conditional(self, expr: tree.Conditional, context: Context) -> Typed:
        self.require(expr.condition, "formula", context)
        then = self.typed(expr.then, context)
        otherwise = self.typed(expr.otherwise, context)
        self._agree(expr.otherwise, otherwise.kind, then.kind)
        return Typed(then.kind or otherwise.kind)

    def _summation(self, expr: tree.Summation, context: Context) -> Typed:
        self.require(expr.low, "number", context)
        self.require(expr.high, "number", context)
        mark = self.mark()
        self.declare(Symbol("bound variable", expr.variable, "int", expr.span), hidden=self.hidden_in(context))
        self.require(expr.body, "number", context)
        self.forget(mark)
        return NUMBER

    def hidden_in(self, context: Context) -> frozenset[Kind]:
        """Kinds of names that are not visible there, so that they may be used again."""
        return frozenset() if "state variable" in context.kinds else STATE

    def _short(self, expr: tree.Short, context: Context) -> Typed:
        self.check_aspect(expr.aspect, expr.resource, expr.span)
        self.require(expr.bound, "number", context)
        return FORMULA

    # -------------------------------------------------------------- resources
    def resource(self, name: str, kind: Kind, span: Span, verb: str) -> Symbol | None:
        """The counter or gauge of that name; complains where there is none."""
        found = self.find(name)
        if found is None:
            self.unknown(span, name, kind, (kind,))
            return None
        if found.kind == kind:
            return found
        if found.kind in ("counter", "gauge"):
            mend = ("of a counter: 'spent'; it is spent" if found.kind == "counter"
                    else "of a gauge: 'net', 'peak', 'area', 'mean'; it is acquired, released and held")  # fmt: skip
        else:
            listed = self.listed(kind)
            mend = f"the {kind}s are {listed}" if listed else f"a tariff declares them: {kind} NAME in UNIT"
        self.complain(span, f"'{verb}' needs a {kind}, and {quoted(name)} is a {found.kind}", mend)
        return None

    def charged(self, event: tree.ResourceStatement | tree.Charge) -> None:
        """Counters are spent, gauges acquired, released and held."""
        self.resource(event.resource, "counter" if event.verb == "spend" else "gauge", event.span, event.verb)

    def check_aspect(self, aspect: str, name: str, span: Span) -> None:
        """spent is of counters; net and peak of gauges; area and mean of gauges over a counter."""
        gauge = self.resource(name, "counter" if aspect == "spent" else "gauge", span, aspect)
        if aspect in ("area", "mean") and gauge is not None:
            self._check_clock(gauge, aspect, span)

    def _check_clock(self, gauge: Symbol, aspect: str, span: Span) -> None:
        item = gauge.item
        if isinstance(item, tree.Gauge) and item.clock is None and not self.is_doubtful(gauge.name):
            self.complain(span, f"the gauge {quoted(gauge.name)} is over no counter, so it has no {aspect}",
                          f"declare it with its clock: gauge {gauge.name[:20]} over time")  # fmt: skip

    # -------------------------------------------------------------- names
    def _name(self, expr: tree.Name, context: Context) -> Typed:
        name, _, part = expr.name.partition(".")
        if not name:
            return UNKNOWN
        if name == "result":
            return self._result(expr, context)
        symbol = self.find(name)
        if symbol is None:
            self.unknown(expr.span, name, "name", context.kinds)
            return UNKNOWN
        if part:
            gauge = self.resource(name, "gauge", expr.span, part)
            if gauge is None:
                return UNKNOWN
            if part == "area":
                self._check_clock(gauge, part, expr.span)
        if symbol.kind in ("function", "routine", "law"):
            self.complain(expr.span, f"{quoted(name)} is a {symbol.kind}, no value",
                          f"write {name}(…)" if symbol.kind == "function" else None)  # fmt: skip
            return UNKNOWN
        if symbol.kind not in context.kinds:
            self.complain(expr.span, f"the {symbol.kind} {quoted(name)} cannot stand in {context.where}")
        elif expr.primed:
            self._primed(expr, symbol, context)
        elif name in context.fresh:
            self.complain(expr.span, f"{quoted(name)} has no value yet where the stage starts",
                          f"its end value is {name}'")  # fmt: skip
        return Typed(class_of(symbol.sort))

    def _result(self, expr: tree.Name, context: Context) -> Typed:
        routine = self.routine
        if routine is None or not context.result:
            self.complain(expr.span, f"'result' means nothing in {context.where}")
            return UNKNOWN
        if routine.result is None and self.is_doubtful(routine.name):
            return UNKNOWN  # its signature could not be read
        if routine.result is None:
            self.complain(expr.span, f"the routine {quoted(routine.name)} has no result",
                          f"declare it: routine {routine.name[:20]}(…) -> nat")  # fmt: skip
            return UNKNOWN
        if expr.primed and not context.primes:
            self.complain(expr.span, f"an end value, result', means nothing in {context.where}")
        elif expr.primed and context.of_routine:
            self.complain(expr.span, "result' means nothing in a routine's claim", "'result' is the value returned")
        return Typed(class_of(routine.result))

    def _primed(self, expr: tree.Name, symbol: Symbol, context: Context) -> None:
        name = quoted(symbol.name)
        if symbol.kind in ("constant", "binding", "bound variable"):
            self.complain(expr.span, f"the {symbol.kind} {name} has no end value: it never changes", "leave out the '")
        elif not context.primes:
            self.complain(expr.span, f"the end value of {name} means nothing in {context.where}",
                          "end values stand in claims")  # fmt: skip
        elif symbol.kind == "parameter" and context.of_routine:
            self.complain(expr.span, f"the parameter {name} has no end value in a routine's claim",
                          "a parameter is a copy, which the caller never sees again")  # fmt: skip

    # -------------------------------------------------------------- applications
    def _application(self, expr: tree.Application, context: Context) -> Typed:
        found: list[Typed] = []
        for argument in expr.arguments:  # in a loop of this very function: a deep tree should make no deep stack
            found.append(self.typed(argument, context))
        if expr.name in ARITIES:
            return self._built_in(expr, found)
        symbol = self.find(expr.name)
        if symbol is not None and symbol.kind == "function" and isinstance(symbol.item, tree.Function):
            self._fit(expr.name, expr.span, symbol.item.parameters, expr.arguments, found)
            return Typed(class_of(symbol.sort))
        if symbol is None:
            kinds = ("function", "routine") if context.statement else ("function",)
            self.unknown(expr.span, expr.name, "function", kinds)
        elif symbol.kind == "routine":
            mend = f"assign it first: x := {expr.name[:20]}(…)" if context.statement else None
            self.complain(expr.span, f"the routine {quoted(expr.name)} is called inside an expression", mend)
        else:
            self.complain(expr.span, f"{quoted(expr.name)} is a {symbol.kind}, no function")
        return UNKNOWN

    def check_arguments(self, name: str, span: Span, parameters: tuple[tree.Parameter, ...],
                        arguments: tuple[Expr, ...], context: Context) -> None:  # fmt: skip
        """Number and types of what is passed to a law or routine."""
        self._fit(name, span, parameters, arguments, [self.typed(a, context) for a in arguments])

    def _fit(self, name: str, span: Span, parameters: tuple[tree.Parameter, ...],
             arguments: tuple[Expr, ...], found: list[Typed]) -> None:  # fmt: skip
        for parameter, argument, typed in zip(parameters, arguments, found, strict=False):
            self._agree(argument, typed.kind, class_of(parameter.sort))
        if len(parameters) != len(arguments) and not self.is_doubtful(name):
            listed = ", ".join(f"{p.name}: {p.sort}" for p in parameters[:8])
            self.complain(span, f"{quoted(name)} takes {counted(len(parameters))}, found {len(arguments)}",
                          f"its parameters are ({listed})" if parameters else "write () after it")  # fmt: skip

    def _built_in(self, expr: tree.Application, found: list[Typed]) -> Typed:
        for argument, typed in zip(expr.arguments, found, strict=True):
            self._agree(argument, typed.kind, "number")
        least, most = ARITIES[expr.name]
        if len(found) < least or (most is not None and len(found) > most):
            wanted = counted(least) if most == least else f"at least {counted(least)}"
            self.complain(expr.span, f"'{expr.name}' takes {wanted}, found {len(found)}")
        elif _least_bits(expr.name, [t.value for t in found]) > LARGEST_BITS:
            return self._too_large(expr)
        return NUMBER


def _least_bits(function: str, values: list[Fraction | None]) -> int:
    """A lower bound of the length of fact(n) > (n/e)^n or binom(n, k) >= (n/k)^k (common knowledge), of numerals."""
    whole = [int(v) for v in values if v is not None and v.denominator == 1 and v >= 0]
    if len(whole) < len(values):
        return 0
    if function == "fact":
        return whole[0] * (whole[0].bit_length() - 3)
    if function == "binom" and whole[0] >= whole[1] > 0:
        chosen = min(whole[1], whole[0] - whole[1])
        return chosen * ((whole[0] // max(1, chosen)).bit_length() - 1)
    return 0


def counted(count: int) -> str:
    return "1 argument" if count == 1 else f"{count} arguments"


def _bits(value: Fraction) -> int:
    return max(value.numerator.bit_length(), value.denominator.bit_length())
