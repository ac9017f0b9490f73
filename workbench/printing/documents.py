"""A report as a JSON document, with the keys that the interface promises."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from workbench.algebra.formulas import show
from workbench.printing.messages import visible
from workbench.proof.derivation import count_steps
from workbench.proof.report import ClaimReport, Decided, MathematicsReport, RoutineReport, SheetReport

SCHEMA = 1


def sheet_document(report: SheetReport) -> dict[str, Any]:
    """One sheet, as an entry of "sheets"."""
    return {
        "path": report.path,
        "verdict": report.verdict,
        "problems": [
            {"line": p.span.line, "column": p.span.column, "message": visible(p.message)} for p in report.problems
        ],
        "routines": [_routine(r) for r in report.routines],
        "mathematics": [_mathematics(m) for m in report.mathematics],
    }


def _routine(r: RoutineReport) -> dict[str, Any]:
    return {
        "name": r.routine.name,
        "verdict": r.verdict,
        "claims": [_claim(c) for c in r.claims],
        "obligations": [_obligation(d) for d in r.obligations],
        "warnings": list(r.warnings),
    }


def _claim(c: ClaimReport) -> dict[str, Any]:
    return {
        "label": c.label,
        "text": c.claim.text,
        "formula": show(c.claim.formula),
        "verdict": c.verdict,
        "leans_on": list(c.leans_on),
        "obligations": [_obligation(d) for d in c.obligations],
    }


def _mathematics(m: MathematicsReport) -> dict[str, Any]:
    return {
        "name": m.name,
        "kind": m.kind,
        "verdict": m.verdict,
        "obligations": [_obligation(d) for d in m.obligations],
    }


def _obligation(d: Decided) -> dict[str, Any]:
    return {
        "id": d.obligation.id,
        "case": d.obligation.case,
        "kind": d.obligation.kind,
        "verdict": d.verdict,
        "witness": None if d.witness is None else witness_document(d.witness),
        "residue": None if d.residue is None else show(d.residue),
        "steps": count_steps(d),
    }


def witness_document(values: Mapping[str, Any]) -> dict[str, Any]:
    """Whole numbers as integers, others as "p/q"."""
    return {name: json_value(value) for name, value in values.items()}


def json_value(value: Any) -> int | str | bool | None:
    """A number as JSON has it: an integer, or "p/q"."""
    if isinstance(value, Fraction):
        return value.numerator if value.denominator == 1 else f"{value.numerator}/{value.denominator}"
    return value  # type: ignore[no-any-return]
