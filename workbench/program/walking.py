"""From a routine's priced program to its obligations: every path through it, statement by statement.

This is trusted like the kernel. For each path it keeps what the state is over start values and fresh names, and what is known;
side conditions become obligations where they arise, claims at the end of each path. A loop or stage is walked once, from what
all paths that reach it agree on.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

from workbench.algebra.formulas import show
from workbench.algebra.terms import Term, app, conjunction, names, negate, substitute, var
from workbench.errors import Span
from workbench.program import measures, specifying
from workbench.program.choices import candidates
from workbench.program.deriving import program_steps
from workbench.program.domains import domain_conditions, nonnegative, of_sort
from workbench.program.obligation import Fact, Kind, Obligation, Step
from workbench.program.paths import Branch, Event, Path, joined
from workbench.program.priced import (
    Acquire,
    Assign,
    Block,
    Call,
    Cases,
    Choose,
    Claim,
    Either,
    Hold,
    If,
    Loop,
    Program,
    Release,
    Routine,
    Specification,
    Spend,
    Stage,
    Statement,
    Using,
)
from workbench.program.summing import inferred

# More paths than this through one specification are joined into one, with `if` values, so that they do not multiply.
PATH_LIMIT = 16


@dataclass(frozen=True, slots=True)
class Ground:
    """Where obligations arise: the specification being walked, how deep it is nested, and by which names the routine's
    start values go there.
    """

    label: str
    depth: int
    entry: Mapping[Term, Term]


class Walk:
    """The obligations of one routine. `obligations` and `sites` fill up as it walks."""

    def __init__(self, program: Program, routine: Routine, recursive_with: frozenset[str]) -> None:
        self.program = program
        self.routine = routine
        self.recursive_with = recursive_with
        self.names = specifying.Names(program, routine)
        self.obligations: list[Obligation] = []
        self.sites: list[measures.Site] = []
        self.specifications: dict[str, Specification] = {}
        self.loops: dict[str, Loop] = {}
        self.ground = Ground("", 0, {})
        self._joining = False
        self._silent = False
        self._serial = 0
        self._seen: set[tuple[str, str, Term, tuple[Term, ...]]] = set()

    # -------------------------------------------------------------- the routine
    def run(self) -> None:
        spec = self.routine.spec
        self.specifications[""] = spec
        start = Path(facts=tuple(self._constants() + self._states() + specifying.start_facts(self.names, self.routine.changed)))
        start = self._with_givens(start, spec)
        for component in spec.measure or ():
            self._domain(start, component, spec.span)
        for end in self._walk(self.routine.body, [start]):
            for s in self.program.states.values():
                if s.condition is not None and s.name in self.routine.changed:
                    self._owe(end, "range", s.condition, spec.span, f"what holds of {s.name} at the end")
            self._claims(end, spec)

    def _constants(self) -> list[Fact]:
        return [
            Fact(c.condition, f"constant {c.name}", None, c.span)
            for c in self.program.constants.values() if c.condition is not None and c.value is None
        ]

    def _states(self) -> list[Fact]:
        return [
            Fact(s.condition, f"state {s.name}", None, s.span)
            for s in self.program.states.values() if s.condition is not None
        ]

    def _with_givens(self, start: Path, spec: Specification) -> Path:
        """The givens become known one after the other; each must mean something where those before it hold."""
        of = f" of {spec.label}" if spec.label else ""
        for given in spec.givens:
            self._domain(start, given, spec.span)
            start = replace(start, facts=(*start.facts, Fact(given, f"given{of}", None, spec.span)))
        return start

    def _walk(self, block: Block, paths: list[Path]) -> list[Path]:
        """All paths of a specification's body: joined where they would be too many."""
        before, self._joining = self._joining, _count(block) > PATH_LIMIT
        try:
            return self._block(block, paths)
        finally:
            self._joining = before

    # -------------------------------------------------------------- statements
    def _block(self, block: Block, paths: list[Path]) -> list[Path]:
        for statement in block:
            paths = self._statement(statement, paths)
        return paths

    def _statement(self, s: Statement, paths: list[Path]) -> list[Path]:
        match s:
            case If():
                return self._if(s, paths)
            case Either():
                return self._either(s, paths)
            case Loop():
                return self._loop(s, paths)
            case Stage():
                return self._stage(s, paths)
            case Hold():
                return self._hold(s, paths)
            case Assign():
                return [self._assign(s, p) for p in paths]
            case Choose():
                return [self._choose(s, p) for p in paths]
            case Spend():
                return [self._spend(s, p) for p in paths]
            case Acquire(gauge, amount, span):
                return [self._move_level(p, gauge, amount, span, up=True) for p in paths]
            case Release(gauge, amount, span):
                return [self._move_level(p, gauge, amount, span, up=False) for p in paths]
            case Call():
                return [self._call(s, p) for p in paths]

    def _assign(self, s: Assign, p: Path) -> Path:
        self._declare(s.target, s.sort)
        self._domain(p, s.value, s.span)
        if not s.is_note:
            self._range(p, s.value, s.sort, s.span, f"{s.target} is {_article(s.sort)}")
        move = "name the present value" if s.is_note else "substitute the statement"
        words = f"{s.target} {'=' if s.is_note else ':='} {show(s.value)}"
        return p.then(Event(move, words, s.span, {var(s.target, s.sort): s.value}))

    def _choose(self, s: Choose, p: Path) -> Path:
        self._declare(s.target, s.sort)
        event = specifying.choice_event(self.names, s)
        if s.condition.op != "true":
            new = next(iter(event.updates.values()))
            target = var(s.target, s.sort)
            self._domain(p, substitute(s.condition, {target: new}), s.span)
            exists = [
                conjunction([of_sort(c, s.sort), substitute(s.condition, {target: c})])
                for c in candidates(target, s.condition)
            ]
            self._owe(p, "choice", _disjunction(exists), s.span, f"there is a value for {s.target}")
        return p.then(event)

    def _spend(self, s: Spend, p: Path) -> Path:
        self._amount(p, s.amount, s.span)
        updates = {self.names.present(s.counter): app("+", self.names.present(s.counter), s.amount)}
        for gauge in self.program.clocked(s.counter):
            area = self.names.present(f"{gauge.name}.area")
            updates[area] = app("+", area, app("*", self.names.present(gauge.name), s.amount))
        return p.then(Event("substitute the statement", f"spend {show(s.amount)} {s.counter}", s.span, updates))

    def _move_level(self, p: Path, gauge: str, amount: Term, span: Span, *, up: bool) -> Path:
        self._amount(p, amount, span)
        return p.then(self._level_event(gauge, amount, span, up=up))

    def _level_event(self, gauge: str, amount: Term, span: Span, *, up: bool) -> Event:
        level, peak = self.names.present(gauge), self.names.present(f"{gauge}.peak")
        if not up:
            words = f"release {show(amount)} {gauge}"
            return Event("substitute the statement", words, span, {level: app("-", level, amount)})
        higher = app("+", level, amount)
        words = f"acquire {show(amount)} {gauge}"
        return Event("substitute the statement", words, span, {level: higher, peak: app("max", peak, higher)})

    def _hold(self, s: Hold, paths: list[Path]) -> list[Path]:
        """Acquire, body, release of the same amount: its value on entry is named where the body could change it."""
        kept = s.amount
        name = f"hold@{self.names.next_state()}"
        changes = names(s.amount) & _assigned(s.body, self.program)
        opened = []
        for p in paths:
            self._amount(p, s.amount, s.span)
            if changes:
                kept = var(name, "real")
                p = p.then(Event("name the present value", f"{name} = {show(s.amount)}", s.span, {kept: s.amount}))
            opened.append(p.then(self._level_event(s.gauge, kept, s.span, up=True)))
        released = self._level_event(s.gauge, kept, s.span, up=False)
        return [p.then(released) for p in self._block(s.body, opened)]

    def _call(self, s: Call, p: Path) -> Path:
        callee = self.program.routines[s.routine]
        for parameter, argument in zip(callee.parameters, s.arguments, strict=True):
            self._domain(p, argument, s.span)
            self._range(p, argument, parameter.sort, s.span, f"{parameter.name} of {s.routine} is {_article(parameter.sort)}")
        before = {var(q.name, q.sort): a for q, a in zip(callee.parameters, s.arguments, strict=True)}
        for given in callee.spec.givens:
            self._owe(p, "given", substitute(given, before), s.span, f"given of {s.routine}")
        for state in self.program.states.values():
            if state.condition is not None:
                self._owe(p, "range", state.condition, s.span, f"what holds of {state.name} at every call")
        if s.routine in self.recursive_with:
            self._site_of_call(p, callee, before, s.span)
        if s.target is not None and s.target_sort is not None:
            self._declare(s.target, s.target_sort)
        p = p.then(specifying.call_event(self.names, s, callee, own=s.routine == self.routine.name))
        if s.target is not None and s.target_sort not in (None, callee.result, "real"):
            self._range(p, self.names.present(s.target), s.target_sort, s.span, f"{s.target} is {_article(s.target_sort)}")
        return p

    # -------------------------------------------------------------- branches
    def _if(self, s: If, paths: list[Path]) -> list[Path]:
        for p in paths:
            self._domain(p, s.condition, s.span)
        ways = [(s.condition, s.then, f"{show(s.condition)}"), (negate(s.condition), s.otherwise, f"not ({show(s.condition)})")]
        if not self._joining:
            taken: list[Path] = []
            for condition, block, case in ways:
                event = Event("take the branch", case, s.span, facts=(Fact(condition, f"the branch where {case}", None, s.span),))
                taken += self._block(block, [p.then(event, case) for p in paths])
            return taken
        return [self._join(p, ways, s.span) for p in paths]

    def _either(self, s: Either, paths: list[Path]) -> list[Path]:
        if not self._joining:
            taken = []
            for i, block in enumerate(s.branches):
                case = f"branch {i + 1} of {len(s.branches)}"
                taken += self._block(block, [p.then(Event("take the branch", case, s.span), case) for p in paths])
            return taken
        state = self.names.next_state()
        chosen = [var(f"branch{i + 1}@{state}", "bool") for i in range(len(s.branches) - 1)]
        ways = []
        for i, block in enumerate(s.branches):
            earlier = [negate(c) for c in chosen[:i]]
            own = chosen[i:i + 1]
            ways.append((conjunction([*earlier, *own]), block, f"branch {i + 1} of {len(s.branches)}"))
        return [self._join(p, ways, s.span) for p in paths]

    def _join(self, p: Path, ways: Sequence[tuple[Term, Block, str]], span: Span) -> Path:
        branches = []
        for condition, block, case in ways:
            event = Event("take the branch", case, span, facts=(Fact(condition, f"the branch where {case}", None, span),))
            inside = p.then(event, case)
            (end,) = self._block(block, [inside])
            branches.append(Branch(condition, case, end.events[len(inside.events):]))
        return p.then(joined(branches, "the branches together, " + ways[0][2], span))

    # -------------------------------------------------------------- loops and stages
    def _loop(self, s: Loop, paths: list[Path]) -> list[Path]:
        for v in s.scope:
            self._declare(v.name, v.sort)
        start, entry = self._inner_start(paths, s.changed, [v.name for v in s.scope])
        if s.variable is not None and s.lower is not None:
            known = Fact(app("<=", s.lower, self.names.present(s.variable)), f"{s.variable} starts at {show(s.lower)}")
            start = replace(start, facts=(*start.facts, known))
        spec = self._loop_specification(s, start)
        for p in paths:
            self._entry(p, spec, s.span)
        if not self._silent and spec.label not in self.loops:
            self.loops[spec.label] = s
            self._inside(spec, entry, lambda: self._loop_inside(s, spec, self._with_givens(start, spec)))
        event = specifying.loop_event(self.names, s, spec, self.routine.name, again=False)
        return [p.then(event) for p in paths]

    def _loop_specification(self, s: Loop, start: Path) -> Specification:
        spec = self.specifications.get(s.spec.label)
        if spec is None:
            spec = s.spec
            if s.variable is not None:
                spec = replace(spec, claims=(*spec.claims, *inferred(self.names, s, lambda: self._iteration(s, start))))
            self.specifications[spec.label] = spec
        return spec

    def _iteration(self, s: Loop, start: Path) -> tuple[list[Path], list[Path]]:
        """(paths of one iteration from the loop's head, paths of the failing test), without obligations."""
        silent, self._silent = self._silent, True
        try:
            start = self._known_givens(start, s.spec)
            (head,) = self._walk(s.test, [start])
            passing = Event("take the branch", "the test passes", s.span, facts=(Fact(s.condition, "the test passes"),))
            return self._walk(s.body, [head.then(passing)]), [head]
        finally:
            self._silent = silent

    @staticmethod
    def _known_givens(start: Path, spec: Specification) -> Path:
        return replace(start, facts=(*start.facts, *(Fact(g, "given") for g in spec.givens)))

    def _loop_inside(self, s: Loop, spec: Specification, start: Path) -> None:
        for component in spec.measure or ():
            self._domain(start, component, spec.span)
        (head,) = self._walk(s.test, [start])
        self._domain(head, s.condition, s.span)
        test = show(s.condition)
        fails = Event("take the branch", f"not ({test})", s.span, facts=(Fact(negate(s.condition), "the test fails"),))
        self._claims(head.then(fails, f"the test fails: not ({test})"), spec)
        passes = Event("take the branch", test, s.span, facts=(Fact(s.condition, "the test passes"),))
        begun = head.then(passes, f"once more: {test}")
        again = specifying.loop_event(self.names, s, spec, self.routine.name, again=True)
        for end in self._walk(s.body, [begun]):
            for given in spec.givens:
                self._owe(end, "given", given, s.span, f"given of {spec.label}, kept by its body", also_evident=True)
            if s.variable is None:
                self._site_of_loop(begun, end, spec)
            self._claims(end.then(again), spec)

    def _stage(self, s: Stage, paths: list[Path]) -> list[Path]:
        for v in (*s.scope, *s.declared):
            self._declare(v.name, v.sort)
        self.specifications.setdefault(s.spec.label, s.spec)
        for p in paths:
            self._entry(p, s.spec, s.span)
        start, entry = self._inner_start(paths, s.changed, [v.name for v in s.scope])
        if not self._silent:
            self._inside(s.spec, entry, lambda: self._stage_inside(s, self._with_givens(start, s.spec)))
        event = specifying.stage_event(self.names, s, self.routine.name)
        return [p.then(event) for p in paths]

    def _stage_inside(self, s: Stage, start: Path) -> None:
        for end in self._walk(s.body, [start]):
            self._claims(end, s.spec)

    def _inside(self, spec: Specification, entry: Mapping[Term, Term], walk: Callable[[], None]) -> None:
        before, self.ground = self.ground, Ground(spec.label, self.ground.depth + 1, entry)
        try:
            walk()
        finally:
            self.ground = before

    def _entry(self, p: Path, spec: Specification, span: Span) -> None:
        for given in spec.givens:
            self._owe(p, "given", given, span, f"given of {spec.label}, on entry", also_evident=True)

    def _inner_start(
        self, paths: Sequence[Path], changed: frozenset[str], scope: Sequence[str]
    ) -> tuple[Path, dict[Term, Term]]:
        """What a loop or stage starts from: facts about names that it cannot change, in which the enclosing start values
        of other names are written `name@entry`. The second value says by which names the routine's start values go.
        """
        first = paths[0]
        sight = {*scope, *self.program.states} | {n for n in self.names.sorts if self.names.is_resource(n)}
        if "result" in self.names.sorts:
            sight.add("result")
        moved = {n for n in sight if n in changed or any(self.names.present(n) in p.state for p in paths)}
        suffix = "@entry" + ("" if self.ground.depth == 0 else str(self.ground.depth + 1))
        renamed = {self.names.present(n): var(n + suffix, self.names.sorts[n]) for n in moved}
        facts: list[Fact] = []
        for n in sorted(moved - changed):
            here = self.names.present(n)
            values = {p.state.get(here, here) for p in paths}
            if len(values) == 1 and not self.names.is_resource(n):
                value = substitute(values.pop(), renamed)
                facts.append(Fact(app("iff" if value.is_formula else "=", here, value), f"the value of {n}"))
        shared = [f for f in first.facts if all(f in p.facts for p in paths[1:])]
        facts += [replace(f, formula=substitute(f.formula, renamed)) for f in shared]
        seen = {n for n in sight if n not in changed} | set(self.program.constants)
        parameters = [var(q.name, q.sort) for q in self.routine.parameters]
        entry = {q: substitute(self.ground.entry.get(q, q), renamed) for q in (*parameters, *map(self.names.present, self.program.states))}
        if self.recursive_with:
            seen |= {entry[q].name for q in parameters}
        facts = _connected(facts, seen)
        facts += specifying.start_facts(self.names, changed)
        middle = frozenset().union(*(p.middle for p in paths))
        leans = frozenset().union(*(p.leans for p in paths))
        return Path(facts=tuple(facts), middle=middle, leans=leans), entry

    # -------------------------------------------------------------- what is owed
    def _declare(self, name: str, sort: object) -> None:
        self.names.sorts[name] = sort  # type: ignore[assignment]

    def _amount(self, p: Path, amount: Term, span: Span) -> None:
        self._domain(p, amount, span)
        self._owe(p, "range", nonnegative(amount), span, f"the amount {show(amount)} is not negative")

    def _range(self, p: Path, value: Term, sort: str, span: Span, words: str) -> None:
        self._owe(p, "range", of_sort(value, sort), span, words)  # type: ignore[arg-type]

    def _domain(self, p: Path, term: Term, span: Span, claim: str | None = None) -> None:
        for condition in domain_conditions(term, self.program.functions):
            self._owe(p, "domain", condition.formula, span, condition.what, claim=claim)

    def _owe(
        self, p: Path, kind: Kind, goal: Term, span: Span, words: str, *, claim: str | None = None, also_evident: bool = False
    ) -> None:
        """An obligation that the formula over present names holds on the path, unless that is plain to see."""
        if self._silent or goal.op == "true":
            return
        absolute = p.value(goal)
        formulas = tuple(f.formula for f in p.facts)
        key = (self.ground.label, kind + (claim or ""), absolute, formulas)
        if key in self._seen or (absolute in formulas and not also_evident):
            return
        self._seen.add(key)
        events = p.events
        self._add(
            kind, claim, p, absolute, span, f"{words}{_case(p)}", lambda: program_steps(events, goal, is_claim=False)
        )

    def _claims(self, end: Path, spec: Specification) -> None:
        """All claims of the specification on a path that ends."""
        if self._silent:
            return
        before: dict[Term, Term] = {}
        if not spec.label and self.routine.result is not None:
            result = self.names.present("result")
            before[result] = end.value(result)
        for claim in spec.claims:
            formula = claim.formula
            goal = specifying.instantiated(formula, before, end.value)
            for condition in domain_conditions(formula, self.program.functions):
                owed = specifying.instantiated(condition.formula, before, end.value)
                if owed not in {f.formula for f in end.facts}:
                    self._add("domain", claim.label, end, owed, claim.span, f"{condition.what}{_case(end)}", tuple, claim, before)
            events, shown = end.events, _with_result_primed(formula, before)
            self._add(
                "claim", claim.label, end, goal, claim.span, "; ".join(end.case) or "the only path",
                lambda events=events, shown=shown: program_steps(events, shown, is_claim=True), claim, before,  # type: ignore[misc]
            )

    def _add(
        self, kind: Kind, label: str | None, p: Path, goal: Term, span: Span, case: str,
        derive: Callable[[], tuple[Step, ...]], claim: Claim | None = None, before: Mapping[Term, Term] | None = None,
    ) -> None:
        self._serial += 1
        hints = claim.hints if claim is not None else ()

        def at(term: Term) -> Term:
            return specifying.instantiated(term, before or {}, p.value)

        self.obligations.append(Obligation(
            id=f"{self.routine.name}.{self._serial}", kind=kind, routine=self.routine.name,
            specification=self.ground.label, claim=label, case=case, facts=p.facts, goal=goal, span=span,
            path=tuple(dict.fromkeys(e.span for e in p.events)), middle=p.middle, leans=p.leans,
            cases=tuple(at(h.condition) for h in hints if isinstance(h, Cases)),
            using=tuple(replace(h, arguments=tuple(map(at, h.arguments))) for h in hints if isinstance(h, Using)),
            derive=derive,
        ))

    # -------------------------------------------------------------- measures
    def _site_of_call(self, p: Path, callee: Routine, before: dict[Term, Term], span: Span) -> None:
        if self._silent:
            return
        label, entry = self.ground.label, self.ground.entry

        def make(own: measures.Measure, other: measures.Measure) -> tuple[Obligation, ...]:
            mine = tuple(substitute(t, entry) for t in own)
            new = tuple(p.value(substitute(t, before)) for t in other)
            return self._measured(p, measures.owed(mine, new), span, f"calling {callee.name}", label)

        self.sites.append(measures.Site(self.routine.name, label, callee.name, make))

    def _site_of_loop(self, begun: Path, end: Path, spec: Specification) -> None:
        if self._silent:
            return

        def make(own: measures.Measure, other: measures.Measure) -> tuple[Obligation, ...]:
            at_start = [w for w in measures.owed(own, own) if w[1] != "the measure falls"]
            first = self._measured(begun, at_start, spec.span, f"an iteration of {spec.label} begins", spec.label)
            new = tuple(end.value(t) for t in own)
            last = [(measures.falls(own, new), "the measure falls")]
            return first + self._measured(end, last, spec.span, f"once round {spec.label}", spec.label)

        self.sites.append(measures.Site(self.routine.name, spec.label, spec.label, make))

    def _measured(
        self, p: Path, owed: list[tuple[Term, str]], span: Span, words: str, label: str
    ) -> tuple[Obligation, ...]:
        found = []
        for goal, what in owed:
            self._serial += 1
            found.append(Obligation(
                id=f"{self.routine.name}.{self._serial}", kind="measure", routine=self.routine.name, specification=label,
                claim=None, case=f"{what}, {words}{_case(p)}", facts=p.facts, goal=goal, span=span,
                path=tuple(dict.fromkeys(e.span for e in p.events)), middle=p.middle, leans=p.leans,
            ))
        return tuple(found)


