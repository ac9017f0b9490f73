"""What the panes say, as rows of plain text with a role each. Widgets only draw them."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from workbench.algebra.formulas import show
from workbench.errors import Span
from workbench.printing.messages import visible
from workbench.printing.priced import priced_lines
from workbench.printing.verdicts import values_text
from workbench.printing.wrapping import wrapped
from workbench.proof.report import ClaimReport, Decided
from workbench.screens.session import ClaimPlace, Session, specifications
from workbench.sheet import tree
from workbench.sheet.writer import write_sheet

# Words and marks tell verdicts apart; colour only repeats them.
MARKS = {"proved": "+", "refuted": "!", "open": "?", "verified": "+", "proving": ".", "unreadable": "!"}


@dataclass(frozen=True, slots=True)
class Row:
    """A line of a pane. `role` says how it looks, `key` what it stands for where the cursor can stand on it."""

    text: str
    role: str = "text"
    key: object = None


def rows_of(text: str, width: int, role: str = "text", key: object = None, indent: int = 0) -> Iterator[Row]:
    """A formula or sentence on as many rows as it needs; the first one stands for the key."""
    for i, line in enumerate(wrapped(visible(text), width, indent)):
        yield Row(line, role, key if i == 0 else None)


def verdict_word(verdict: str) -> str:
    return f"{MARKS[verdict]} {verdict:9}"


# ---------------------------------------------------------------- specification
def specification_rows(session: Session, width: int, unfolded: bool) -> list[Row]:
    """Givens, claims with their verdicts, measure and budgets of every routine; the reader's messages where there
    are any.
    """
    rows: list[Row] = []
    if session.loaded.problems:
        rows.append(Row("The sheet cannot be read yet. Press e and mend it:", "refuted"))
        for p in session.loaded.problems:
            rows += rows_of(f"line {p.span.line}, column {p.span.column}: {p.message}", width, "refuted")
            if p.mend:
                rows += rows_of(p.mend, width, "dim", indent=2)
        return rows
    if session.program is None:
        return [Row("The sheet is too large to work with.", "refuted")]
    own = [r for r in session.program.routines.values() if r.sheet == session.program.path]
    if not own:
        rows += rows_of(
            "No routine yet. Press e to write one: a tariff, then `routine name(n: nat)` with claims.", width, "dim"
        )
    places = session.claims()
    for routine in own:
        if rows:
            rows.append(Row(""))
        parameters = ", ".join(f"{p.name}: {p.sort}" for p in routine.parameters)
        result = f" -> {routine.result}" if routine.result else ""
        rows += rows_of(f"routine {routine.name}({parameters}){result}", width, "title")
        for spec in specifications(session, routine.name):
            if spec.label:
                rows += rows_of(spec.label, width, "title", indent=1)
            for given in spec.givens:
                rows += rows_of(f"given {show(given)}", width, "dim", indent=2)
            for place in places:
                if place.routine == routine.name and place.specification == spec.label:
                    rows += _claim_rows(session, place, width, unfolded)
            if spec.measure:
                rows += rows_of(f"measure {', '.join(map(show, spec.measure))}", width, "dim", indent=2)
        rows += _side_rows(session, routine.name, width)
    rows += _budget_rows(session, width)
    return rows


def _claim_rows(session: Session, place: ClaimPlace, width: int, unfolded: bool) -> Iterator[Row]:
    report = session.verdict(place)
    verdict = "proving" if report is None else report.verdict
    formula = show(place.claim.formula) if unfolded else place.claim.text
    how = " (worked out)" if place.claim.inferred else ""
    yield from rows_of(f"{verdict_word(verdict)}{place.claim.label}: {formula}{how}", width, verdict, place, 1)
    if report is not None and verdict != "proved":
        yield from _missing_rows(report, width)


def _missing_rows(report: ClaimReport, width: int) -> Iterator[Row]:
    broken = [d for d in report.obligations if d.witness is not None]
    for d in broken or report.obligations:
        if d.witness is not None:
            yield from rows_of(f"broken by {values_text(d.witness)}", width, "refuted", indent=5)
        elif d.verdict == "open":
            yield from rows_of(f"{d.obligation.case}: {d.why}", width, "open", indent=5)
            if d.residue is not None:
                yield from rows_of(f"the two sides differ by {show(d.residue)}", width, "open", indent=5)
    if report.leans_on:
        yield from rows_of(f"leans on {', '.join(report.leans_on)}", width, "open", indent=5)


def _side_rows(session: Session, routine: str, width: int) -> Iterator[Row]:
    if session.report is None or session.report_version != session.version:
        return
    for r in session.report.routines:
        if r.routine.name == routine:
            for d in r.obligations:
                if d.verdict != "proved":
                    words = f"{verdict_word(d.verdict)}line {d.obligation.span.line}: {d.obligation.case}"
                    yield from rows_of(words, width, d.verdict, indent=1)
            for warning in r.warnings:
                yield from rows_of(f"warning: {warning}", width, "open", indent=1)


def _budget_rows(session: Session, width: int) -> Iterator[Row]:
    sheet = session.loaded.sheet
    if sheet is None:
        return
    items = tuple(i for i in sheet.items if isinstance(i, tree.Budget | tree.Pool))
    for line in write_sheet(tree.Sheet(None, items)).splitlines():
        if line.strip():
            yield from rows_of(line, width, "dim")


# ---------------------------------------------------------------- refinement
def refinement_rows(session: Session, width: int, priced: bool) -> list[Row]:
    """The program, with the path of the selected obligation marked, and the statement that the next substitution
    uses.
    """
    on_path, next_one = marked_lines(session)
    numbered: Iterable[tuple[int, str]] = enumerate(session.text.split("\n"), 1)
    if priced and session.program is not None:
        own = [r for r in session.program.routines.values() if r.sheet == session.program.path]
        numbered = [(span.line, text) for r in own for text, span in priced_lines(r)]
    rows = []
    for number, text in numbered:
        gutter, role = "  ", "text"
        if number in on_path:
            gutter, role = "| ", "path"
        if number == next_one:
            gutter, role = "> ", "next"
        shown = visible(text.expandtabs(2))
        room = max(width - 7, 10)
        for i in range(0, max(len(shown), 1), room):
            label = f"{number:4} " if i == 0 else " " * 5
            rows.append(Row(f"{label}{gutter}{shown[i : i + room]}", role, number if i == 0 else None))
    return rows


def marked_lines(session: Session) -> tuple[set[int], int]:
    """Lines of the sheet on the selected obligation's path, and the one that the next substitution uses (0: none)."""
    d = session.obligation
    if d is None:
        return set(), 0
    path = {s.line for s in d.obligation.path}
    lines = session.lines()
    if session.shown < len(lines):
        following: Span | None = lines[session.shown].span
        if following is not None:
            return path, following.line
    return path, 0


