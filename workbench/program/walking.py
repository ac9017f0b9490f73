"""From a routine's priced program to its obligations: every path through it, statement by statement.

This is trusted like the kernel. For each path it keeps what the state is over start values and fresh names, and what
is known; side conditions become obligations where they arise, claims at the end of each path. A loop or stage is
walked once, from what all paths that reach it agree on.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

from workbench.algebra.formulas import show
from workbench.algebra.normal import Algebra
from workbench.algebra.terms import Sort, Term, app, conjunction, disjunction, names, negate, substitute, var
from workbench.errors import Span, UllageError
from workbench.program import specifying
from workbench.program.changes import changed_by
from workbench.program.choices import candidates
from workbench.program.domains import of_sort
from workbench.program.mathematics import constant_facts
from workbench.program.obligation import Fact
from workbench.program.owing import Ground, Owing
from workbench.program.paths import Branch, Event, Path, joined
from workbench.program.priced import (
    Acquire,
    Assign,
    Block,
    Call,
    Choose,
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
    Variable,
)
from workbench.program.summing import inferred

# More paths than this through one specification are joined into one, with `if` values, so that they do not multiply.
PATH_LIMIT = 16


class NotAccounted(UllageError):
    """A path changes a name that its specification is said to leave alone: a fault of this program, not of the
    sheet.
    """


class Walk:
    """Walks through one routine. What it owes fills up in `owing`, what its loops and stages promise in
    `specifications`.
    """

    def __init__(self, program: Program, routine: Routine, recursive_with: frozenset[str]) -> None:
        self.program = program
        self.routine = routine
        self.recursive_with = recursive_with
        self.names = specifying.Names(program, routine)
        self.owing = Owing(program, routine, self.names)
        self.specifications: dict[str, Specification] = {}
        self.loops: dict[str, Loop] = {}
        self._joining = False
        self.start: tuple[Term, ...] = ()

    # -------------------------------------------------------------- the routine
    def run(self) -> None:
        spec = self.routine.spec
        self.specifications[""] = spec
        known = [*constant_facts(self.program), *self._states()]
        start = Path(facts=(*known, *specifying.start_facts(self.names)))
        start = self._with_givens(start, spec)
        self.start = tuple(f.formula for f in start.facts)
        for component in spec.measure or ():
            self.owing.domain(start, component, spec.span)
        for end in self._walk(self.routine.body, [start]):
            self._only_changes(end, self.routine.changed, self._sight())
            for s in self.program.states.values():
                if s.condition is not None and names(s.condition) & self.routine.changed:
                    self.owing.owe(end, "range", s.condition, spec.span, f"what holds of {s.name} at the end")
            self.owing.claims(end, spec)

    def _states(self) -> list[Fact]:
        return [
            Fact(s.condition, f"state {s.name}", None, s.span)
            for s in self.program.states.values()
            if s.condition is not None
        ]

    def _with_givens(self, start: Path, spec: Specification) -> Path:
        """The givens become known one after the other; each must mean something where those before it hold."""
        of = f" of {spec.label}" if spec.label else ""
        for given in spec.givens:
            self.owing.domain(start, given, spec.span)
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
        self.owing.domain(p, s.value, s.span)
        self.owing.range(p, s.value, s.sort, s.span, f"{s.target} is {_article(s.sort)}")
        move = "name the present value" if s.is_note else "substitute the statement"
        words = f"{s.target} {'=' if s.is_note else ':='} {show(s.value)}"
        return p.then(Event(move, words, s.span, {var(s.target, s.sort): s.value}))

    def _choose(self, s: Choose, p: Path) -> Path:
        self._declare(s.target, s.sort)
        event = specifying.choice_event(self.names, s)
        if s.condition.op != "true":
            new = next(iter(event.updates.values()))
            target = var(s.target, s.sort)
            self.owing.domain(p, substitute(s.condition, {target: new}), s.span)
            exists = [
                conjunction([of_sort(c, s.sort), substitute(s.condition, {target: c})])
                for c in candidates(target, s.condition)
            ]
            self.owing.owe(p, "choice", disjunction(exists), s.span, f"there is a value for {s.target}")
        return p.then(event)

    def _spend(self, s: Spend, p: Path) -> Path:
        self.owing.amount(p, s.amount, s.span)
        updates = {self.names.present(s.counter): app("+", self.names.present(s.counter), s.amount)}
        for gauge in self.program.clocked(s.counter):
            area = self.names.present(f"{gauge.name}.area")
            updates[area] = app("+", area, app("*", self.names.present(gauge.name), s.amount))
        return p.then(Event("substitute the statement", f"spend {show(s.amount)} {s.counter}", s.span, updates))

    def _move_level(self, p: Path, gauge: str, amount: Term, span: Span, *, up: bool) -> Path:
        self.owing.amount(p, amount, span)
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
        of_callee = self.program.routines
        changes = names(s.amount) & changed_by(s.body, self.program.gauges, lambda c: of_callee[c].changed)
        opened = []
        for p in paths:
            self.owing.amount(p, s.amount, s.span)
            if changes:
                kept = var(name, "real")
                p = p.then(Event("name the present value", f"{name} = {show(s.amount)}", s.span, {kept: s.amount}))
            opened.append(p.then(self._level_event(s.gauge, kept, s.span, up=True)))
        released = self._level_event(s.gauge, kept, s.span, up=False)
        return [p.then(released) for p in self._block(s.body, opened)]

    def _call(self, s: Call, p: Path) -> Path:
        callee = self.program.routines[s.routine]
        for parameter, argument in zip(callee.parameters, s.arguments, strict=True):
            self.owing.domain(p, argument, s.span)
            self.owing.range(
                p, argument, parameter.sort, s.span, f"{parameter.name} of {s.routine} is {_article(parameter.sort)}"
            )
        before = {var(q.name, q.sort): a for q, a in zip(callee.parameters, s.arguments, strict=True)}
        for given in callee.spec.givens:
            self.owing.owe(p, "given", substitute(given, before), s.span, f"given of {s.routine}")
        for state in self.program.states.values():
            if state.condition is not None:
                self.owing.owe(p, "range", state.condition, s.span, f"what holds of {state.name} at every call")
        if s.routine in self.recursive_with:
            self.owing.site_of_call(p, callee, before, s.span)
        if s.target is not None and s.target_sort is not None:
            self._declare(s.target, s.target_sort)
        p = p.then(specifying.call_event(self.names, s, callee, own=s.routine == self.routine.name))
        if s.target is not None and s.target_sort is not None:
            returned = p.value(var(s.target, s.target_sort))  # of the callee's sort, not yet of the target's
            self.owing.range(p, returned, s.target_sort, s.span, f"{s.target} is {_article(s.target_sort)}")
        return p

    # -------------------------------------------------------------- branches
    def _if(self, s: If, paths: list[Path]) -> list[Path]:
        for p in paths:
            self.owing.domain(p, s.condition, s.span)
        ways = [
            (s.condition, s.then, f"{show(s.condition)}"),
            (negate(s.condition), s.otherwise, f"not ({show(s.condition)})"),
        ]
        if not self._joining:
            taken: list[Path] = []
            for condition, block, case in ways:
                event = Event(
                    "take the branch", case, s.span, facts=(Fact(condition, f"the branch where {case}", None, s.span),)
                )
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
            own = chosen[i : i + 1]
            ways.append((conjunction([*earlier, *own]), block, f"branch {i + 1} of {len(s.branches)}"))
        return [self._join(p, ways, s.span) for p in paths]

    def _join(self, p: Path, ways: Sequence[tuple[Term, Block, str]], span: Span) -> Path:
        branches = []
        sight = frozenset(self.names.sorts)
        for condition, block, case in ways:
            event = Event(
                "take the branch", case, span, facts=(Fact(condition, f"the branch where {case}", None, span),)
            )
            inside = p.then(event, case)
            (end,) = self._block(block, [inside])
            branches.append(Branch(condition, case, end.events[len(inside.events) :]))
        state = self.names.next_state()
        words = f"the branches together, {ways[0][2]} or not; the state after them is @{state}"
        levels = {self.names.present(f"{g}.peak"): self.names.present(g) for g in self.program.gauges}
        return p.then(joined(branches, words, span, sight, lambda n: var(f"{n.name}@{state}", n.sort), levels))

    # -------------------------------------------------------------- loops and stages
    def _loop(self, s: Loop, paths: list[Path]) -> list[Path]:
        for v in s.scope:
            self._declare(v.name, v.sort)
        start, entry = self._inner_start(paths, s.changed)
        if s.variable is not None and s.lower is not None:
            known = Fact(app("<=", s.lower, self.names.present(s.variable)), f"{s.variable} starts at {show(s.lower)}")
            start = replace(start, facts=(*start.facts, known))
        spec = self._loop_specification(s, start)
        for p in paths:
            self._entry(p, spec, s.span)
        if not self.owing.silent:
            if spec.label in self.loops:
                raise NotAccounted(f"{spec.label} of {self.routine.name} is reached twice")
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
        silent, self.owing.silent = self.owing.silent, True
        try:
            start = self._known_givens(start, s.spec)
            (head,) = self._walk(s.test, [start])
            passing = Event("take the branch", "the test passes", s.span, facts=(Fact(s.condition, "the test passes"),))
            return self._walk(s.body, [head.then(passing)]), [head]
        finally:
            self.owing.silent = silent

    @staticmethod
    def _known_givens(start: Path, spec: Specification) -> Path:
        return replace(start, facts=(*start.facts, *(Fact(g, "given") for g in spec.givens)))

    def _loop_inside(self, s: Loop, spec: Specification, start: Path) -> None:
        for component in spec.measure or ():
            self.owing.domain(start, component, spec.span)
        (head,) = self._walk(s.test, [start])
        self.owing.domain(head, s.condition, s.span)
        test = show(s.condition)
        fails = Event("take the branch", f"not ({test})", s.span, facts=(Fact(negate(s.condition), "the test fails"),))
        self.owing.claims(head.then(fails, f"the test fails: not ({test})"), spec)
        passes = Event("take the branch", test, s.span, facts=(Fact(s.condition, "the test passes"),))
        begun = head.then(passes, f"once more: {test}")
        again = specifying.loop_event(self.names, s, spec, self.routine.name, again=True)
        for end in self._walk(s.body, [begun]):
            self._only_changes(end, s.changed, self._sight(s.scope))
            for given in spec.givens:
                words = f"given of {spec.label}, kept by its body"
                self.owing.owe(end, "given", given, s.span, words, also_evident=True)
            if s.variable is None:
                self.owing.site_of_loop(begun, end, spec)
            self.owing.claims(end.then(again), spec)

    def _stage(self, s: Stage, paths: list[Path]) -> list[Path]:
        for v in (*s.scope, *s.declared):
            self._declare(v.name, v.sort)
        self.specifications.setdefault(s.spec.label, s.spec)
        for p in paths:
            self._entry(p, s.spec, s.span)
        start, entry = self._inner_start(paths, s.changed)
        if not self.owing.silent:
            self._inside(s.spec, entry, lambda: self._stage_inside(s, self._with_givens(start, s.spec)))
        event = specifying.stage_event(self.names, s, self.routine.name)
        return [p.then(event) for p in paths]

    def _stage_inside(self, s: Stage, start: Path) -> None:
        for end in self._walk(s.body, [start]):
            self._only_changes(end, s.changed, self._sight(s.scope))
            self.owing.claims(end, s.spec)

    def _inside(self, spec: Specification, entry: Mapping[Term, Term], walk: Callable[[], None]) -> None:
        before, self.owing.ground = self.owing.ground, Ground(spec.label, self.owing.ground.depth + 1, entry)
        try:
            walk()
        finally:
            self.owing.ground = before

    def _entry(self, p: Path, spec: Specification, span: Span) -> None:
        for given in spec.givens:
            self.owing.owe(p, "given", given, span, f"given of {spec.label}, on entry", also_evident=True)

    def _inner_start(self, paths: Sequence[Path], changed: frozenset[str]) -> tuple[Path, dict[Term, Term]]:
        """What a loop or stage starts from: facts about names that it cannot change, in which the enclosing start
        values of other names are written `name@entry`. The second value says by which names the routine's start
        values go.
        """
        first = paths[0]
        sight = set(self.names.sorts)
        moved = {n for n in sight if n in changed or any(self.names.present(n) in p.state for p in paths)}
        suffix = "@entry" + ("" if self.owing.ground.depth == 0 else str(self.owing.ground.depth + 1))
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
        shared_names = [n for n in sorted(sight) if n in self.program.states or self.names.is_resource(n)]
        entry = {
            q: substitute(self.owing.ground.entry.get(q, q), renamed)
            for q in (*parameters, *map(self.names.present, shared_names))
        }
        if self.recursive_with:
            seen |= {entry[q].name for q in parameters}
        facts = _connected(facts, seen)
        facts += specifying.start_facts(self.names)
        middle = frozenset().union(*(p.middle for p in paths))
        leans = frozenset().union(*(p.leans for p in paths))
        return Path(facts=tuple(facts), middle=middle, leans=leans), entry

    def _sight(self, scope: Sequence[Variable] = ()) -> set[str]:
        parameters = self.routine.parameters if scope else ()
        return {*self.program.states, *(v.name for v in (*parameters, *scope))}

    def _only_changes(self, end: Path, changed: frozenset[str], sight: set[str]) -> None:
        """Whoever comes after relies on it that nothing else in sight has changed."""
        for name, value in end.state.items():
            seen = name.name in sight or self.names.is_resource(name.name)
            if seen and name.name not in changed and not _same(value, name):
                raise NotAccounted(f"{self.routine.name} changes {name.name}, which pricing did not see")

    def _declare(self, name: str, sort: Sort) -> None:
        self.names.sorts[name] = sort


def _same(value: Term, name: Term) -> bool:
    """What a hold took and gave back leaves the level as it was."""
    algebra = Algebra()
    return value == name or algebra.normal(value) == algebra.normal(name)


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


def _article(sort: str) -> str:
    return {"nat": "a natural number", "int": "an integer", "real": "a number", "bool": "true or false"}[sort]

