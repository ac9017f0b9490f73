"""The reader's place in the tokens, what it complains of, and how it finds its feet again after a mistake.

A mistake is raised where it is seen and recorded where reading can go on: at the next statement, header item or item.
"""

from __future__ import annotations

from workbench.errors import Problem, Span
from workbench.sheet.lexer import BAD, END_OF_TEXT, NAME, NEWLINE, NUMBER, STRING, Token, read_tokens, token_of
from workbench.sheet.tree import Name
from workbench.sheet.words import ITEM_WORDS, MOST_PROBLEMS, NESTING, RESERVED, quoted

EVERYWHERE = -1  # in `Cursor.unsure`: a declaration for the whole sheet was lost


class Mistake(Exception):
    """Something is wrong at a place; reading goes on after it. Never leaves the reader."""

    def __init__(self, place: Token | Span, message: str, mend: str | None = None) -> None:
        super().__init__(message)
        self.span = place if isinstance(place, Span) else span_of(place)
        self.message = message
        self.mend = mend


class TooDeep(Exception):
    """Nesting beyond the limit. Reading goes on at the next item only. Never leaves the reader."""

    def __init__(self, place: Token, message: str = f"this is nested more than {NESTING} deep") -> None:
        super().__init__(message)
        self.place = place


class Enough(Exception):
    """As many problems as are told in one go. Never leaves the reader."""


def span_of(token: Token) -> Span:
    return Span(token.start, token.end, token.line, token.column)


