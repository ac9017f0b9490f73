"""Reads formulas and expressions, by precedence, with an explicit stack of operators.

Only brackets, `if` and `sum` recurse, so the stack stays small. How deep and how long the tree becomes is counted while
it is built, for whoever walks it later: chains of binary operators lean left (walk that edge in a loop), all other
edges are at most TALLEST deep, the blocks round the expression included.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any, NamedTuple

from workbench.errors import Span
from workbench.sheet.cursor import Cursor, Mistake, TooDeep
from workbench.sheet.lexer import NAME, NEWLINE, NUMBER, Token
from workbench.sheet.tree import (
    Application,
    Binary,
    Comparison,
    Conditional,
    Expr,
    Name,
    Number,
    Short,
    Summation,
    Truth,
    Unary,
)
from workbench.sheet.words import (
    ADD,
    ASPECTS,
    COMPARE,
    FUNCTION_WORDS,
    IMPLIES,
    LARGEST_DIGITS,
    LEVELS,
    LONGEST_CHAIN,
    MINUS,
    NOT,
    RIGHT,
    SUFFIXES,
    TALLEST,
    quoted,
)

PREFIXES = ASPECTS | {"-", "not"}
MOST_PENDING = TALLEST + len(set(LEVELS.values()))  # operators that wait for operands: more lean right too deep


class _Part(NamedTuple):
    """An operand so far. `nest`: the tree's depth, left edges of binary operators apart; `chain`: their number."""

    node: Expr
    first: Token
    end: int
    nest: int
    chain: int


class _Pending:
    """An operator that waits for its right operand. A comparison gathers the operators of its chain."""

    __slots__ = ("level", "signs", "token", "short")

    def __init__(self, level: int, token: Token, short: tuple[str, str] | None = None) -> None:
        self.level = level
        self.signs = [token.kind]
        self.token = token
        self.short = short


