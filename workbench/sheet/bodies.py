"""Checks routines: headers, statements and the scopes of what they declare."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import replace

from workbench.errors import Span
from workbench.sheet import tree
from workbench.sheet.scopes import AT_START, IN_BODY, STATEMENT, VALUES, Context, Symbol, kinds, with_kinds
from workbench.sheet.types import SORTS, Typing, class_of
from workbench.sheet.words import quoted

DIGEST = re.compile(r"[0-9a-fA-F]{64}")  # SHA-256, FIPS 180-4, in hex

GIVEN = Context("a given", AT_START)
MEASURE = Context("a measure", AT_START)
CLAIM = Context("a claim", AT_START, result=True, primes=True, of_routine=True)
INNER_GIVEN = Context("a given", IN_BODY, result=True)
INNER_MEASURE = Context("a measure", IN_BODY, result=True)
INNER_CLAIM = Context("a claim", IN_BODY, result=True, primes=True)


class BodyChecking(Typing):
    laws: Mapping[str, int]  # built-in ones: name to number of parameters
    _stages: dict[str, Span]  # of the routine that is being checked: name to first place

    def check_routine(self, routine: tree.Routine) -> None:
        self.routine = routine
        mark = self.mark()
        for p in routine.parameters:
            self.declare(Symbol("parameter", p.name, p.sort, p.span))
        self._bindings(routine)
        self._header(routine.header, GIVEN, MEASURE)
        self._claims(routine.header, CLAIM)
        self._stages = {}
        self._block(routine.body)
        self.forget(mark)
        self.routine = None

    def _bindings(self, routine: tree.Routine) -> None:
        """They may use the parameters and constants, not one another; each may reuse a constant's name."""
        context = Context("a binding", VALUES)
        sorts = [SORTS[self.typed(b.value, context).kind] for b in routine.bindings]
        for b, sort in zip(routine.bindings, sorts, strict=True):
            self.declare(Symbol("binding", b.name, sort, b.span), over=kinds("constant"))

    # -------------------------------------------------------------- headers
    def _header(self, header: tree.Header, given: Context, measure: Context | None) -> None:
        """Everything but the claims."""
        measures = 0
        for item in header.items:
            match item:
                case tree.Given():
                    self.require(item.formula, "formula", given)
                case tree.Source():
                    self.check_source(item)
                case tree.Measure():
                    measures += 1
                    if measure is None:
                        self.complain(item.span, "a stage has no measure: it runs once")
                    elif measures > 1:
                        self.complain(item.span, "a second measure", "join them: measure a, b compares a first, then b")
                    for component in item.components:
                        self.require(component, "number", measure or given)

    def _claims(self, header: tree.Header, context: Context) -> None:
        labels: set[str] = set()
        for claim in header.claims:
            if claim.label is not None and claim.label in labels:
                self.complain(claim.span, f"the label {quoted(claim.label)} stands twice in this header")
            labels.add(claim.label or "")
            self.require(claim.formula, "formula", context)
            for hint in claim.hints:
                if isinstance(hint, tree.CasesHint):
                    self.require(hint.condition, "formula", context)
                else:
                    self._using(hint, context)

    def _using(self, hint: tree.UsingHint, context: Context) -> None:
        symbol = self.globals.get(hint.law)
        if symbol is not None and isinstance(symbol.item, tree.Law | tree.Function):
            self.check_arguments(hint.law, hint.span, symbol.item.parameters, hint.arguments, context)
            return
        for argument in hint.arguments:
            self.typed(argument, context)
        if symbol is not None:
            self.complain(hint.span, f"{quoted(hint.law)} is a {symbol.kind}, neither law nor function")
        elif hint.law not in self.laws:
            self.unknown(hint.span, hint.law, "law or function", ("law", "function"))
        elif self.laws[hint.law] != len(hint.arguments):
            self.complain(hint.span, f"the law {quoted(hint.law)} takes {self.laws[hint.law]} arguments, "
                          f"found {len(hint.arguments)}")  # fmt: skip

    def check_source(self, item: tree.Source) -> None:
        """Lines and digest; which file may be named is the loader's affair."""
        if item.first_line is not None and item.last_line is not None and not 1 <= item.first_line <= item.last_line:
            self.complain(item.span, f"there are no lines {item.first_line} to {item.last_line}",
                          "lines count from 1, the first stands first")  # fmt: skip
        if item.digest is not None and not DIGEST.fullmatch(item.digest):
            self.complain(item.span, "this digest is none", "a digest is SHA-256 in 64 hexadecimal digits")

    # -------------------------------------------------------------- statements
    def _block(self, block: tree.Block) -> None:
        """A block that is a scope."""
        mark = self.mark()
        for statement in block:
            self._statement(statement)
        self.forget(mark)

    def _statement(self, statement: tree.Statement) -> None:
        match statement:
            case tree.Assign():
                self._assign(statement)
            case tree.CallStatement():
                self._call(statement.routine, statement.arguments, statement.span)
            case tree.Note():
                sort = SORTS[self.typed(statement.value, NOTE).kind]
                self.declare(Symbol("note", statement.name, sort, statement.span))
            case tree.If():
                for condition, block in statement.branches:
                    self.require(condition, "formula", TEST)
                    self._block(block)
                self._block(statement.otherwise or ())
            case tree.Either():
                for block in statement.branches:
                    self._block(block)
            case tree.While():
                self.require(statement.condition, "formula", TEST)
                self._loop_header(statement.header)
                self._block(statement.body)
            case tree.For():
                self._for(statement)
            case tree.Var():
                self._var(statement)
            case tree.ResourceStatement():
                self.require(statement.amount, "number", AMOUNT)
                self.charged(statement)
            case tree.HoldStatement():
                self.require(statement.amount, "number", AMOUNT)
                if statement.gauge:
                    self.resource(statement.gauge, "gauge", statement.span, "hold")
                self._block(statement.body)
            case tree.Stage():
                self._stage(statement)

    def _for(self, statement: tree.For) -> None:
        self.require(statement.low, "number", AMOUNT)
        self.require(statement.high, "number", AMOUNT)
        mark = self.mark()
        if statement.variable:
            self.declare(Symbol("loop variable", statement.variable, "int", statement.span))
        self._loop_header(statement.header)
        self._block(statement.body)
        self.forget(mark)

    def _loop_header(self, header: tree.Header) -> None:
        self._header(header, INNER_GIVEN, INNER_MEASURE)
        self._claims(header, INNER_CLAIM)

    def _stage(self, statement: tree.Stage) -> None:
        """Its block is no scope of its own; what it declares has an end value only, as far as its claims go."""
        first = self._stages.setdefault(statement.name, statement.span)
        if first is not statement.span:
            message = f"the stage {quoted(statement.name)} stands twice, first in line {first.line}"
            self.complain(statement.span, message, "give one of the two another name")
        self._header(statement.header, INNER_GIVEN, None)
        mark = self.mark()
        for inner in statement.body:
            self._statement(inner)
        self._claims(statement.header, replace(INNER_CLAIM, fresh=self.since(mark)))

    def _var(self, statement: tree.Var) -> None:
        if statement.size is not None:
            self.require(statement.size, "number", AMOUNT)
        symbol = Symbol("variable", statement.name, statement.sort, statement.span)
        if isinstance(statement.value, tree.AnyValue):
            self.declare(symbol)  # in `any where F` it means the new value
            self._any(statement.value)
            return
        if statement.value is not None:
            self._value(statement.value, statement.sort)
        self.declare(symbol)

    def _assign(self, statement: tree.Assign) -> None:
        sort = self._target(statement)
        if isinstance(statement.value, tree.AnyValue):
            self._any(statement.value)
        else:
            self._value(statement.value, sort)

    def _target(self, statement: tree.Assign) -> tree.Sort | None:
        name, span = statement.target, statement.target_span
        if name == "result":
            self.typed(tree.Name("result", span=span), STATEMENT)
            return self.routine.result if self.routine is not None else None
        symbol = self.find(name)
        if symbol is None:
            self.unknown(span, name, "variable", ("variable", "parameter", "state variable"))
            return None
        if symbol.kind not in ("variable", "parameter", "state variable"):
            self.complain(span, f"the {symbol.kind} {quoted(name)} cannot be assigned", MENDS.get(symbol.kind))
        return symbol.sort

    def _any(self, value: tree.AnyValue) -> None:
        if value.condition is not None:
            self.require(value.condition, "formula", CHOICE)

    def _value(self, value: tree.Expr, sort: tree.Sort | None) -> None:
        """An expression, or the call of a routine as a whole."""
        symbol = self.find(value.name) if isinstance(value, tree.Application) else None
        if not isinstance(value, tree.Application) or symbol is None or symbol.kind != "routine":
            self.require(value, class_of(sort), STATEMENT)
            return
        self._call(value.name, value.arguments, value.span)
        if self.is_doubtful(value.name):
            return  # its signature could not be read
        if symbol.sort is None:
            self.complain(value.span, f"the routine {quoted(value.name)} has no result to assign",
                          "call it as a statement of its own")  # fmt: skip
        elif sort is not None and class_of(symbol.sort) != class_of(sort):
            self.complain(value.span, f"{quoted(value.name)} returns a {symbol.sort}, which is assigned to a {sort}")

    def _call(self, name: str, arguments: tuple[tree.Expr, ...], span: Span) -> None:
        symbol = self.find(name)
        if symbol is not None and isinstance(symbol.item, tree.Routine):
            self.check_arguments(name, span, symbol.item.parameters, arguments, STATEMENT)
            return
        for argument in arguments:
            self.typed(argument, STATEMENT)
        if symbol is None:
            self.unknown(span, name, "routine", ("routine",))
        else:
            self.complain(span, f"{quoted(name)} is a {symbol.kind}, no routine: it cannot be called")


TEST = replace(STATEMENT, where="a condition", statement=False)
AMOUNT = replace(STATEMENT, where="an amount", statement=False)
CHOICE = replace(STATEMENT, where="the condition of a choice", statement=False)
NOTE = with_kinds(replace(STATEMENT, statement=False), "counter", "gauge", where="a note")
MENDS = {
    "counter": "it is spent: spend … time",
    "gauge": "it is acquired, released and held: hold … stack do … end",
    "note": "a note keeps one value; declare a 'var' instead",
    "loop variable": "the loop alone moves it; use a 'while' and a 'var'",
    "constant": "declare a 'state' variable instead",
}
