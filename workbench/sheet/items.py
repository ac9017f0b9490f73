"""Reads items: what stands at the left edge of a sheet."""

from __future__ import annotations

import re
from collections.abc import Callable
from fractions import Fraction
from typing import Any

from workbench.sheet.cursor import EVERYWHERE, Mistake, TooDeep
from workbench.sheet.lexer import END_OF_TEXT, NAME, NEWLINE, NUMBER, STRING
from workbench.sheet.statements import StatementReader
from workbench.sheet.tree import (
    Binding,
    Budget,
    Charge,
    Constant,
    Counter,
    Expr,
    Function,
    Gauge,
    Item,
    Law,
    On,
    Parameter,
    Pool,
    Routine,
    Sheet,
    Sort,
    State,
    Tariff,
    Use,
)
from workbench.sheet.words import EVENTS, ITEM_WORDS, nearest_word, quoted

UNIT = re.compile(r"[\w/%^-]+")  # letters, digits and / % ^ - _ in a run
TARIFF_WORDS = ("counter", "gauge", "on")


class ItemReader(StatementReader):
    def __init__(self, text: str, path: str) -> None:
        super().__init__(text, path)
        self._items: dict[str, Callable[[], Item]] = {
            "use": self._use, "source": self.source, "constant": self._constant, "state": self._state,
            "function": self._function, "law": self._law, "tariff": self._tariff, "routine": self._routine,
            "budget": self._budget, "pool": self._pool,
        }  # fmt: skip

    def sheet(self) -> Sheet:
        """[ "sheet" STRING NL ] { item }"""
        first = self.token
        title = None
        items: list[Item] = []
        self.skip_newlines()
        if self.is_word("sheet"):
            title = self._title()
        while True:
            self.skip_newlines()
            if self.token.kind == END_OF_TEXT:
                return Sheet(title, tuple(items), self.since(first))
            start = self.at
            try:
                item = self._item()
                self._end_of_item()
                items.append(item)
            except Mistake as mistake:
                self.record(mistake)
                self._next_item(start)
            except TooDeep as problem:
                self.blocks = self.depth = 0
                self.in_claim = self.in_charge = False
                self.complain(problem.place, str(problem), "divide it: a routine, stage, note or function of its own")
                self._next_item(start)

    def _title(self) -> str | None:
        try:
            self.advance()
            title = self.string("the title")
            self._end_of_item()
            return title
        except Mistake as mistake:
            self.record(mistake)
            self.skip_line()
            return None

    def _item(self) -> Item:
        token = self.token
        self.suspect = None
        self.item_start = token.start
        if token.text in self._items and token.kind != STRING:
            return self._items[token.text]()
        if token.kind == "end":
            raise Mistake(token, "this 'end' closes nothing", "delete it, or look for what was closed too early above")
        if token.text == "sheet":
            raise Mistake(token, "the title stands first, and once")
        near = nearest_word(token.text, ITEM_WORDS) if token.kind == NAME else None
        if near is not None and self.next_kind in (NAME, STRING):
            self.complain(token, f"{quoted(token.text)} begins no item", f"is '{near}' meant?")
            self.correct(NAME, near)
            return self._items[near]()
        if token.kind == STRING:
            self.unsure.add(EVERYWHERE)  # perhaps the path of a 'use'
        raise self.expected("an item", "items begin with " + ", ".join(sorted(ITEM_WORDS)))

    def _end_of_item(self) -> None:
        if self.token.kind not in (NEWLINE, END_OF_TEXT) and self.previous.kind != "end" and not self.begins_line():
            raise self.expected("the end of the line")

    def _next_item(self, start: int) -> None:
        """Goes on at the next line that begins an item."""
        if self.at == start:
            self.advance()
        while self.token.kind != END_OF_TEXT and not (self.at_item() and self._at_edge()):
            self.skip_to(ITEM_WORDS)
        self.doubt(start)

    def _at_edge(self) -> bool:
        """A `source` may be a line of a header, too: those are indented."""
        return self.token.kind != "source" or self.token.column == 1

    # -------------------------------------------------------------- declarations
    def _use(self) -> Item:
        first = self.advance()
        return Use(self.string("the path of another sheet"), self.since(first))

    def _typed(self, what: str, for_all: bool = True) -> tuple[str, Any]:
        name = self.declared_name(what, for_all)
        self.expect(":", mend="a name is declared with its type: n: nat")
        return name, self.sort()

    def _constant(self) -> Item:
        """"constant" NAME ":" type [ "=" expr ] [ "where" formula ]"""
        first = self.advance()
        name, sort = self._typed("the name of a constant")
        value = self.formula() if self.take("=") else None
        condition = self.formula() if self.take_word("where") else None
        return Constant(name, sort, value, condition, self.since(first))

    def _state(self) -> Item:
        first = self.advance()
        name, sort = self._typed("the name of a state variable")
        condition = self.formula() if self.take_word("where") else None
        return State(name, sort, condition, self.since(first))

    def _parameters(self) -> tuple[Parameter, ...]:
        """"(" [ NAME ":" type { "," NAME ":" type } ] ")" """
        self.expect("(")
        found: list[Parameter] = []
        while self.token.kind != ")":
            if found:
                self.expect(",", "',' or ')'")
            first = self.token
            name, sort = self._typed("the name of a parameter", for_all=False)
            found.append(Parameter(name, sort, self.since(first)))
        self.advance()
        return tuple(found)

    def _function(self) -> Item:
        """"function" NAME "(" params ")" ":" type [ "measure" sum ] "=" expr [ "given" formula ]"""
        first = self.advance()
        name = self.declared_name("the name of a function", for_all=True)
        parameters = self._parameters()
        self.expect(":", mend="a function has a type: function f(n: nat): nat = …")
        sort = self.sort()
        measure = self.sum() if self.take("measure") else None
        self.expect("=")
        body = self.formula()
        given = self.formula() if self.take("given") else None
        return Function(name, parameters, sort, measure, body, given, self.since(first))

    def _law(self) -> Item:
        """"law" NAME "(" params ")" [ "given" formula ] ":" formula [ "by" "induction" "on" NAME [ "from" INT ] ]"""
        first = self.advance()
        name = self.declared_name("the name of a law", for_all=True)
        parameters = self._parameters()
        given = self.formula() if self.take("given") else None
        self.expect(":")
        formula = self.formula()
        variable, start = None, None
        if self.take_word("by"):
            self.expect_word("induction")
            self.expect_word("on")
            variable = self.expect_name("the parameter of an induction").text
            if self.take("from"):
                start = -self.whole_number("a whole number") if self.take("-") else self.whole_number("a whole number")
        return Law(name, parameters, given, formula, variable, start, self.since(first))

    # -------------------------------------------------------------- tariffs
    def _tariff(self) -> Item:
        first = self.advance()
        name = self.expect_name("the name of a tariff").text
        found: list[Counter | Gauge | On] = []
        while True:
            self.skip_newlines()
            if self.token.kind in ("end", END_OF_TEXT) or self.at_item():
                break
            start = self.at
            try:
                read = self._tariff_line()
                if read is None:
                    continue
                if self.token.kind not in (NEWLINE, END_OF_TEXT, "end") and self.token.line == self.previous.line:
                    raise self.expected("the end of the line")
                found.append(read)
            except Mistake as mistake:
                self.in_charge = False
                self.record(mistake)
                if self.at == start:
                    self.advance()
                self.skip_line("end")
                self.doubt(start)
        self.close(first)
        return Tariff(name, tuple(found), self.since(first))

    def _tariff_line(self) -> Counter | Gauge | On | None:
        """One line; None where a misspelt word was set right."""
        first = self.token
        if self.take_word("counter"):
            name, unit = self._resource_declared("the name of a counter"), self._unit()
            return Counter(name, unit, self.since(first))
        if self.take_word("gauge"):
            name, unit = self._resource_declared("the name of a gauge"), self._unit()
            clock = self.expect_name("the name of a counter").text if self.take_word("over") else None
            return Gauge(name, unit, clock, self.since(first))
        if self.take_word("on"):
            event = self._event()
            self.expect(":", mend="prices are written: on call: spend 1 time, hold 16 stack")
            charges = [self._charge()]
            while self.take(","):
                charges.append(self._charge())
            return On(event, tuple(charges), self.since(first))
        near = nearest_word(first.text, (*TARIFF_WORDS, "end")) if first.kind == NAME else None
        if near:
            self.complain(first, f"{quoted(first.text)} begins no line of a tariff", f"is '{near}' meant?")
            self.correct(near if near == "end" else NAME, near)
            return None
        raise self.expected("'counter', 'gauge', 'on' or 'end'")

    def _resource_declared(self, what: str) -> str:
        if self.is_word("in") and self.next_kind != NEWLINE and self.next.text not in ("in", "over"):
            self.unsure.add(EVERYWHERE)
            raise self.expected(what)
        return self.declared_name(what, for_all=True)

    def _event(self) -> Any:
        token = self.token
        if token.text in EVENTS:
            return self.advance().text
        near = nearest_word(token.text, EVENTS)
        raise self.expected("'call', 'declare', 'assign' or 'test'", f"is '{near}' meant?" if near else None)

    def _unit(self) -> str | None:
        """[ "in" UNIT ]: a unit is read from the text, since its characters mean other things elsewhere."""
        if not self.take_word("in"):
            return None
        token = self.token
        match = UNIT.match(self.text, token.start)
        if match is None or token.kind in (NEWLINE, END_OF_TEXT):
            raise self.expected("a unit", "a unit is a run of letters, digits and / % ^ - _")
        while self.token.start < match.end() and self.token.kind != END_OF_TEXT:
            self.advance()
        if self.previous.end > match.end():
            rest = self.previous._replace(start=match.end(), column=token.column + len(match[0]))
            raise Mistake(rest, f"{quoted(self.text[token.start : rest.end])} is no unit",
                          "a unit is a run of letters, digits and / % ^ - _")  # fmt: skip
        return match[0]

    def _charge(self) -> Charge:
        """"spend" expr NAME | "hold" expr NAME"""
        first = self.token
        if first.kind not in ("spend", "hold"):
            raise self.expected("'spend' or 'hold'")
        self.advance()
        self.in_charge = True
        amount = self.formula()
        self.in_charge = False
        verb: Any = first.kind
        return Charge(verb, amount, self.resource_name(verb), self.since(first))

    # -------------------------------------------------------------- routines
    def _routine(self) -> Item:
        """"routine" NAME "(" params ")" [ "->" type ] [ "with" … ] NL header "is" NL block "end" """
        start, first = self.at, self.advance()
        name, name_span = "", self.since(first)
        parameters: tuple[Parameter, ...] = ()
        result: Sort | None = None
        bindings: tuple[Binding, ...] = ()
        try:
            token = self.token
            name = self.declared_name("the name of a routine", for_all=True)
            name_span = self.since(token)
            if self.token.kind != "(":
                self.unsure.add(EVERYWHERE)  # where the name ends is not known
            self.unsure.add(first.start)
            parameters = self._parameters()
            self.unsure.discard(first.start)
            result = self.sort() if self.take("->") else None
            bindings = self._bindings(self.formula) if self.take_word("with") else ()
            if self.token.kind not in (NEWLINE, END_OF_TEXT, "is"):
                raise self.expected("the end of the line")
        except Mistake as mistake:
            self.record(mistake)
            self.skip_line("is")
            self.doubt(start)
        header = self.header()
        self.open_block("is", first)
        body = self.block(first)
        while self.token.kind in ("else", "elif"):
            self.complain(self.token, f"this '{self.token.kind}' belongs to no 'if' or 'either'")
            self._drop_branches(first)
        self.close(first)
        return Routine(name, parameters, result, bindings, header, body, self.since(first), name_span)

    def _bindings(self, value: Callable[[], Expr]) -> tuple[Binding, ...]:
        """NAME "=" value { "," NAME "=" value }"""
        found: list[Binding] = []
        while not found or self.take(","):
            first = self.token
            name = self.expect_name("a name to bind").text
            self.expect("=", mend="bindings are written: n = 16")
            found.append(Binding(name, value(), self.since(first)))
        return tuple(found)

    # -------------------------------------------------------------- budgets and pools
    def _budget(self) -> Item:
        """"budget" STRING ":" NAME "(" exprs ")" ("spent"|"peak"|"mean") NAME "<=" expr [ "given" … ]"""
        first = self.advance()
        title = self.string("the title of a budget")
        self.expect(":")
        call = self.application("the name of a routine")
        if self.token.kind not in ("spent", "peak", "mean"):
            raise self.expected("'spent', 'peak' or 'mean'")
        aspect: Any = self.advance().kind
        resource = self.expect_name("the name of a counter or gauge").text
        self.expect("<=")
        limit = self.formula()
        bindings = self._bindings(self.sum) if self.take("given") else ()
        return Budget(title, call.name, call.arguments, aspect, resource, limit, bindings, self.since(first))

    def _pool(self) -> Item:
        """"pool" STRING ":" INT "of" NAME(exprs) "within" expr NAME [ "overflow" "below" NUMBER ] [ "given" … ]"""
        first = self.advance()
        title = self.string("the title of a pool")
        self.expect(":")
        count = self.whole_number("how many")
        self.expect_word("of")
        call = self.application("the name of a routine")
        self.expect_word("within")
        room = self.formula()
        gauge = self.resource_name("hold")
        overflow: Fraction | None = None
        if self.take_word("overflow"):
            self.expect_word("below")
            if self.token.kind != NUMBER:
                raise self.expected("a probability", "such as 1e-6")
            overflow = self._number().value
        bindings = self._bindings(self.sum) if self.take("given") else ()
        return Pool(title, count, call.name, call.arguments, room, gauge, overflow, bindings, self.since(first))
