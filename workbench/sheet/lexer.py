"""Text to tokens, with every newline that means nothing taken out. Knows words, but no grammar.

Never fails: what is no token of the language becomes one of kind BAD, and the reader says what is wrong with it, unless
it stands where a unit may be.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from functools import partial
from typing import NamedTuple, TypeAlias

from workbench.sheet.words import HEADER_WORDS, ITEM_WORDS, LEVELS, MOST_TOKENS, RESERVED, STATEMENT_WORDS

NAME, NUMBER, STRING, NEWLINE, BAD, END_OF_TEXT = "name", "number", "string", "newline", "bad", "end of text"


class Token(NamedTuple):
    """`kind` is one of the six above, or the token itself for a reserved word or a sign."""

    kind: str
    text: str
    start: int
    end: int
    line: int
    column: int


# As tokens are kept: the fields of a Token in a plain tuple, which the garbage collector need not look through.
Raw: TypeAlias = tuple[str, str, int, int, int, int]
token_of: Callable[[Raw], Token] = partial(tuple.__new__, Token)  # faster than Token._make, which is felt

_TOKEN = re.compile(
    r"""[ \t]*(?:
      (?P<newline>\n|\r\n|;)
    | (?P<comment>\#[^\n]*)
    | (?P<number>[0-9]+(?:_[0-9]+)*(?:\.[0-9]+(?:_[0-9]+)*)?(?:[eE][+-]?[0-9]+)?
        (?:[ \t]*[KMGTPE]iB(?![A-Za-z0-9_]))?)
    | (?P<name>[A-Za-z][A-Za-z0-9_]*)
    | (?P<string>"[^"\n]*")
    | (?P<sign>:=|->|<=|>=|!=|[-+*/^=<>(),:.'≤≥≠×·÷∧∨¬⇒′])
    | (?P<text_end>\Z)
    | (?P<bad>(?P<same>.)(?P=same)*)
    )""",
    re.VERBOSE | re.DOTALL,
)

ALIASES = {
    "≤": "<=", "≥": ">=", "≠": "!=", "×": "*", "·": "*", "÷": "/", "∧": "and", "∨": "or", "¬": "not", "⇒": "implies",
    "′": "'",
}  # fmt: skip

# After one of these a newline is white space.
CONTINUED = frozenset(LEVELS) | {":=", "->", ",", ":", "(", ".", "not"}

# These cannot go on with an expression: a line that begins so shows that the one before it is not finished.
_OUTSIDE = (STATEMENT_WORDS - {"if", "then", "else", "from", "to", "size"}) | HEADER_WORDS


def tokens_of(text: str) -> list[Raw]:
    """All tokens of the text, comments left out, newlines as they stand; END_OF_TEXT last.

    Of a text with too many of them only the first MOST_TOKENS + 1.
    """
    found: list[Raw] = []
    line, line_start = 1, 0
    for match in _TOKEN.finditer(text):
        group = match.lastgroup or BAD
        if group == "comment":
            continue
        word, end = match[group], match.end()
        start = end - len(word)
        column = start - line_start + 1
        if group == "name":
            kind = word if word in RESERVED else NAME
        elif group == "sign":
            kind = ALIASES.get(word, word)
        elif group == "text_end":
            found.append((END_OF_TEXT, "", start, end, line, column))
            break
        else:
            kind = group  # newline, number, string, bad
        found.append((kind, word, start, end, line, column))
        if kind == NEWLINE and word != ";":
            line, line_start = line + 1, end
        if len(found) > MOST_TOKENS:
            found.append((END_OF_TEXT, "", end, end, line, end - line_start + 1))
            break
    return found


def without_idle_newlines(tokens: list[Raw]) -> list[Raw]:
    """The tokens without newlines that are white space: inside ( ), after a trailing operator, comma or colon, and all
    but one of several in a row. (Those next to block words are the reader's affair.)"""
    kept: list[Raw] = []
    depth = 0
    before = NEWLINE
    for at, token in enumerate(tokens):
        kind = token[0]
        if kind == NEWLINE:
            if before == NEWLINE:
                continue
            if depth and token[1] != ";":
                if tokens[at + 1][0] == "for" or not _begins_anew(tokens, at + 1):
                    continue
                depth = 0
            elif before in CONTINUED and token[1] != ";" and not _begins_anew(tokens, at + 1):
                continue
        elif kind == "(":
            depth += 1
        elif kind == ")":
            depth = max(0, depth - 1)
        kept.append(token)
        before = kind
    return kept


def _begins_anew(tokens: list[Raw], at: int) -> bool:
    """Whether the token can only begin a line, so that something before it was forgotten (`for` goes on in a sum)."""
    kind, text = tokens[at][:2]
    return kind in _OUTSIDE or (text in ITEM_WORDS and tokens[at + 1][0] in (NAME, STRING))


def read_tokens(text: str) -> list[Raw]:
    """What the reader reads: `tokens_of` the text without idle newlines."""
    return without_idle_newlines(tokens_of(text))
