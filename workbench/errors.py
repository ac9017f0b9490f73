"""The package's error base, and the place that a source error points to."""

from __future__ import annotations

from dataclasses import dataclass


class UllageError(Exception):
    """Base of every error that this package raises on purpose."""


class UsageError(UllageError):
    """A command was called with arguments that it cannot use."""


@dataclass(frozen=True, slots=True)
class Span:
    """A stretch of a sheet's text: offsets in characters, line and column from 1."""

    start: int
    end: int
    line: int
    column: int


@dataclass(frozen=True, slots=True)
class Problem:
    """One mistake in a sheet: where it is, what is wrong, and how to mend it where that can be said."""

    path: str
    span: Span
    message: str
    mend: str | None = None
    source_line: str = ""


class SheetError(UllageError):
    """A sheet cannot be read; carries every problem that was found."""

    def __init__(self, problems: list[Problem]) -> None:
        super().__init__(f"{len(problems)} problem(s) in the sheet")
        self.problems = problems
