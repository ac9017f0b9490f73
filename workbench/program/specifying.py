"""What is known of a specification from outside: of a call, a loop, a stage or a choice, as one event of a path."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping

from workbench.algebra.formulas import show
from workbench.algebra.terms import Sort, Term, app, names, negate, substitute, var, variables
from workbench.program.obligation import Fact, Lean
from workbench.program.paths import Event, primed_base
from workbench.program.priced import Call, Choose, Loop, Program, Routine, Specification, Stage


class Names:
    """Names of one routine: their sorts, and fresh ones. Fresh names hold an `@`, which no sheet can write."""

    def __init__(self, program: Program, routine: Routine) -> None:
        self.program = program
        self.sorts: dict[str, Sort] = {s.name: s.sort for s in program.states.values()}
        self.sorts.update({p.name: p.sort for p in routine.parameters})
        if routine.result is not None:
            self.sorts["result"] = routine.result
        for gauge in program.gauges.values():
            self.sorts[gauge.name] = self.sorts[f"{gauge.name}.peak"] = "real"
            if gauge.clock:
                self.sorts[f"{gauge.name}.area"] = "real"
        self.sorts.update(dict.fromkeys(program.counters, "real"))
        self._states = 0

    def present(self, name: str) -> Term:
        return var(name, self.sorts[name])

    def next_state(self) -> int:
        self._states += 1
        return self._states

    def is_resource(self, name: str) -> bool:
        return name in self.program.counters or name.partition(".")[0] in self.program.gauges


def resource_facts(
    known: Names, changed: Iterable[str], before: Mapping[str, Term], after: Mapping[str, Term]
) -> list[Fact]:
    """peak >= level, peaks and counters never fall: between the present values `before` and the values `after`."""
    facts = []
    for name in sorted(changed):
        root, _, part = name.partition(".")
        if name in known.program.counters:
            facts.append(Fact(app("<=", before[name], after[name]), f"{name} only grows"))
        elif part == "peak":
            facts.append(Fact(app("<=", before[name], after[name]), f"{name} never falls"))
            level = after.get(root, known.present(root))
            facts.append(Fact(app("<=", level, after[name]), f"{name} is no less than {root}"))
    return facts


def start_facts(known: Names) -> list[Fact]:
    """peak >= level of every gauge, at the start of a specification."""
    return [
        Fact(app("<=", known.present(g), known.present(f"{g}.peak")), f"{g}.peak is no less than {g}")
        for g in sorted(known.program.gauges)
    ]


def outcome(
    known: Names,
    changed: Iterable[str],
    state: int,
) -> tuple[dict[Term, Term], dict[str, Term]]:
    """Fresh names for what changes: (present name -> fresh name, and the same by name)."""
    fresh = {name: var(f"{name}@{state}", known.sorts[name]) for name in sorted(changed)}
    return {known.present(name): f for name, f in fresh.items()}, fresh


def instantiated(formula: Term, before: Mapping[Term, Term], after: Callable[[Term], Term]) -> Term:
    """A claim at a place: unprimed names by `before`, primed ones by `after` of their base."""
    mapping = dict(before)
    for name in variables(formula):
        base = primed_base(name)
        if base is not None:
            mapping[name] = after(base)
    return substitute(formula, mapping)


def call_event(known: Names, call: Call, callee: Routine, own: bool) -> Event:
    """The callee's claims on fresh names for what it may change."""
    state = known.next_state()
    updates, fresh = outcome(known, callee.changed, state)
    before: dict[Term, Term] = {var(p.name, p.sort): a for p, a in zip(callee.parameters, call.arguments, strict=True)}
    if callee.result is not None:
        result = var(f"{callee.name}@{state}", callee.result)
        before[var("result", callee.result)] = result
        if call.target is not None and call.target_sort is not None:
            updates[var(call.target, call.target_sort)] = result
    facts = _claim_facts(callee.spec, before, updates, callee.name, "", f"{callee.name}")
    for s in known.program.states.values():
        if s.condition is not None and names(s.condition) & callee.changed:
            where = substitute(s.condition, {known.present(n): f for n, f in fresh.items()})
            facts.append(Fact(where, f"what holds of {s.name} after every call", Lean(callee.name, "", "")))
    facts += resource_facts(known, callee.changed, {n: known.present(n) for n in fresh}, fresh)
    shown = f"{callee.name}({', '.join(show(a) for a in call.arguments)})"
    middle = frozenset(f.name for f in updates.values())
    if callee.result is not None:
        middle |= {f"{callee.name}@{state}"}
    return Event(
        "name a middle state",
        f"{'the recursive call ' if own else 'the call '}{shown}; its end state is @{state}",
        call.span,
        updates,
        tuple(facts),
        middle,
        frozenset((Lean(callee.name, "", ""),)),
    )


