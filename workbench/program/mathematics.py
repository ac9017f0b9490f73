"""What a sheet's functions and laws owe before they may be used: a function is well-founded and of its type, a law
is true.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from workbench.algebra.terms import FALSE, ONE, Term, app, conjunction, implies, num, substitute, subterms, var
from workbench.errors import Span
from workbench.program.domains import domain_conditions, guarded_subterms, of_sort
from workbench.program.measures import components, owed
from workbench.program.obligation import Fact, Kind, Obligation
from workbench.program.priced import Function, Law, Program


@dataclass(slots=True)
class _List:
    """Obligations of one law or function."""

    of: str
    program: Program
    found: list[Obligation] = field(default_factory=list)

    def add(self, kind: Kind, case: str, facts: list[Fact], goal: Term, span: Span) -> None:
        if goal.op != "true":
            self.found.append(
                Obligation(
                    id=f"{self.of}.{len(self.found) + 1}",
                    kind=kind,
                    routine="",
                    specification=self.of,
                    claim=None,
                    case=case,
                    facts=tuple(facts),
                    goal=goal,
                    span=span,
                )
            )

    def domain(self, term: Term, facts: list[Fact], span: Span) -> None:
        for condition in domain_conditions(term, self.program.functions):
            self.add("domain", condition.what, facts, condition.formula, span)


def recursive_groups(functions: Mapping[str, Function]) -> dict[str, frozenset[str]]:
    """For every function those that it is defined by and that are defined by it; itself included where it is
    recursive.
    """
    return components({name: used_functions(f, functions) for name, f in functions.items()})


def used_functions(f: Function, functions: Mapping[str, Function]) -> frozenset[str]:
    """The functions that a function is defined by, itself included where it is recursive."""
    terms = [t for t in (f.body, f.given, f.measure) if t is not None]
    return frozenset(s.name for t in terms for s in subterms(t) if s.op == "call" and s.name in functions)


def measure_of(function: Function) -> Term | None:
    """The measure written, or the first natural parameter."""
    if function.measure is not None:
        return function.measure
    return next((var(p.name, p.sort) for p in function.parameters if p.sort == "nat"), None)


def function_obligations(program: Program, function: Function, group: frozenset[str]) -> tuple[Obligation, ...]:
    """`group`: the functions that it is mutually recursive with. None of them may be unfolded in the proofs."""
    todo = _List(f"function {function.name}", program)
    facts = constant_facts(program)
    if function.given is not None:
        todo.domain(function.given, facts, function.span)
        facts = [*facts, Fact(function.given, f"given of {function.name}", None, function.span)]
    own = measure_of(function)
    if own is not None:
        todo.domain(own, facts, function.span)
    todo.domain(function.body, facts, function.span)
    todo.add("range", f"{function.name} is of its type", facts, of_sort(function.body, function.sort), function.span)
    for t, guards in guarded_subterms(function.body, program.functions):
        if t.op == "call" and t.name in group:
            _falls(todo, facts, function, own, t, guards)
    return tuple(todo.found)


def _falls(
    todo: _List, facts: list[Fact], function: Function, own: Term | None, t: Term, guards: tuple[Term, ...]
) -> None:
    callee = todo.program.functions[t.name]
    other = measure_of(callee)
    under = conjunction(guards)
    if own is None or other is None:
        todo.add("measure", "there is no natural parameter to fall, and no measure", facts, FALSE, function.span)
        return
    there = substitute(other, {var(p.name, p.sort): a for p, a in zip(callee.parameters, t.args, strict=True)})
    for goal, what in owed((own,), (there,)):
        todo.add("measure", f"{what}, where {function.name} uses {t.name}", facts, implies(under, goal), function.span)


def law_obligations(program: Program, law: Law) -> tuple[Obligation, ...]:
    """The law itself; by induction: the base, and the step from n to n + 1."""
    todo = _List(f"law {law.name}", program)
    facts = constant_facts(program)
    n = None
    if law.induction_on is not None:
        n = next(var(p.name, p.sort) for p in law.parameters if p.name == law.induction_on)
        facts = [*facts, Fact(app("<=", num(law.induction_from), n), f"{law.induction_on} from {law.induction_from}")]
    given = law.given
    if given is not None:
        todo.domain(given, facts, law.span)
    known = facts if given is None else [*facts, Fact(given, "given", None, law.span)]
    todo.domain(law.formula, known, law.span)
    if n is None:
        todo.add("claim", "for all values", known, law.formula, law.span)
        return tuple(todo.found)
    base, after = {n: num(law.induction_from)}, {n: app("+", n, ONE)}
    at_base = constant_facts(program) + ([] if given is None else [Fact(substitute(given, base), "given")])
    todo.add("claim", f"base, {n.name} = {law.induction_from}", at_base, substitute(law.formula, base), law.span)
    hypothesis = law.formula if given is None else implies(given, law.formula)
    step = [*facts, Fact(hypothesis, f"the law for {n.name}")]
    if given is not None:
        step.append(Fact(substitute(given, after), f"given for {n.name} + 1"))
    todo.add("claim", f"step, from {n.name} to {n.name} + 1", step, substitute(law.formula, after), law.span)
    return tuple(todo.found)


def law_condition(law: Law) -> Term:
    """Where the law holds, beside the types of its parameters."""
    parts = [] if law.given is None else [law.given]
    if law.induction_on is not None:
        n = next(var(p.name, p.sort) for p in law.parameters if p.name == law.induction_on)
        parts.insert(0, app("<=", num(law.induction_from), n))
    return conjunction(parts)


def constant_facts(program: Program) -> list[Fact]:
    """What is known of the open constants, everywhere."""
    return [
        Fact(c.condition, f"constant {c.name}", None, c.span)
        for c in program.constants.values()
        if c.condition is not None and c.value is None
    ]