class Cursor:
    def __init__(self, text: str, path: str) -> None:
        self.text = text
        self.path = path
        self._tokens = read_tokens(text)
        self._last = len(self._tokens) - 1
        self.at = 0  # the number of the present token
        self.token = self.previous = token_of(self._tokens[0])
        self.depth = 0  # blocks and brackets that are open
        self.problems: list[Problem] = []
        self.doubtful: set[str] = set()  # names in stretches that could not be read
        self.unsure: set[int] = set()  # where items start in which a declaration was lost
        self.item_start = 0  # of the item that is being read
        self._line_of_last_problem: tuple[int, str] = (0, "")

    @property
    def last_token(self) -> Token:
        """The end of the text; or of what was read of it, where there is too much."""
        return token_of(self._tokens[self._last])

    # -------------------------------------------------------------- moving
    def advance(self) -> Token:
        """Takes the present token; the last one can be taken again and again."""
        token = self.token
        if self.at < self._last:
            self.at += 1
            self.previous = token
            self.token = token_of(self._tokens[self.at])
        return token

    def correct(self, kind: str, text: str | None = None) -> None:
        """Reads the present token as the one that was meant."""
        self.token = self.token._replace(kind=kind, text=self.token.text if text is None else text)
        self._tokens[self.at] = (*self.token,)

    @property
    def next_kind(self) -> str:
        return self._tokens[min(self.at + 1, self._last)][0]

    @property
    def next(self) -> Token:
        """The token after the present one."""
        return token_of(self._tokens[min(self.at + 1, self._last)])

    def take(self, kind: str) -> bool:
        """Takes the present token if it is of that kind."""
        if self.token.kind != kind:
            return False
        self.advance()
        return True

    def is_word(self, word: str) -> bool:
        """Whether the present token is this word, reserved or not."""
        return self.token.text == word and self.token.kind in (NAME, word)

    def take_word(self, word: str) -> bool:
        if not self.is_word(word):
            return False
        self.advance()
        return True

    def expect(self, kind: str, what: str | None = None, mend: str | None = None) -> Token:
        """Takes a token of that kind; raises Mistake where another stands."""
        if self.token.kind != kind:
            raise self.expected(what or f"'{kind}'", mend)
        return self.advance()

    def expect_word(self, word: str, mend: str | None = None) -> Token:
        if not self.is_word(word):
            raise self.expected(f"'{word}'", mend)
        return self.advance()

    def expect_name(self, what: str) -> Token:
        """Takes a name. `what` says of what, such as 'the name of a counter'."""
        token = self.token
        if token.kind in RESERVED:
            raise Mistake(token, f"'{token.text}' is a word of the language and cannot be {what}",
                          "choose another name")  # fmt: skip
        return self.expect(NAME, what)

    def declared_name(self, what: str, for_all: bool = False) -> str:
        """Takes the name in a declaration; where it is lost, any unknown name of the item (or sheet) may be the one."""
        if self.token.kind != NAME:
            self.unsure.add(EVERYWHERE if for_all else self.item_start)
        return self.expect_name(what).text

    def skip_newlines(self) -> None:
        while self.token.kind == NEWLINE:
            self.advance()

    # -------------------------------------------------------------- places
    def since(self, first: Token) -> Span:
        """The stretch from that token to the last one taken."""
        end = self.previous.end
        return Span(first.start, end if end > first.start else first.start, first.line, first.column)

    def begins_line(self) -> bool:
        return self.at == 0 or self.previous.kind == NEWLINE

    def at_item(self) -> bool:
        """Whether an item begins here; its words are names elsewhere, so what follows decides."""
        token = self.token
        if token.text not in ITEM_WORDS or not self.begins_line():
            return False
        return self.next_kind in (NAME, STRING) or self.next_kind in RESERVED

    def enter(self, token: Token) -> None:
        self.depth += 1
        if self.depth > NESTING + 1:  # the block of a routine is the first
            raise TooDeep(token)

    def leave(self) -> None:
        self.depth -= 1

    # -------------------------------------------------------------- complaining
    def expected(self, what: str, mend: str | None = None) -> Mistake:
        """The mistake that the present token is not what had to stand here."""
        token = self.token
        if token.kind == BAD:
            return bad_token(token)
        return Mistake(token, f"expected {what}, found {described(token)}", mend)

    def record(self, mistake: Mistake) -> None:
        self.complain(mistake.span, mistake.message, mistake.mend)

    def complain(self, place: Token | Span, message: str, mend: str | None = None) -> None:
        """Records a problem. Raises Enough when there are too many."""
        span = place if isinstance(place, Span) else span_of(place)
        self.problems.append(Problem(self.path, span, message, mend, self.line_at(span)))
        if len(self.problems) >= MOST_PROBLEMS:
            raise Enough

    def line_at(self, span: Span) -> str:
        """The line of the text that the span begins in."""
        number, line = self._line_of_last_problem
        if number != span.line:  # problems of one line share its text, which may be long
            line = line_of(self.text, span)
            self._line_of_last_problem = (span.line, line)
        return line

    def skip_line(self, *stops: str) -> list[Token]:
        """Goes on to the next newline, or to a token of one of those kinds; what was passed over."""
        passed = []
        while self.token.kind not in (NEWLINE, END_OF_TEXT, *stops):
            passed.append(self.advance())
        return passed

    def skip_to(self, words: frozenset[str]) -> None:
        """Goes on to the next token that is one of the words, at least by one."""
        at = min(self.at + 1, self._last)
        while at < self._last and self._tokens[at][1] not in words:
            at += 1
        self.at, self.previous = at, token_of(self._tokens[at - 1])
        self.token = token_of(self._tokens[at])

    def doubt(self, start: int) -> None:
        """Nothing more is said of the names since that token, which could not be read: they may be declared there."""
        self.doubtful.update(text for kind, text, *_ in self._tokens[start : self.at] if kind == NAME)


    def hole(self, first: Token) -> Name:
        """Stands where an expression could not be read; such a sheet has problems and is used for nothing else."""
        return Name("", span=self.since(first))


def line_of(text: str, span: Span) -> str:
    """The line of the text that the span begins in, without its end."""
    start = span.start - span.column + 1
    end = text.find("\n", span.start)
    return text[start : end if end >= 0 else len(text)].rstrip("\r")


def described(token: Token) -> str:
    """How a message calls a token."""
    if token.kind == END_OF_TEXT:
        return "the end of the text"
    if token.kind == NEWLINE:
        return "';'" if token.text == ";" else "the end of the line"
    if token.kind == STRING:
        return "the text " + quoted(token.text)
    if token.kind == NUMBER:
        return "the number " + quoted(token.text)
    return quoted(token.text)


def bad_token(token: Token) -> Mistake:
    """What is wrong with a character that no token begins with."""
    character = token.text[0]  # of a run of one character
    if character == '"':
        return Mistake(token, "this text is never closed", 'write " before the line ends')
    if character == "_":
        return Mistake(token, "'_' stands only inside a name or between the digits of a number")
    if character == "!":
        return Mistake(token, "'!' alone means nothing", "write 'not', or != for unequal, or fact(n)")
    code = f"U+{ord(character):04X}"
    if not character.isprintable() or character.isspace():
        return Mistake(token, f"the character {code} may stand in comments and texts only", "delete it")
    mend = "names are written in ASCII letters, digits and '_'" if character.isalnum() else None
    return Mistake(token, f"{quoted(character)} ({code}) is no sign of the language", mend)
