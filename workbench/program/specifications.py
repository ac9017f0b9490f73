"""Headers of routines, loops and stages as specifications; each claim gets a label that is its own."""

from __future__ import annotations

from workbench.errors import Span
from workbench.program.names import Locals
from workbench.program.priced import Cases, Claim, Specification, Using
from workbench.sheet import tree
from workbench.sheet.writer import write_expr


def specification(label: str, header: tree.Header, names: Locals, span: Span) -> Specification:
    """The header's givens, claims and measure as terms over the names that are visible there."""
    claims: list[Claim] = []
    taken: set[str] = {c.label for c in header.claims if c.label}
    for number, c in enumerate(header.claims, 1):
        own = c.label or _free(_derived(c.formula, number), taken)
        taken.add(own)
        hints = tuple(
            Cases(names.term(h.condition), h.span)
            if isinstance(h, tree.CasesHint)
            else Using(h.law, tuple(map(names.term, h.arguments)), h.span)
            for h in c.hints
        )
        claims.append(Claim(own, names.term(c.formula), write_expr(c.formula), hints, c.span))
    measure = None if header.measure is None else tuple(map(names.term, header.measure.components))
    givens = tuple(names.term(g.formula) for g in header.givens)
    return Specification(label, givens, tuple(claims), measure, span)


def _derived(formula: tree.Expr, number: int) -> str:
    """What a claim without a label is called: by its short form, else by its place."""
    while isinstance(formula, tree.Binary) and formula.op == "implies":
        formula = formula.right
    if isinstance(formula, tree.Short):
        return f"{formula.aspect} {formula.resource}"
    return f"claim {number}"


def _free(label: str, taken: set[str]) -> str:
    if label not in taken:
        return label
    return next(f"{label} ({i})" for i in range(2, 1_000_000) if f"{label} ({i})" not in taken)
