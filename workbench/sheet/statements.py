"""Reads statements and blocks."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from workbench.sheet.cursor import Mistake
from workbench.sheet.headers import HeaderReader
from workbench.sheet.lexer import END_OF_TEXT, NAME, NEWLINE, Token
from workbench.sheet.tree import (
    AnyValue,
    Assign,
    Block,
    CallStatement,
    Either,
    Expr,
    For,
    Header,
    HoldStatement,
    If,
    Note,
    ResourceStatement,
    Skip,
    Sort,
    Stage,
    Statement,
    Value,
    Var,
    While,
)
from workbench.sheet.words import HEADER_WORDS, LEVELS, SORTS, STATEMENT_WORDS, nearest_word, quoted

CLOSERS = frozenset(("end", "else", "elif"))  # what ends a block
OPENERS = frozenset(("then", "do", "is", "either"))  # a line that ends so opens a block, even if it cannot be read


class StatementReader(HeaderReader):
    def __init__(self, text: str, path: str) -> None:
        super().__init__(text, path)
        self._statements: dict[str, Callable[[], Statement]] = {
            "skip": self._skip, "result": self._assign, "note": self._note, "if": self._if, "either": self._either,
            "while": self._while, "for": self._for, "var": self._var, "spend": self._resource,
            "acquire": self._resource, "release": self._resource, "hold": self._hold, "stage": self._stage,
        }  # fmt: skip
        self._missing_end_at = -1  # the token before which a missing 'end' was told: tell it once
        self.suspect: Token | None = None  # what an 'end' further left than it seems to have closed by mistake

    # -------------------------------------------------------------- blocks
    def block(self, opener: Token) -> Block:
        """{ stmt NL }, up to a word that ends it or to the next item."""
        self.enter(opener)
        self.blocks += 1
        found: list[Statement] = []
        while True:
            self.skip_newlines()
            if self.token.kind in CLOSERS or self.token.kind == END_OF_TEXT or self.at_item():
                break
            start = self.at
            try:
                # Straight from the table: every call between block and block makes the stack of a deep text deeper.
                statement = self._statements.get(self.token.kind, self._nameless)()
                self.end_of_line()
                found.append(statement)
            except Mistake as mistake:
                self.record(mistake)
                self._resume(start)
                self.doubt(start)
        self.blocks -= 1
        self.leave()
        return tuple(found)

    def _nameless(self) -> Statement:
        """A statement that begins with no word of the language."""
        if self.token.kind == NAME:
            if self.next_kind == "(":
                return self._call()
            if self.next_kind in (":=", "="):
                return self._assign()
        return self._no_statement()

    def _no_statement(self) -> Statement:
        """A misspelt word is read as the right one, so that what it opens is closed."""
        token = self.token
        if token.kind == NAME:
            near = nearest_word(token.text, STATEMENT_WORDS)
            if near in self._statements:
                self.complain(token, f"{quoted(token.text)} begins no statement", f"is '{near}' meant?")
                self.correct(near)
                return self._statements[near]()
            if near in CLOSERS and self.next_kind in (NEWLINE, END_OF_TEXT):
                self.complain(token, f"{quoted(token.text)} is no statement", f"is '{near}' meant?")
                self.correct(near)
                return Skip(self.since(token))
            mend = f"{token.text}(…) is a call, {token.text} := … an assignment" if len(token.text) < 20 else None
            raise Mistake(self.next, f"expected '(' or ':=' after {quoted(token.text)}", mend)
        if token.kind in HEADER_WORDS:
            raise Mistake(token, f"'{token.kind}' stands in headers, not among statements",
                          "move it before the 'is' or 'do'")  # fmt: skip
        raise self.expected("a statement")

    def end_of_line(self) -> None:
        """After a statement: a newline, `;`, a word that ends a block, or the end. Blocks close themselves."""
        kind = self.token.kind
        if kind in (NEWLINE, END_OF_TEXT) or kind in CLOSERS or self.previous.kind == "end":
            return
        raise self.expected("the end of the line", "statements stand on lines of their own, or ';' between them")

    def _resume(self, start: int) -> None:
        """Goes on after a statement that could not be read; a block that it opened is read and dropped."""
        if self.at == start:
            self.advance()
        passed = self.skip_line(*CLOSERS)
        while self.token.kind == "else" and any(t.kind == "then" for t in passed):
            self.advance()  # of an `if` that is a value
            passed = self.skip_line(*CLOSERS)
        if self.token.kind != NEWLINE:
            return
        if self.next_kind in HEADER_WORDS or self.next_kind in OPENERS:  # of a loop or stage that was not seen as one
            self.header()
            self.skip_newlines()
            opener = self.advance() if self.token.kind in OPENERS else self.token
        elif passed and passed[-1].kind in OPENERS:
            opener = passed[-1]
        else:
            return
        self.block(opener)
        self._drop_branches(opener)
        self.close(opener)

    def _drop_branches(self, opener: Token) -> None:
        while self.token.kind in ("else", "elif"):
            if self.advance().kind == "elif":
                self.skip_line("then")
                self.take("then")
            self.block(opener)

    def close(self, opener: Token) -> None:
        """Takes the `end` of what began at `opener`. Where it is missing, says so once."""
        self.skip_newlines()
        token = self.token
        if token.kind == "end":
            misplaced = self.begins_line() and token.column < opener.column and token.line > opener.line
            if misplaced and self.suspect is None:
                self.suspect = opener
            self.advance()
            return
        if self._missing_end_at != self.at:
            self._missing_end_at = self.at
            place = self.suspect or opener
            self.complain(place, f"{quoted(place.text)} is never closed: its 'end' is missing",
                          "write 'end' where it ends")  # fmt: skip

    def open_block(self, word: str, opener: Token) -> None:
        """Takes `then`, `do` or `is`; where it is missing, says so and goes on as if it stood there."""
        missing = self.expected(f"'{word}'", f"the block of {quoted(opener.text)} begins with '{word}'")
        excused = self.excused == self.at
        self.skip_newlines()
        if not self.take(word) and not excused:
            self.record(missing)
            if self.token.kind == END_OF_TEXT or self.at_item():
                self._missing_end_at = self.at  # the whole block is missing: one mistake

    # -------------------------------------------------------------- statements
    def _skip(self) -> Statement:
        return Skip(self.since(self.advance()))

    def _call(self) -> Statement:
        call = self.application("the name of a routine")
        return CallStatement(call.name, call.arguments, call.span)

    def _assign(self) -> Statement:
        """target ":=" value"""
        first = self.advance()
        target_span = self.since(first)
        if self.token.kind == "=":
            self.complain(self.token, "'=' compares; an assignment is written with ':='",
                          f"{quoted(first.text)[1:-1]} := …")  # fmt: skip
            self.advance()
        else:
            self.expect(":=")
        value = self._value()
        return Assign(first.text, value, self.since(first), target_span)

    def _value(self) -> Value:
        """expr | "any" [ "where" formula ]"""
        ends = self.next_kind in (NEWLINE, END_OF_TEXT) or self.next_kind in CLOSERS or self.next.text == "where"
        if not (self.is_word("any") and ends):
            return self.formula()
        first = self.advance()
        condition = self.formula() if self.take_word("where") else None
        return AnyValue(condition, self.since(first))

    def _note(self) -> Statement:
        first = self.advance()
        name = self.declared_name("the name of a note")
        self.expect("=", mend="a note is written: note NAME = …")
        return Note(name, self.formula(), self.since(first))

    def _if(self) -> Statement:
        first = self.token
        branches: list[tuple[Expr, Block]] = []
        otherwise: Block | None = None
        while not branches or self.token.kind == "elif":
            self.advance()
            condition = self.attempt(self.formula, "then")
            self.open_block("then", first)
            branches.append((condition, self.block(first)))
        if self.token.kind == "else":
            otherwise = self.block(self.advance())
            if self.token.kind in ("else", "elif"):
                self.complain(self.token, f"'{self.token.kind}' after 'else'", "'else' comes last, and once")
                self._drop_branches(first)
        self.close(first)
        return If(tuple(branches), otherwise, self.since(first))

    def _either(self) -> Statement:
        first = self.advance()
        branches = [self.block(first)]
        while self.token.kind == "else":
            branches.append(self.block(self.advance()))
        if self.token.kind == "elif":
            self.complain(self.token, "'elif' in an 'either'", "its branches have no conditions: write 'else'")
            self._drop_branches(first)
        self.close(first)
        return Either(tuple(branches), self.since(first))

    def _while(self) -> Statement:
        first = self.advance()
        condition = self.attempt(self.formula, "do")
        header, body = self._loop(first)
        return While(condition, header, body, self.since(first))

    def _for(self) -> Statement:
        """"for" NAME "from" expr ("to" | "below") expr [ NL header ] "do" block "end" """
        first = self.advance()
        variable, inclusive = "", True
        low: Expr = self.hole(first)
        high: Expr = self.hole(first)
        try:
            variable = self.declared_name("the variable of a loop")
            self.expect("from", mend="a loop is written: for i from 0 below n do")
            if self.is_word("below") and self.next_kind not in ("to", *LEVELS) and self.next.text != "below":
                raise self.expected("the loop's first value")
            low = self.formula()
            inclusive = self.is_word("to")
            if not (self.take("to") or self.take_word("below")):
                raise self.expected("'to' or 'below'", "to: up to and including; below: the last value excluded")
            high = self.attempt(self.formula, "do")
        except Mistake as mistake:
            self.record(mistake)
            self.skip_line("do")
        header, body = self._loop(first)
        return For(variable, low, high, inclusive, header, body, self.since(first))

    def _loop(self, first: Token) -> tuple[Header, Block]:
        header = self.header()
        self.open_block("do", first)
        body = self.block(first)
        self.close(first)
        return header, body

    def sort(self) -> Sort:
        """"nat" | "int" | "real" | "bool" """
        token = self.token
        if token.kind not in SORTS:
            near = nearest_word(token.text, SORTS) if token.kind == NAME else None
            raise self.expected("a type", f"is '{near}' meant?" if near else "the types are nat, int, real and bool")
        self.advance()
        sort: Sort = token.kind  # type: ignore[assignment]
        return sort

    def _var(self) -> Statement:
        """"var" NAME ":" type [ "size" sum ] [ ":=" value ]"""
        first = self.advance()
        name = self.declared_name("the name of a variable")
        self.expect(":", mend="a variable is declared with its type: var n: nat")
        sort = self.sort()
        size = self.sum() if self.take("size") else None
        if self.token.kind == "=":
            self.complain(self.token, "'=' compares; an assignment is written with ':='", f"write: {sort} := …")
            self.correct(":=")
        value = self._value() if self.take(":=") else None
        return Var(name, sort, size, value, self.since(first))

    def _resource(self) -> Statement:
        first = self.advance()
        verb: Any = first.kind
        amount = self.formula()
        resource = self.resource_name(verb)
        return ResourceStatement(verb, amount, resource, self.since(first))

    def resource_name(self, verb: str) -> str:
        what = "the name of a counter" if verb == "spend" else "the name of a gauge"
        return self.expect_name(what).text

    def _hold(self) -> Statement:
        first = self.advance()
        amount: Expr = self.hole(first)
        gauge = ""
        try:
            amount, name = self.formula(), self.resource_name("hold")
            self.expect("do", mend="hold … do … end gives the amount back at its end; 'acquire' keeps it")
            gauge = name
        except Mistake as mistake:
            self.record(mistake)
            self.skip_line("do")
            self.take("do")
        body = self.block(first)
        self.close(first)
        return HoldStatement(amount, gauge, body, self.since(first))

    def _stage(self) -> Statement:
        first = self.advance()
        name = self.expect_name("the name of a stage").text
        header = self.header()
        self.open_block("is", first)
        body = self.block(first)
        self.close(first)
        return Stage(name, header, body, self.since(first))
