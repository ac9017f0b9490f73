"""The program part of a derivation: from the last statement to the first, one substitution a step.

What the rest of the program does is a relation between the state where it begins and the values at the end:
equations on primed names, with what is known beside them. The substitution law (x := e. P) = P with e for x takes in
one statement more.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

from workbench.algebra.terms import Term, app, conjunction, substitute, variables
from workbench.program.obligation import Step
from workbench.program.paths import Event, Path, primed_base

Needed = Callable[[int], bool]  # whether the fact of that index matters to whoever looks


def program_steps(
    start: int, events: Sequence[Event], formula: Term, needed: Needed, *, is_claim: bool
) -> tuple[Step, ...]:
    """Steps whose last formula is what the obligation needs of the path, with the facts that are needed of it.

    For a claim: equations for the primed names in it. For a side condition: the formula itself, with no name primed.
    `start` is how many facts were known before the first event.
    """
    if not is_claim:
        return _carried_back(events, formula)
    kept = _needed_facts(start, events, needed)
    ends = sorted((v for v in variables(formula) if primed_base(v) is not None), key=lambda v: v.name)
    values = {end: base for end in ends if (base := primed_base(end)) is not None}
    steps: list[Step] = []
    facts: list[Term] = []
    for i, (event, own) in enumerate(zip(reversed(events), reversed(kept), strict=True)):
        before = _relation(values, facts)
        memo: dict[Term, Term] = {}
        values = {end: substitute(value, event.updates, memo) for end, value in values.items()}
        facts = [*own, *(substitute(f, event.updates, memo) for f in facts)]
        after = _relation(values, facts)
        if after != before or i == 0:
            first = i == 0 and event.move == "substitute the statement"
            move = "expand the last statement" if first else event.move
            steps.append(Step(move, event.words, before, after, event.span))
    return tuple(steps)


def _needed_facts(start: int, events: Sequence[Event], needed: Needed) -> list[list[Term]]:
    """For every event its facts that are needed. Facts are numbered as the path that they stand on numbers them."""
    path, index = Path(), start
    kept: list[list[Term]] = []
    for event in events:
        after = path.then(event)
        own = []
        for fact in event.facts:
            alone = path.then(replace(event, facts=(fact,)))
            if len(alone.facts) > len(path.facts):
                if needed(index):
                    own.append(fact.formula)
                index += 1
        kept.append(own)
        path = after
    return kept


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
