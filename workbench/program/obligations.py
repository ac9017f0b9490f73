"""All that a routine owes, gathered: obligations of its claims and side conditions, places where measures fall."""

from __future__ import annotations

from dataclasses import dataclass

from workbench.algebra.terms import Term, substitute, var
from workbench.errors import Span
from workbench.program.domains import domain_conditions, of_sort
from workbench.program.measures import Site, components
from workbench.program.obligation import Fact, Kind, Obligation
from workbench.program.priced import Loop, Program, Routine, Specification
from workbench.program.walking import Walk


@dataclass(frozen=True, slots=True)
class Owed:
    """`specifications`: by label, "" for the routine itself, with the claims that were inferred. `loops`: by label.
    `start`: what is known where the routine begins.
    """

    routine: Routine
    specifications: dict[str, Specification]
    loops: dict[str, Loop]
    obligations: tuple[Obligation, ...]
    sites: tuple[Site, ...]
    start: tuple[Term, ...]


def recursive_groups(program: Program) -> dict[str, frozenset[str]]:
    """For every routine those that call each other in a circle with it; itself included where it is recursive."""
    return components({name: r.calls for name, r in program.routines.items()})


def of_routine(program: Program, routine: Routine, group: frozenset[str]) -> Owed:
    """`group`: the routines that it is mutually recursive with."""
    walk = Walk(program, routine, group)
    walk.run()
    obligations = (*_of_constants(program, routine), *walk.owing.obligations)
    return Owed(routine, walk.specifications, walk.loops, obligations, tuple(walk.owing.sites), walk.start)


def _of_constants(program: Program, routine: Routine) -> list[Obligation]:
    """Constants mean something and are of their types; what is known of the open ones is known everywhere."""
    found: list[Obligation] = []
    facts: list[Fact] = []

    def owe(kind: Kind, case: str, goal: Term, span: Span) -> None:
        label = f"{routine.name}.constant{len(found) + 1}"
        found.append(Obligation(label, kind, routine.name, "", None, case, tuple(facts), goal, span))

    for c in program.constants.values():
        if c.value is not None:
            for condition in domain_conditions(c.value, program.functions):
                owe("domain", condition.what, condition.formula, c.span)
            whole = of_sort(c.value, c.sort)
            if whole.op != "true":
                owe("range", f"constant {c.name} is of its type", whole, c.span)
        if c.condition is not None:
            for condition in domain_conditions(c.condition, program.functions):
                owe("domain", condition.what, condition.formula, c.span)
            if c.value is None:
                facts.append(Fact(c.condition, f"constant {c.name}", None, c.span))
            else:
                owe(
                    "range",
                    f"what is said of constant {c.name}",
                    substitute(c.condition, {var(c.name, c.sort): c.value}),
                    c.span,
                )
    for s in program.states.values():
        if s.condition is not None:
            for condition in domain_conditions(s.condition, program.functions):
                owe("domain", condition.what, condition.formula, s.span)
    return found
