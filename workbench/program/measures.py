"""Places where a measure must fall: recursive calls and iterations. Which measure is settled later, so each place keeps
what it needs to say what a given measure owes there.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from itertools import combinations

from workbench.algebra.terms import FALSE, Term, app, conjunction, var, variables
from workbench.program.domains import nonnegative, of_sort
from workbench.program.obligation import Obligation
from workbench.program.priced import Loop, Routine, Variable

Measure = tuple[Term, ...]
# Candidates tried for a measure that nobody wrote: more would only delay the message that one is needed.
CANDIDATE_LIMIT = 40


@dataclass(frozen=True, slots=True)
class Site:
    """`callee` is the specification that begins anew there: a routine's name, or with `once_more` a loop's own label.

    `make(own, other)` gives the obligations where the specification's own measure is `own` (over its start names)
    and the one of what begins anew is `other` (over that one's start names).
    """

    routine: str
    specification: str
    callee: str
    make: Callable[[Measure, Measure], tuple[Obligation, ...]]
    once_more: bool = False


def owed(own: Measure, other: Measure) -> list[tuple[Term, str]]:
    """What a measure owes: the new value is made of naturals and comes, lexicographically, before the old one."""
    found = []
    for component in other:
        whole = of_sort(component, "int")
        if whole.op != "true":
            found.append((whole, "the measure is an integer"))
        below = nonnegative(component)
        if below.op != "true":
            found.append((below, "the measure is not negative"))
    found.append((falls(own, other), "the measure falls"))
    return found


def falls(own: Measure, other: Measure) -> Term:
    """other < own, lexicographically; FALSE for tuples of unlike length, and for empty ones."""
    if not own or len(own) != len(other):
        return FALSE
    result = app("<", other[-1], own[-1])
    for mine, its in zip(reversed(own[:-1]), reversed(other[:-1]), strict=True):
        result = app("or", app("<", its, mine), conjunction([app("=", its, mine), result]))
    return result


def routine_candidates(routine: Routine) -> list[Measure]:
    """The parameters and their sums, single ones first."""
    whole = [var(p.name, p.sort) for p in routine.parameters if p.sort in ("nat", "int")]
    found: list[Measure] = [(p,) for p in whole]
    for size in range(2, len(whole) + 1):
        for group in combinations(whole, size):
            total = group[0]
            for p in group[1:]:
                total = app("+", total, p)
            found.append((total,))
    return found[:CANDIDATE_LIMIT]


def loop_candidates(loop: Loop) -> list[Measure]:
    """The variables in sight that the loop changes, and differences of integers with one of them changed."""
    whole = [v for v in loop.scope if v.sort in ("nat", "int")]
    asked = {t.name for t in variables(loop.condition)}
    whole.sort(key=lambda v: v.name not in asked)
    changed = [v for v in whole if v.name in loop.changed]
    found: list[Measure] = [(_var(v),) for v in changed]
    for a in whole:
        for b in whole:
            if a != b and (a in changed or b in changed):
                found.append((app("-", _var(a), _var(b)),))
    return found[:CANDIDATE_LIMIT]


def _var(v: Variable) -> Term:
    return var(v.name, v.sort)


def components(groups: Mapping[str, frozenset[str]]) -> dict[str, frozenset[str]]:
    """For every routine those that it calls and that call it back, itself included where it is recursive.

    `groups` maps a routine to the routines that it calls.
    """
    reach: dict[str, set[str]] = {}
    for name in groups:
        seen: set[str] = set()
        work = list(groups[name])
        while work:
            other = work.pop()
            if other not in seen:
                seen.add(other)
                work.extend(groups.get(other, ()))
        reach[name] = seen
    return {name: frozenset(o for o in reach[name] if name in reach.get(o, ())) for name in groups}