def _claim_facts(
    spec: Specification, before: Mapping[Term, Term], after: Mapping[Term, Term], routine: str, label: str, of: str
) -> list[Fact]:
    facts = []
    for claim in spec.claims:
        formula = instantiated(claim.formula, before, lambda base: after.get(base, base))
        facts.append(Fact(formula, f"claim {claim.label} of {of}", Lean(routine, label, claim.label), claim.span))
    return facts


def loop_event(known: Names, loop: Loop, spec: Specification, routine: str, *, again: bool) -> Event:
    """A loop from its head to its end: its claims, its givens (they hold at every head), and that the test fails."""
    state = known.next_state()
    updates, fresh = outcome(known, loop.changed, state)
    facts = _claim_facts(spec, {}, updates, routine, spec.label, spec.label)
    lean = Lean(routine, spec.label, "")
    at_end = {known.present(n): f for n, f in fresh.items()}
    for given in spec.givens:
        if not any(known.is_resource(n) for n in names(given)):
            facts.append(Fact(substitute(given, at_end), f"given of {spec.label}, kept to its end", lean))
    if not any(known.is_resource(n) for n in names(loop.condition)):
        facts.append(Fact(substitute(negate(loop.condition), at_end), f"the test of {spec.label} fails at its end"))
    facts += resource_facts(known, loop.changed, {n: known.present(n) for n in fresh}, fresh)
    words = f"the rest of {spec.label}" if again else spec.label
    return Event(
        "name a middle state",
        f"{words}; its end state is @{state}",
        loop.span,
        updates,
        tuple(facts),
        frozenset(f.name for f in updates.values()),
        frozenset((lean,)),
    )


def stage_event(known: Names, stage: Stage, routine: str) -> Event:
    """A stage from its start to its end: its claims and nothing else."""
    state = known.next_state()
    changed = stage.changed | {v.name for v in stage.declared}
    updates, fresh = outcome(known, changed, state)
    facts = _claim_facts(stage.spec, {}, updates, routine, stage.spec.label, stage.spec.label)
    facts += resource_facts(known, stage.changed, {n: known.present(n) for n in fresh}, fresh)
    return Event(
        "name a middle state",
        f"{stage.spec.label}; its end state is @{state}",
        stage.span,
        updates,
        tuple(facts),
        frozenset(f.name for f in updates.values()),
        frozenset((Lean(routine, stage.spec.label, ""),)),
    )


def choice_event(known: Names, choose: Choose) -> Event:
    """Any value of the sort that satisfies the condition."""
    target = var(choose.target, choose.sort)
    new = var(f"{choose.target}@{known.next_state()}", choose.sort)
    condition = substitute(choose.condition, {target: new})
    facts = () if condition.op == "true" else (Fact(condition, f"the choice of {choose.target}", None, choose.span),)
    words = f"{choose.target} is any {choose.sort}" + ("" if not facts else f" where {show(choose.condition)}")
    return Event("choose a value", words, choose.span, {target: new}, facts)