class ExpressionReader(Cursor):
    def __init__(self, text: str, path: str) -> None:
        super().__init__(text, path)
        self.blocks = 0  # open blocks, which leave the less room for the depth of expressions
        self.in_claim = False
        self.in_charge = False
        self.excused = -1  # the token at which a word may be missing: a mistake before it has been told

    # -------------------------------------------------------------- what the grammar calls
    def formula(self) -> Expr:
        """formula or expr: types tell them apart, not the grammar."""
        return self._parse(IMPLIES).node

    def sum(self) -> Expr:
        """An expression without comparison, not, and, or, implies, if."""
        return self._parse(ADD).node

    def application(self, what: str) -> Application:
        """NAME "(" exprs ")"; `what` says of what it is the name."""
        if self.token.kind != NAME:
            self.expect_name(what)  # which says what is wrong
        node = self._application().node
        assert isinstance(node, Application)
        return node

    # -------------------------------------------------------------- operators
    def _parse(self, lowest: int) -> _Part:
        parts: list[_Part] = []
        pending: list[_Pending] = []
        while True:
            while self.token.kind in PREFIXES and self._prefix(pending, lowest):
                pass
            part = self._operand(lowest)
            level = LEVELS.get(self.token.kind, 0)
            if level < lowest:
                if not pending:
                    return part
                parts.append(part)
                break
            parts.append(part)
            while pending and (pending[-1].level > level or (pending[-1].level == level and level not in RIGHT)):
                if level == COMPARE == pending[-1].level:
                    break
                self._reduce(parts, pending)
            token = self.advance()
            if level == COMPARE and pending and pending[-1].level == COMPARE:
                self._lengthen(pending[-1], token)
            else:
                pending.append(_Pending(level, token))
                if len(pending) > MOST_PENDING:
                    raise TooDeep(token)
        while pending:
            self._reduce(parts, pending)
        return parts[0]

    def _lengthen(self, comparison: _Pending, token: Token) -> None:
        if comparison.short is not None:
            raise Mistake(token, "a short form holds one comparison only", "join two claims with 'and'")
        comparison.signs.append(token.kind)
        if len(comparison.signs) > LONGEST_CHAIN:
            raise _too_long(token)

    def _prefix(self, pending: list[_Pending], lowest: int) -> bool:
        """Takes a `not`, a unary minus or the head of a short form."""
        token = self.token
        if token.kind == "-":
            pending.append(_Pending(MINUS, self.advance()))
        elif token.kind == "not" and lowest <= NOT:
            if pending and pending[-1].level > NOT:
                raise Mistake(token, "'not' cannot follow this operator directly", "put 'not …' in brackets")
            pending.append(_Pending(NOT, self.advance()))
        elif token.kind in ASPECTS and lowest <= COMPARE:
            pending.append(self._short_head(pending))
        else:
            return False
        if len(pending) > MOST_PENDING:
            raise TooDeep(token)
        return True

    def _short_head(self, pending: list[_Pending]) -> _Pending:
        """("spent" | "net" | "peak" | "area" | "mean") NAME ("=" | "<=" | ">=")"""
        aspect = self.token
        if pending and pending[-1].level > NOT:
            raise Mistake(aspect, f"'{aspect.kind}' begins a short form, which cannot follow this operator",
                          f"write '{aspect.kind}' first, such as {aspect.kind} time <= 5")  # fmt: skip
        if not self.in_claim:
            self.complain(aspect, f"the short form '{aspect.kind}' may stand in claims only")
        self.advance()
        resource = self.expect_name("the name of a counter or gauge")
        if self.token.kind not in ("=", "<=", ">="):
            raise self.expected(f"'=', '<=' or '>=' after '{aspect.kind} {resource.text}'")
        entry = _Pending(COMPARE, aspect, (resource.text, self.token.kind))
        self.advance()
        return entry

    def _reduce(self, parts: list[_Part], pending: list[_Pending]) -> None:
        """Joins the last operator with its operands."""
        entry = pending.pop()
        sign: Any = entry.signs[0]
        right = parts[-1]
        if entry.short is not None or entry.level in (NOT, MINUS):
            first, count = entry.token, 1
        elif entry.level == COMPARE:
            count = len(entry.signs) + 1
            first = parts[-count].first
        else:
            count, first = 2, parts[-2].first
        operands = parts[-count:]
        del parts[-count:]
        span = Span(first.start, right.end, first.line, first.column)
        nest, chain = max(p.nest for p in operands) + 1, 0
        node: Expr
        if entry.short is not None:
            resource, relation = entry.short
            node = Short(sign, resource, relation, right.node, span)  # type: ignore[arg-type]
        elif entry.level in (NOT, MINUS):
            node = Unary(sign, right.node, span)
        elif entry.level == COMPARE:
            node = Comparison(tuple(p.node for p in operands), tuple(entry.signs), span)  # type: ignore[arg-type]
        else:
            left = operands[0]
            node = Binary(sign, left.node, right.node, span)
            leans = isinstance(left.node, Binary)
            nest, chain = max(left.nest + (not leans), right.nest + 1), left.chain + 1
        self._measure(nest, entry.token)
        if chain > LONGEST_CHAIN:
            raise _too_long(entry.token)
        parts.append(_Part(node, first, right.end, nest, chain))

    # -------------------------------------------------------------- operands
    def _operand(self, lowest: int) -> _Part:
        token = self.token
        kind = token.kind
        if kind == NAME:
            return self._application() if self.next_kind == "(" else self._named()
        if kind == NUMBER:
            return self._leaf(token, self._number())
        if kind == "(":
            return self._bracketed()
        if kind == "result":
            self.advance()
            return self._leaf(token, Name("result", self.take("'"), self.since(token)))
        if kind in FUNCTION_WORDS:
            return self._application()
        if kind == "sum":
            return self._summation()
        if kind == "if" and lowest <= COMPARE:
            return self._conditional()
        if kind in ("true", "false"):
            self.advance()
            return self._leaf(token, Truth(kind == "true", self.since(token)))
        if kind == "size" and self.in_charge:
            self.advance()
            return self._leaf(token, Name("size", span=self.since(token)))
        raise self._no_operand(lowest)

    def _no_operand(self, lowest: int) -> Mistake:
        token = self.token
        if token.kind in ("if", "not") or token.kind in ASPECTS:
            return Mistake(token, f"'{token.kind}' cannot stand here", "put the whole of it in brackets")
        what = "a value" if lowest > COMPARE else "a value or formula"
        if self.previous.kind in LEVELS:
            what += f" after '{self.previous.text}'"
        mend = None
        if token.kind == ".":
            mend = "a number begins with a digit: 0.5"
        elif token.kind in LEVELS and self.previous.kind == NEWLINE:
            mend = "to go on over a line's end, end the line with the operator"
        return self.expected(what, mend)

    def _leaf(self, first: Token, node: Expr) -> _Part:
        return _Part(node, first, node.span.end, 1, 0)

    def _bracketed(self) -> _Part:
        first = self.advance()
        self.enter(first)
        inner = self._parse(IMPLIES)
        if self.token.kind != ")":
            raise self._unclosed(first)
        end = self.advance().end
        self.leave()
        return _Part(inner.node, first, end, inner.nest, inner.chain)

    def _unclosed(self, first: Token) -> Mistake:
        if self.token.kind == NEWLINE or self.token.line > first.line:
            return Mistake(first, "this bracket is never closed", "write ')' where it ends")
        return self.expected("')'")

    def _named(self) -> _Part:
        token = self.advance()
        name = token.text
        if self.token.kind == "." and self.token.start == token.end:
            self.advance()
            if self.token.kind not in ("peak", "area"):
                raise self.expected(f"'peak' or 'area' after '{quoted(name)[1:-1]}.'")
            name += "." + self.advance().kind
        return self._leaf(token, Name(name, self.take("'"), self.since(token)))

    def _number(self) -> Number:
        token = self.advance()
        after = self.token
        if after.start == token.end and after.kind not in LEVELS and (after.kind == "(" or after.text[:1].isalnum()):
            raise Mistake(token, f"the number {quoted(token.text)} runs into {quoted(after.text)}",
                          "put an operator between them, such as *; a name begins with a letter")  # fmt: skip
        return Number(number_value(token), token.text, self.since(token))

    def _application(self) -> _Part:
        first = self.advance()
        if self.token.kind != "(":
            mend = f"its arguments stand in brackets: {first.text[:20]}(…)"
            raise self.expected(f"'(' after {quoted(first.text)}", mend)
        bracket = self.advance()
        self.enter(bracket)
        found: list[_Part] = []
        while self.token.kind != ")":
            if found:
                if self.token.kind != ",":
                    raise self._unclosed(bracket)
                self.advance()
            found.append(self._parse(IMPLIES))
            if len(found) > LONGEST_CHAIN:
                raise Mistake(bracket, f"more than {LONGEST_CHAIN:,} arguments")
        self.advance()
        self.leave()
        return self._grown(Application(first.text, tuple(p.node for p in found), self.since(first)), first, found)

    def _summation(self) -> _Part:
        """"sum" "(" expr "for" NAME "from" expr "to" expr ")" """
        first = self.advance()
        self.enter(self.expect("("))
        body = self._parse(IMPLIES)
        self.expect("for", mend="a sum is written sum(i^2 for i from 1 to n)")
        variable = self.expect_name("the variable of a sum").text
        self.expect("from")
        low = self._parse(IMPLIES)
        self.expect("to")
        high = self._parse(IMPLIES)
        self.expect(")")
        self.leave()
        node = Summation(body.node, variable, low.node, high.node, self.since(first))
        return self._grown(node, first, [body, low, high])

    def _conditional(self) -> _Part:
        """"if" formula "then" formula "else" formula, as far right as possible"""
        first = self.advance()
        self.enter(first)
        condition = self._parse(IMPLIES)
        self._word_between("then")
        then = self._parse(IMPLIES)
        self._word_between("else")
        otherwise = self._parse(IMPLIES)
        self.leave()
        node = Conditional(condition.node, then.node, otherwise.node, self.since(first))
        return self._grown(node, first, [condition, then, otherwise])

    def _word_between(self, word: str) -> None:
        """Newlines next to `then` and `else` mean nothing."""
        if self.token.kind == NEWLINE and self.next_kind == word:
            self.advance()
        self.expect(word, mend="as a value, 'if' has both 'then' and 'else'")
        self.skip_newlines()

    def _grown(self, node: Expr, first: Token, children: list[_Part]) -> _Part:
        nest = max((c.nest for c in children), default=0) + 1
        self._measure(nest, first)
        return _Part(node, first, node.span.end, nest, 0)

    def _measure(self, nest: int, place: Token) -> None:
        if nest + self.blocks > TALLEST:
            raise TooDeep(place, f"this expression is more than {TALLEST - self.blocks} operators deep")

    # -------------------------------------------------------------- where reading goes on after a mistake
    def record(self, mistake: Mistake) -> None:
        """Records it; every bracket that was open is left."""
        self.depth = self.blocks
        self.in_claim = self.in_charge = False
        super().record(mistake)

    def attempt(self, read: Callable[[], Expr], *stops: str) -> Expr:
        """An expression that ends at one of those words; after a mistake goes on there, with a hole in its place."""
        first = self.token
        try:
            found = read()
            if self.token.kind not in (*stops, NEWLINE):
                raise self.expected(f"'{stops[0]}'")
            return found
        except Mistake as mistake:
            self.record(mistake)
            self.skip_line(*stops)
            self.excused = self.at
            return self.hole(first)


def _too_long(token: Token) -> Mistake:
    return Mistake(token, f"more than {LONGEST_CHAIN:,} operators in a row", "divide it into parts, with a 'note' each")


def number_value(token: Token) -> Fraction:
    """The exact value of a number as written. Raises Mistake where it is too large to be handled."""
    text = token.text.replace("_", "")
    if len(text) <= LARGEST_DIGITS and text.isdecimal():
        return Fraction(int(text))
    factor = 1
    if text.endswith("iB"):
        factor, text = SUFFIXES[text[-3:]], text[:-3].rstrip()
    mantissa, _, exponent = text.lower().partition("e")
    # The length first: turning a million digits into a number takes long by itself.
    if len(mantissa) > LARGEST_DIGITS or len(exponent) > len("+1000000") or abs(int(exponent or 0)) > LARGEST_DIGITS:
        raise Mistake(token, f"the number {quoted(token.text)} is too large or too fine",
                      f"numbers have at most {LARGEST_DIGITS:,} digits")  # fmt: skip
    whole, _, decimals = mantissa.partition(".")
    shift = int(exponent or 0) - len(decimals)
    return Fraction(int(whole + decimals) * factor) * Fraction(10) ** shift
