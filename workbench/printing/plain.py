"""Derivations as plain text, for a review document: every claim, its obligations, and each step of each."""

from __future__ import annotations

from collections.abc import Iterator

from workbench.algebra.formulas import show
from workbench.printing.cautions import CAUTIONS
from workbench.printing.messages import visible
from workbench.printing.verdicts import values_text
from workbench.printing.wrapping import wrapped
from workbench.program.priced import Program, Specification
from workbench.proof.derivation import Line, derivation
from workbench.proof.report import ClaimReport, Decided, MathematicsReport, RoutineReport, SheetReport, Workings

WIDTH = 100


def sheet_text(report: SheetReport, title: str | None) -> Iterator[str]:
    """Lines of the document for one sheet that could be read."""
    assert report.workings is not None and report.program is not None
    name = visible(title) if title else visible(report.path)
    yield name
    yield "=" * min(len(name), WIDTH)
    yield f"sheet {visible(report.path)}: {report.verdict}"
    yield from _tariff(report.program)
    for m in report.mathematics:
        yield ""
        yield from _mathematics(m, report.workings)
    for r in report.routines:
        yield ""
        yield from _routine(r, report.workings)


def ending() -> Iterator[str]:
    """What every document ends with."""
    yield ""
    yield "What is left out, and who decides"
    yield "--------------------------------"
    yield from CAUTIONS.splitlines()


def _tariff(program: Program) -> Iterator[str]:
    for counter in program.counters.values():
        yield f"counter {counter.name}" + (f" in {visible(counter.unit)}" if counter.unit else "")
    for gauge in program.gauges.values():
        unit = f" in {visible(gauge.unit)}" if gauge.unit else ""
        yield f"gauge {gauge.name}{unit}" + (f" over {gauge.clock}" if gauge.clock else "")
    for c in program.constants.values():
        value = "" if c.value is None else f" = {show(c.value)}"
        where = "" if c.condition is None else f" where {show(c.condition)}"
        yield from wrapped(f"constant {c.name}: {c.sort}{value}{where}", WIDTH)


def _mathematics(m: MathematicsReport, workings: Workings) -> Iterator[str]:
    yield from _heading(f"{m.kind} {m.name}: {m.verdict}")
    for d in m.obligations:
        yield from _obligation(d, workings)


def _routine(r: RoutineReport, workings: Workings) -> Iterator[str]:
    routine = r.routine
    parameters = ", ".join(f"{p.name}: {p.sort}" for p in routine.parameters)
    result = f" -> {routine.result}" if routine.result else ""
    yield from _heading(f"routine {routine.name}({parameters}){result}: {r.verdict}")
    yield from _givens(routine.spec)
    for warning in r.warnings:
        yield from wrapped(f"warning: {warning}", WIDTH)
    for c in r.claims:
        yield ""
        yield from _claim(c, workings)
    if r.obligations:
        yield ""
        yield f"What {routine.name} owes beside its claims"
        for d in r.obligations:
            yield from _obligation(d, workings)


def _givens(spec: Specification) -> Iterator[str]:
    for given in spec.givens:
        yield from wrapped(f"given {show(given)}", WIDTH)
    if spec.measure:
        yield from wrapped(f"measure {', '.join(map(show, spec.measure))}", WIDTH)


def _claim(c: ClaimReport, workings: Workings) -> Iterator[str]:
    how = " (worked out by the tool)" if c.claim.inferred else ""
    yield from wrapped(f"claim {c.label}: {visible(c.claim.text)}{how}", WIDTH)
    yield f"  {c.verdict}"
    yield from wrapped(f"in full: {show(c.claim.formula)}", WIDTH, 2)
    if c.leans_on:
        yield from wrapped(f"leans on {', '.join(c.leans_on)}", WIDTH, 2)
    for d in c.obligations:
        yield from _obligation(d, workings)


def _obligation(d: Decided, workings: Workings) -> Iterator[str]:
    o = d.obligation
    yield ""
    yield from wrapped(f"{o.id} ({o.kind}) {visible(o.case)}: {d.verdict}", WIDTH, 2)
    if d.unreachable:
        yield "    no values take this path"
    if d.witness is not None:
        yield from wrapped(f"broken by {values_text(d.witness)}", WIDTH, 4)
    made = derivation(workings.algebra, workings.laws, workings.functions, d)
    if made.program:
        yield "    the program, from its last statement to its first"
        for line in made.program:
            yield from _step(line)
    shown = [(i + 1, f) for i, f in enumerate(o.facts) if made.used is None or i in made.used]
    if shown:
        rest = len(o.facts) - len(shown)
        yield "    known" + (f", and {rest} more that the proof does not need" if rest else "")
        for number, fact in shown:
            lead = f"{number:3}  "
            yield from wrapped(f"{lead}{show(fact.formula)}   {{ {visible(fact.origin)} }}", WIDTH, 6, len(lead) + 4)
    yield "    to show"
    yield from wrapped(show(o.goal), WIDTH, 8)
    yield "    because"
    for line in made.algebra:
        yield from _step(line)


def _step(line: Line) -> Iterator[str]:
    """The move and what it was done with, then the formula that it leads to."""
    indent = 6 + 2 * line.depth
    yield from wrapped(f"{line.relation or '-'} {{ {line.move}: {visible(line.words)} }}", WIDTH, indent)
    if line.after is not None:
        yield from wrapped(show(line.after), WIDTH, indent + 6)


def _heading(text: str) -> Iterator[str]:
    shown = visible(text)
    yield shown
    yield "-" * min(len(shown), WIDTH)
