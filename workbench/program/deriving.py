"""The program part of a derivation: from the last statement to the first, one substitution a step.

What the rest of the program does is a relation between the state where it begins and the values at the end:
equations on primed names, with what is known beside them. The substitution law (x := e. P) = P with e for x takes in
one statement more.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from workbench.algebra.terms import Term, app, conjunction, substitute, variables
from workbench.program.obligation import Step
from workbench.program.paths import Event, primed_base


def program_steps(events: Sequence[Event], formula: Term, *, is_claim: bool) -> tuple[Step, ...]:
    """Steps whose last formula is what the obligation needs of the path.

    For a claim: equations for the primed names in it. For a side condition: the formula itself, with no name primed.
    """
    if not is_claim:
        return _carried_back(events, formula)
    ends = sorted((v for v in variables(formula) if primed_base(v) is not None), key=lambda v: v.name)
    values = {end: base for end in ends if (base := primed_base(end)) is not None}
    steps: list[Step] = []
    facts: list[Term] = []
    for i, event in enumerate(reversed(events)):
        before = _relation(values, facts)
        memo: dict[Term, Term] = {}
        values = {end: substitute(value, event.updates, memo) for end, value in values.items()}
        facts = [*(f.formula for f in event.facts), *(substitute(f, event.updates, memo) for f in facts)]
        after = _relation(values, facts)
        first = i == 0 and event.move == "substitute the statement"
        move = "expand the last statement" if first else event.move
        steps.append(Step(move, event.words, before, after, event.span))
    return tuple(steps)


def _relation(values: Mapping[Term, Term], facts: Sequence[Term]) -> Term:
    equations = [app("iff" if value.is_formula else "=", end, value) for end, value in values.items()]
    return conjunction([*equations, *facts])


def _carried_back(events: Sequence[Event], formula: Term) -> tuple[Step, ...]:
    steps = []
    for event in reversed(events):
        before = formula
        formula = substitute(formula, event.updates)
        if formula != before or event.facts:
            steps.append(Step(event.move, event.words, before, formula, event.span))
    return tuple(steps)
