"""Verdicts as lines of text: one a claim, with what breaks it or what is missing below it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from workbench.algebra.formulas import show, show_number
from workbench.algebra.terms import Rational
from workbench.printing.messages import visible
from workbench.proof.report import ClaimReport, Decided, MathematicsReport, RoutineReport, SheetReport

# Verdicts stand in a column of their own, so that the eye finds what is not proved.
COLUMN = 9


def sheet_lines(report: SheetReport) -> Iterator[str]:
    """Lines of one sheet: the sheet, laws and functions, then routines with their claims."""
    yield f"{visible(report.path)}: {report.verdict}"
    for m in report.mathematics:
        yield from _mathematics_lines(m)
    for r in report.routines:
        yield from _routine_lines(r)


def _mathematics_lines(m: MathematicsReport) -> Iterator[str]:
    yield f"  {m.verdict:{COLUMN}}{m.kind} {m.name}"
    if m.verdict != "proved":
        yield from _missing(m.leans_on, m.obligations)


def _routine_lines(r: RoutineReport) -> Iterator[str]:
    for c in r.claims:
        yield from claim_lines(r.routine.name, c)
    for d in r.obligations:
        if d.verdict != "proved":
            where = f"{r.routine.name}.{d.obligation.specification}" if d.obligation.specification else r.routine.name
            yield f"  {d.verdict:{COLUMN}}{where}: line {d.obligation.span.line}: {visible(d.obligation.case)}"
            yield from _reasons(d, "")
    for warning in r.warnings:
        yield f"  warning  {r.routine.name}: {warning}"


def claim_lines(routine: str, c: ClaimReport) -> Iterator[str]:
    """The claim's line, and what is missing below it."""
    how = " (worked out by the tool)" if c.claim.inferred else ""
    yield f"  {c.verdict:{COLUMN}}{routine}.{c.label}: {visible(c.claim.text)}{how}"
    if c.verdict != "proved":
        yield from _missing(c.leans_on, c.obligations)


def _missing(leans_on: tuple[str, ...], obligations: tuple[Decided, ...]) -> Iterator[str]:
    broken = [d for d in obligations if d.verdict == "refuted"]
    for d in broken or obligations:
        if d.verdict != "proved":
            yield from _reasons(d, f"{visible(d.obligation.case)}: ")
    if leans_on:
        yield f"{'':{COLUMN + 4}}leans on {', '.join(leans_on)}"


def _reasons(d: Decided, case: str) -> Iterator[str]:
    indent = " " * (COLUMN + 4)
    if d.verdict == "refuted":
        yield f"{indent}broken by {values_text(d.witness or {})}"
        return
    yield f"{indent}{case}{d.why or 'no proof was found'}"
    if d.residue is not None:
        yield f"{indent}the two sides differ by {show(d.residue)}"


def values_text(values: Mapping[str, Rational | bool]) -> str:
    """a = 1, b = 2; those that the reader can set first."""
    ordered = sorted(values.items(), key=lambda item: ("@" in item[0], "." in item[0]))
    shown = [f"{n} = {str(v).lower() if isinstance(v, bool) else show_number(v)}" for n, v in ordered]
    return ", ".join(shown) or "any values"
