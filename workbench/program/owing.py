"""What a specification owes on the paths through it: side conditions where they arise, claims where paths end,
measures.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import partial

from workbench.algebra.formulas import show
from workbench.algebra.terms import Sort, Term, app, implies, substitute, var
from workbench.errors import Span
from workbench.program import measures, specifying
from workbench.program.deriving import Needed, program_steps
from workbench.program.domains import domain_conditions, nonnegative, of_sort
from workbench.program.obligation import Kind, Obligation, Step
from workbench.program.paths import Path, summary
from workbench.program.priced import Cases, Claim, Program, Routine, Specification, Using


@dataclass(frozen=True, slots=True)
class Ground:
    """Where obligations arise: the specification being walked, how deep it is nested, and by which names the routine's
    start values go there.
    """

    label: str
    depth: int
    entry: Mapping[Term, Term]


Derive = Callable[[Needed], tuple[Step, ...]]


class Owing:
    """Collects the obligations of one routine; `silent` while a part of it is only looked at."""

    def __init__(self, program: Program, routine: Routine, names: specifying.Names) -> None:
        self.program = program
        self.routine = routine
        self.names = names
        self.obligations: list[Obligation] = []
        self.sites: list[measures.Site] = []
        self.ground = Ground("", 0, {})
        self.silent = False
        self._serial = 0
        self._seen: set[tuple[object, ...]] = set()

    def amount(self, p: Path, amount: Term, span: Span) -> None:
        self.domain(p, amount, span)
        self.owe(p, "range", nonnegative(amount), span, f"the amount {show(amount)} is not negative")

    def range(self, p: Path, value: Term, sort: Sort, span: Span, words: str) -> None:
        self.owe(p, "range", of_sort(value, sort), span, words)

    def domain(self, p: Path, term: Term, span: Span, claim: str | None = None) -> None:
        for condition in domain_conditions(term, self.program.functions):
            self.owe(p, "domain", condition.formula, span, condition.what, claim=claim)

    def owe(
        self,
        p: Path,
        kind: Kind,
        goal: Term,
        span: Span,
        words: str,
        *,
        claim: str | None = None,
        also_evident: bool = False,
    ) -> None:
        """An obligation that the formula over present names holds on the path, unless that is plain to see."""
        if self.silent or goal.op == "true":
            return
        absolute = p.value(goal)
        known = tuple((f.formula, f.lean) for f in p.facts)
        key = (self.ground.label, kind + (claim or ""), absolute, known, p.leans)
        if key in self._seen or ((absolute, None) in known and not also_evident):
            return
        self._seen.add(key)
        events, start = p.events, len(p.facts) - len(summary(p.events).facts)
        self._add(
            kind,
            claim,
            p,
            absolute,
            span,
            f"{words}{_case(p)}",
            lambda needed: program_steps(start, events, goal, needed, is_claim=False),
        )

    def claims(self, end: Path, spec: Specification) -> None:
        """All claims of the specification on a path that ends."""
        if self.silent:
            return
        before: dict[Term, Term] = {}
        if not spec.label and self.routine.result is not None:
            result = self.names.present("result")
            before[result] = end.value(result)
        start = len(end.facts) - len(summary(end.events).facts)
        for claim in spec.claims:
            formula = claim.formula
            goal = specifying.instantiated(formula, before, end.value)
            for condition in domain_conditions(formula, self.program.functions):
                owed = specifying.instantiated(condition.formula, before, end.value)
                if (owed, None) not in {(f.formula, f.lean) for f in end.facts}:
                    self._add(
                        "domain",
                        claim.label,
                        end,
                        owed,
                        claim.span,
                        f"{condition.what}{_case(end)}",
                        _nothing,
                        claim,
                        before,
                    )
            shown = _with_result_primed(formula, before)
            parts = goal_parts(goal)
            for number, part in enumerate(parts, 1):
                case = "; ".join(end.case) or "the only path"
                if len(parts) > 1:
                    case += f"; part {number} of {len(parts)}"
                derive = partial(program_steps, start, end.events, shown, is_claim=True)
                self._add("claim", claim.label, end, part, claim.span, case, derive, claim, before)

    def _add(
        self,
        kind: Kind,
        label: str | None,
        p: Path,
        goal: Term,
        span: Span,
        case: str,
        derive: Derive,
        claim: Claim | None = None,
        before: Mapping[Term, Term] | None = None,
    ) -> None:
        self._serial += 1
        hints = claim.hints if claim is not None else ()

        def at(term: Term) -> Term:
            return specifying.instantiated(term, before or {}, p.value)

        self.obligations.append(
            Obligation(
                id=f"{self.routine.name}.{self._serial}",
                kind=kind,
                routine=self.routine.name,
                specification=self.ground.label,
                claim=label,
                case=case,
                facts=p.facts,
                goal=goal,
                span=span,
                path=tuple(dict.fromkeys(e.span for e in p.events)),
                middle=p.middle,
                leans=p.leans,
                cases=tuple(at(h.condition) for h in hints if isinstance(h, Cases)),
                using=tuple(replace(h, arguments=tuple(map(at, h.arguments))) for h in hints if isinstance(h, Using)),
                derive=derive,
            )
        )

    # -------------------------------------------------------------- measures
    def site_of_call(self, p: Path, callee: Routine, before: dict[Term, Term], span: Span) -> None:
        if self.silent:
            return
        label, entry = self.ground.label, self.ground.entry

        def make(own: measures.Measure, other: measures.Measure) -> tuple[Obligation, ...]:
            mine = tuple(substitute(t, entry) for t in own)
            new = tuple(p.value(substitute(t, before)) for t in other)
            return self._measured(p, measures.owed(mine, new), span, f"calling {callee.name}", label)

        self.sites.append(measures.Site(self.routine.name, label, callee.name, make))

    def site_of_loop(self, begun: Path, end: Path, spec: Specification) -> None:
        if self.silent:
            return

        def make(own: measures.Measure, other: measures.Measure) -> tuple[Obligation, ...]:
            at_start = [w for w in measures.owed(own, own) if w[1] != "the measure falls"]
            first = self._measured(begun, at_start, spec.span, f"an iteration of {spec.label} begins", spec.label)
            new = tuple(end.value(t) for t in own)
            last = [(measures.falls(own, new), "the measure falls")]
            return first + self._measured(end, last, spec.span, f"once round {spec.label}", spec.label)

        self.sites.append(measures.Site(self.routine.name, spec.label, spec.label, make, once_more=True))

    def _measured(
        self, p: Path, owed: list[tuple[Term, str]], span: Span, words: str, label: str
    ) -> tuple[Obligation, ...]:
        found = []
        for goal, what in owed:
            self._serial += 1
            found.append(
                Obligation(
                    id=f"{self.routine.name}.{self._serial}",
                    kind="measure",
                    routine=self.routine.name,
                    specification=label,
                    claim=None,
                    case=f"{what}, {words}{_case(p)}",
                    facts=p.facts,
                    goal=goal,
                    span=span,
                    path=tuple(dict.fromkeys(e.span for e in p.events)),
                    middle=p.middle,
                    leans=p.leans,
                )
            )
        return tuple(found)


def goal_parts(goal: Term) -> list[Term]:
    """Formulas that hold together exactly where the goal does: its conjuncts, and max(a, b) <= c as a <= c and b <=
    c.
    """
    work, parts = [goal], []
    while work:
        g = work.pop()
        op = {">=": "<=", ">": "<"}.get(g.op, g.op)
        if g.op == "and":
            work.extend(reversed(g.args))
        elif g.op == "implies" and len(inner := goal_parts(g.args[1])) > 1:
            parts += [implies(g.args[0], part) for part in inner]
        elif op in ("<=", "<"):
            small, large = g.args if g.op == op else g.args[::-1]
            if small.op == "max":
                work.extend(app(op, part, large) for part in reversed(small.args))
            elif large.op == "min":
                work.extend(app(op, small, part) for part in reversed(large.args))
            else:
                parts.append(g)
        else:
            parts.append(g)
    return parts


def _case(p: Path) -> str:
    return f" ({'; '.join(p.case)})" if p.case else ""


def _with_result_primed(formula: Term, before: dict[Term, Term]) -> Term:
    return substitute(formula, {r: var("result'", r.sort) for r in before})


def _nothing(needed: Needed) -> tuple[Step, ...]:
    return ()