# ---------------------------------------------------------------- obligations
def obligation_rows(session: Session, width: int) -> list[Row]:
    """Every obligation under its claim; the key is its number."""
    rows: list[Row] = []
    index = 0
    for group in session.groups():
        rows += rows_of(group.title, width, "title")
        for d in group.obligations:
            words = f"{verdict_word(d.verdict)}{d.obligation.kind}: {d.obligation.case}"
            rows += rows_of(words, width, d.verdict, index, 1)
            index += 1
    if not rows:
        rows.append(Row("proving" if session.program is not None else "nothing to prove yet", "dim"))
    return rows


def derivation_rows(session: Session, width: int) -> list[Row]:
    """The selected obligation: what is known, what is to be shown, and as many steps as are shown."""
    d = session.obligation
    if d is None:
        return [Row("Choose an obligation above.", "dim")]
    lines = session.lines()
    rows = list(rows_of(f"{verdict_word(d.verdict)}{d.obligation.case}", width, d.verdict))
    if d.witness is not None:
        rows += rows_of(f"broken by {values_text(d.witness)}", width, "refuted", indent=2)
    if d.unreachable:
        rows.append(Row("  no values take this path", "dim"))
    rows += rows_of(f"to show: {show(d.obligation.goal)}", width, "text", indent=2)
    rows += _fact_rows(d, width)
    for number, line in enumerate(lines[: session.shown], 1):
        indent = 2 + 2 * line.depth
        rows += rows_of(f"{line.relation or '-'} {line.move}: {line.words}", width, "step", number, indent)
        if line.after is not None:
            rows += rows_of(show(line.after), width, "text", indent=indent + 4)
    left = len(lines) - session.shown
    if left > 0:
        rows.append(Row(f"  {left} more; n shows the next, a all of them", "dim"))
    else:
        rows.append(Row("  that is all of it", "dim"))
    return rows


def _fact_rows(d: Decided, width: int) -> Iterator[Row]:
    used = d.used
    for i, fact in enumerate(d.obligation.facts):
        if used is None or i in used:
            yield from rows_of(f"{i + 1}. {show(fact.formula)}   ({fact.origin})", width, "dim", indent=2)
