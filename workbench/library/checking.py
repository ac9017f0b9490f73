"""A sheet from its file to its verdicts, in one call."""

from __future__ import annotations

from collections.abc import Callable

from workbench.errors import Problem, Span
from workbench.library.loading import Loaded, load
from workbench.program.pricing import price
from workbench.proof.judging import judge
from workbench.proof.report import SheetReport
from workbench.proof.search import SECONDS

START = Span(0, 0, 1, 1)


def check_sheet(
    path: str,
    *,
    seconds: float = SECONDS,
    cancelled: Callable[[], bool] | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> SheetReport:
    """Reads, prices and proves the sheet at `path`. An unreadable sheet gives a report with its problems.

    `seconds`: for each obligation. Raises Stopped once `cancelled()` says so.
    """
    return check_loaded(load(path), seconds=seconds, cancelled=cancelled, progress=progress)


def check_loaded(
    loaded: Loaded,
    *,
    seconds: float = SECONDS,
    cancelled: Callable[[], bool] | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> SheetReport:
    """The same for a sheet that is loaded already."""
    if loaded.sheet is None or loaded.problems:
        return SheetReport(loaded.path, "unreadable", loaded.problems)
    try:
        program = price(loaded.path, loaded.sheet, loaded.used)
        return judge(program, seconds=seconds, cancelled=cancelled, progress=progress)
    except (RecursionError, MemoryError):
        message = "the sheet is too large to work with: it nests too deep, or a routine is too long"
        problem = Problem(loaded.path, START, message, "divide it into smaller routines")
        return SheetReport(loaded.path, "unreadable", (problem,))
