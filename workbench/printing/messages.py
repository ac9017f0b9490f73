"""Problems as a person reads them: the place, what is wrong, the line with a caret, how to mend it.

Whatever a sheet holds reaches the terminal through here, so nothing in it can steer the terminal.
"""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable

from workbench.errors import Problem
from workbench.sheet.words import visible

__all__ = ["format_problem", "format_problems", "visible"]

WINDOW = 96  # characters of a line that are shown: with its indentation still below 100 columns
BEFORE = 60  # of them at most before the caret
INDENT = "    "


def format_problems(problems: Iterable[Problem]) -> str:
    """All of them, each as `format_problem` has it, an empty line between two."""
    return "\n".join(format_problem(p) for p in problems)


def format_problem(problem: Problem) -> str:
    """`file:line:column: what is wrong`, the line with a caret, how to mend it. Ends with a newline.

    Holds no control character but newlines, whatever the sheet's text and path hold.
    """
    span = problem.span
    lines = [f"{visible(problem.path)}:{span.line}:{span.column}: {visible(problem.message)}"]
    if problem.source_line.strip():
        lines += _pointed(problem.source_line, span.column)
    if problem.mend:
        lines.append(INDENT + visible(problem.mend))
    return "\n".join(lines) + "\n"


def _pointed(line: str, column: int) -> tuple[str, str]:
    """The line, or a window of it where it is long, and a caret under the column."""
    at = min(column - 1, len(line))
    start = max(0, at - BEFORE) if len(line) > WINDOW else 0
    end = start + WINDOW
    head = ("…" if start else "") + _shown(line[start:at])
    tail = _shown(line[at:end]) + ("…" if end < len(line) else "")
    return INDENT + head + tail, INDENT + " " * _width(head) + "^"


def _shown(text: str) -> str:
    return visible(text.replace("\t", " "))


def _width(text: str) -> int:
    """Columns that the text takes on a terminal: wide East Asian characters take two, combining marks none."""
    return sum(2 if unicodedata.east_asian_width(c) in "WF" else 0 if unicodedata.combining(c) else 1 for c in text)
