"""Reads headers: what stands between the first line of a routine, loop or stage and its block."""

from __future__ import annotations

from collections.abc import Callable

from workbench.sheet.cursor import Mistake
from workbench.sheet.expressions import ExpressionReader
from workbench.sheet.lexer import END_OF_TEXT, NAME, NEWLINE, NUMBER, STRING
from workbench.sheet.tree import CasesHint, Claim, Given, Header, HeaderItem, Measure, Source, UsingHint
from workbench.sheet.words import HEADER_WORDS, STATEMENT_WORDS, nearest_word, quoted

HINTS = ("cases", "using")


class HeaderReader(ExpressionReader):
    def header(self) -> Header:
        """{ given | claim { hint } | measure | source }, up to something else."""
        found: list[HeaderItem] = []
        readers: dict[str, Callable[[], HeaderItem]] = {
            "given": self._given, "claim": self._claim, "measure": self._measured, "source": self.source,
        }  # fmt: skip
        while True:
            newline = self.token.kind == NEWLINE or self.begins_line()
            self.skip_newlines()
            if newline and self.token.kind not in HEADER_WORDS and not self._ends_header():
                self._mend_header_word()
            first = self.token
            if first.kind == NEWLINE:
                continue
            if first.kind not in HEADER_WORDS:
                return Header(tuple(found))
            try:
                if not newline:
                    raise Mistake(first, f"'{first.kind}' begins a line of its own")
                if first.kind in HINTS:
                    raise Mistake(first, f"the hint '{first.kind}' belongs under a claim", "move it below its claim")
                found.append(readers[first.kind]())
            except Mistake as mistake:
                self._skip_header_line(mistake)
                if first.kind == "claim":
                    self._hints()

    def _ends_header(self) -> bool:
        """Whether a statement, the end of a block or an item begins here."""
        kind = self.token.kind
        if kind == NAME:
            return self.next_kind in (":=", "(", "=") or self.at_item()
        return kind in STATEMENT_WORDS or kind in ("result", END_OF_TEXT)

    def _mend_header_word(self) -> None:
        """A misspelt word at the begin of a header's line is read as the right one, a bare label as a claim's."""
        token = self.token
        if token.kind == NAME and self.next_kind == ":":
            self.complain(token, f"{quoted(token.text)} begins no line of a header", f"claim {token.text[:20]}: …")
            self.at -= 1  # the newline before it stands for the word that is missing
            self.correct("claim")
            return
        near = nearest_word(token.text, HEADER_WORDS | {"is", "do"}) if token.kind == NAME else None
        if near is not None:
            self.complain(token, f"{quoted(token.text)} begins no line of a header", f"is '{near}' meant?")
            self.correct(near)
        else:
            mend = "a header's lines begin with given, claim, measure or source; its block with is or do"
            self.record(self.expected("a line of a header", mend))
            self.skip_line("is", "do")

    def _skip_header_line(self, mistake: Mistake) -> None:
        self.record(mistake)
        if self.token.kind in HEADER_WORDS:
            self.advance()
        self.skip_line("is", "do")

    def _header_line(self) -> None:
        if self.token.kind not in (NEWLINE, END_OF_TEXT, "is", "do"):
            raise self.expected("the end of the line")

    def _given(self) -> HeaderItem:
        first = self.advance()
        formula = self.formula()
        self._header_line()
        return Given(formula, self.since(first))

    def _claim(self) -> HeaderItem:
        """"claim" [ NAME ":" ] cform NL { hint }"""
        first = self.advance()
        label = None
        if self.next_kind == ":":
            label = self.expect_name("a label").text
            self.advance()
        start = self.token
        self.in_claim = True
        formula = self.formula()
        formula_span, span = self.since(start), self.since(first)
        self.in_claim = False
        self._header_line()
        return Claim(label, formula, self._hints(), span, formula_span)

    def _hints(self) -> tuple[CasesHint | UsingHint, ...]:
        hints: list[CasesHint | UsingHint] = []
        while self.token.kind == NEWLINE and self.next_kind in HINTS:
            self.advance()
            try:
                hints.append(self._hint())
            except Mistake as mistake:
                self._skip_header_line(mistake)
        return tuple(hints)

    def _hint(self) -> CasesHint | UsingHint:
        first = self.advance()
        if first.kind == "cases":
            hint: CasesHint | UsingHint = CasesHint(self.formula(), self.since(first))
        else:
            used = self.application("the name of a law or function")
            hint = UsingHint(used.name, used.arguments, self.since(first))
        self._header_line()
        return hint

    def _measured(self) -> HeaderItem:
        first = self.advance()
        components = [self.formula()]
        while self.take(","):
            components.append(self.formula())
        self._header_line()
        return Measure(tuple(components), self.since(first))

    def source(self) -> Source:
        """"source" STRING [ "lines" INT "to" INT ] [ "digest" STRING ]"""
        first = self.advance()
        path = self.string("the path of a source file")
        lines: list[int | None] = [None, None]
        if self.take_word("lines"):
            lines = [self.whole_number("the first line"), None]
            self.expect("to", mend='lines are written: source "ring.c" lines 4 to 13')
            lines[1] = self.whole_number("the last line")
        digest = self.string("a digest") if self.take_word("digest") else None
        span = self.since(first)
        self._header_line()
        return Source(path, lines[0], lines[1], digest, span)

    # -------------------------------------------------------------- small parts
    def string(self, what: str) -> str:
        return self.expect(STRING, what, 'texts stand in "…"').text[1:-1]

    def whole_number(self, what: str) -> int:
        token = self.token
        if token.kind != NUMBER:
            raise self.expected(what)
        value = self._number().value
        if value.denominator != 1:
            raise Mistake(token, f"{quoted(token.text)} is no whole number")
        return int(value)
