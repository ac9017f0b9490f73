"""Text to tree. The one entrance to reading; never raises on bad text, however bad.

A sheet is data: reading it runs nothing and opens nothing.
"""

from __future__ import annotations

from dataclasses import dataclass

from workbench.errors import Problem, SheetError, Span
from workbench.sheet.cursor import EVERYWHERE, Enough, Mistake, TooDeep, line_of
from workbench.sheet.items import ItemReader
from workbench.sheet.lexer import END_OF_TEXT
from workbench.sheet.scopes import CERTAIN, Doubts
from workbench.sheet.tree import Expr, Sheet
from workbench.sheet.words import LARGEST_SHEET, MOST_TOKENS


@dataclass(frozen=True, slots=True)
class Reading:
    """The sheet, as far as it could be read, and every mistake found in its text.

    `doubts` says which names may be declared in stretches that could not be read.
    """

    sheet: Sheet
    problems: tuple[Problem, ...]
    doubts: Doubts = CERTAIN


def decode_sheet(data: bytes, path: str) -> tuple[str | None, tuple[Problem, ...]]:
    """The text of a file's bytes: UTF-8, a byte order mark allowed and dropped. None, and why, where it is no text."""
    top = Span(0, 0, 1, 1)
    if len(data) > LARGEST_SHEET:
        message = f"the sheet is too large: {len(data):,} bytes, where {LARGEST_SHEET:,} are allowed"
        return None, (Problem(path, top, message, "divide it, and join the parts with 'use'"),)
    try:
        return data.decode("utf-8-sig"), ()
    except UnicodeDecodeError as error:
        before = data[: error.start].decode("utf-8-sig", errors="replace")
        line, column = before.count("\n") + 1, len(before) - (before.rfind("\n") + 1) + 1
        span = Span(len(before), len(before) + 1, line, column)
        shown = line_of(data.decode("utf-8-sig", errors="replace"), span)
        message = f"the byte 0x{data[error.start]:02x} is no UTF-8"
        return None, (Problem(path, span, message, "save the sheet as UTF-8", shown),)


def read_sheet(text: str, path: str) -> Reading:
    """The tree of a sheet's text; `path` is what messages call it. Grammar only: names and types are `checking`'s."""
    reader = ItemReader(text, path)
    last = reader.last_token
    if last.end < len(text):
        span = Span(last.start, last.end, last.line, last.column)
        message = f"the sheet has more than {MOST_TOKENS:,} words and signs"
        mend = "divide it, and join the parts with 'use'"
        return Reading(Sheet(None, ()), (Problem(path, span, message, mend, line_of(text, span)),))
    try:
        sheet = reader.sheet()
    except Enough:
        sheet = Sheet(None, ())
    problems = tuple(sorted(reader.problems, key=lambda p: p.span.start))
    doubts = Doubts(frozenset(reader.doubtful), frozenset(reader.unsure), EVERYWHERE in reader.unsure)
    return Reading(sheet, problems, doubts)


def read_formula(text: str, in_claim: bool = True) -> Expr:
    """The tree of one formula or expression, which is all of the text. `in_claim` allows short forms.

    Raises SheetError where it is none; the problems' path is empty.
    """
    reader = ItemReader(text, "")
    reader.in_claim = in_claim
    found: Expr | None = None
    try:
        reader.skip_newlines()
        found = reader.formula()
        reader.skip_newlines()
        if reader.token.kind != END_OF_TEXT:
            raise reader.expected("the end of the formula")
    except Mistake as mistake:
        reader.record(mistake)
    except TooDeep as problem:
        reader.complain(problem.place, str(problem))
    if found is None or reader.problems:
        raise SheetError(reader.problems)
    return found