def _count(block: Block) -> int:
    """How many paths there are through a block."""
    total = 1
    for s in block:
        if isinstance(s, If):
            total *= _count(s.then) + _count(s.otherwise)
        elif isinstance(s, Either):
            total *= sum(_count(b) for b in s.branches)
        elif isinstance(s, Hold):
            total *= _count(s.body)
    return total


def _assigned(block: Block, program: Program) -> set[str]:
    """Names that a block may change."""
    found: set[str] = set()
    work = list(block)
    while work:
        s = work.pop()
        match s:
            case Assign() | Choose():
                found.add(s.target)
            case If():
                work += [*s.then, *s.otherwise]
            case Either():
                work += [t for b in s.branches for t in b]
            case Hold():
                work += s.body
            case Loop() | Stage():
                work += s.body
                found |= s.changed
            case Call():
                found |= program.routines[s.routine].changed | {s.target or ""}
    return found


def _connected(facts: list[Fact], seen: set[str]) -> list[Fact]:
    """The facts that share names, directly or through others, with those in sight."""
    kept: list[Fact] = []
    rest = [(f, names(f.formula)) for f in facts]
    while True:
        near = [(f, n) for f, n in rest if n & seen]
        if not near:
            return [f for f in facts if f in kept]
        rest = [(f, n) for f, n in rest if not n & seen]
        for f, n in near:
            kept.append(f)
            seen |= n


def _case(p: Path) -> str:
    return f" ({'; '.join(p.case)})" if p.case else ""


def _article(sort: str) -> str:
    return {"nat": "a natural number", "int": "an integer", "real": "a number", "bool": "true or false"}[sort]


def _disjunction(formulas: Sequence[Term]) -> Term:
    result = formulas[0]
    for f in formulas[1:]:
        result = app("or", result, f)
    return result


def _with_result_primed(formula: Term, before: dict[Term, Term]) -> Term:
    return substitute(formula, {r: var("result'", r.sort) for r in before})

