"""A path through a program: what happened on it, and what the state is in terms of where it began.

An event says what one statement does in terms of the state before it: names updated at once, facts that hold. The
substitution law `(x := e. P) = P with e for x` is applied forwards here to keep the state; `deriving` applies it
backwards, as it is shown.

Names of present values and names of start values are the same names: before the first event they agree.
"""

from __future__ import annotations

from collections.abc import Callable, Container, Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from workbench.algebra.terms import ZERO, Term, add, app, conjunction, implies, negate, sub, substitute, var
from workbench.errors import Span
from workbench.program.obligation import Fact, Lean

State = Mapping[Term, Term]  # present name -> its value over start names and fresh names


@dataclass(frozen=True, slots=True)
class Event:
    """One step of a path. `updates` and `facts` are over the names before it, and over `fresh` names that it brings in.

    `free` are those fresh names that may have any value that the facts allow (a choice); the others are middle states.
    """

    move: str
    words: str
    span: Span
    updates: Mapping[Term, Term] = field(default_factory=dict)
    facts: tuple[Fact, ...] = ()
    middle: frozenset[str] = frozenset()
    leans: frozenset[Lean] = frozenset()


@dataclass(frozen=True, slots=True)
class Path:
    """`state` holds changed names only. `facts` are over start names and fresh names."""

    state: State = field(default_factory=dict)
    facts: tuple[Fact, ...] = ()
    events: tuple[Event, ...] = ()
    middle: frozenset[str] = frozenset()
    leans: frozenset[Lean] = frozenset()
    case: tuple[str, ...] = ()

    def value(self, term: Term) -> Term:
        """A term over present names, as one over start names."""
        return substitute(term, self.state)

    def then(self, event: Event, case: str = "") -> Path:
        memo: dict[Term, Term] = {}
        state = dict(self.state)
        for name, value in event.updates.items():
            state[name] = substitute(value, self.state, memo)
        facts = tuple(Fact(substitute(f.formula, self.state, memo), f.origin, f.lean, f.span) for f in event.facts)
        return Path(
            state,
            self.facts + tuple(f for f in facts if not _says_nothing(f.formula)),
            (*self.events, event),
            self.middle | event.middle,
            self.leans | event.leans,
            (*self.case, case) if case else self.case,
        )


def _says_nothing(formula: Term) -> bool:
    return formula.op == "true" or (formula.op in ("=", "<=", ">=", "iff") and formula.args[0] == formula.args[1])


def summary(events: Sequence[Event]) -> Path:
    """What the events do, as one path from a state where every name has its own value."""
    path = Path()
    for event in events:
        path = path.then(event)
    return path


@dataclass(frozen=True, slots=True)
class Branch:
    """One way through a statement with branches: when it is taken, and what happens on it."""

    condition: Term
    origin: str
    events: tuple[Event, ...]


def joined(
    branches: Sequence[Branch],
    words: str,
    span: Span,
    sight: Container[str],
    fresh: Callable[[Term], Term],
    levels: Mapping[Term, Term] | None = None,
) -> Event:
    """All branches as one event: each name in sight gets `if condition then … else …`, each fact its condition as a
    guard.

    The conditions are over the names before the statement; exactly one of them holds. A value that is no mere growth
    of what was there before gets a fresh name and an equation, so that formulas do not double with every branch.
    `levels`: the level that each peak belongs to; a branch that reaches nothing new has reached the level, which is no
    more than the peak.
    """
    done = [(b, summary(b.events)) for b in branches]
    names = dict.fromkeys(n for _, path in done for n in path.state if n.name in sight)
    updates: dict[Term, Term] = {}
    facts: list[Fact] = []
    for name in names:
        values = [(b.condition, path.state.get(name, name)) for b, path in done]
        growths = [(c, _growth(value, name)) for c, value in values]
        if all(value == values[0][1] for _, value in values):
            updates[name] = values[0][1]
        elif not name.is_formula and all(g is not None for _, g in growths):
            updates[name] = add(name, _chosen([(c, g) for c, g in growths if g is not None]))
        elif (reached := _reached(values, name, (levels or {}).get(name))) is not None:
            updates[name] = app("max", name, reached)
        else:
            updates[name] = new = fresh(name)
            value = _chosen(values)
            facts.append(Fact(app("iff" if value.is_formula else "=", new, value), f"{name.name} after the branches"))
    for i, (branch, path) in enumerate(done):
        guard = branch.condition if i < len(done) - 1 or len(done) == 1 else _none_of(b for b, _ in done[:-1])
        facts += [Fact(implies(guard, f.formula), f.origin, f.lean, f.span) for f in path.facts]
    middle = frozenset[str]().union(*(p.middle for _, p in done))
    return Event("join", words, span, updates, tuple(facts), middle, frozenset().union(*(p.leans for _, p in done)))


def _chosen(values: Sequence[tuple[Term, Term]]) -> Term:
    """The value whose condition holds; the last one where none of the others does."""
    result = values[-1][1]
    for condition, value in reversed(values[:-1]):
        if value != result:
            result = Term("if", (condition, value, result), sort="bool" if value.is_formula else "real")
    return result


def _reached(values: Sequence[tuple[Term, Term]], peak: Term, level: Term | None) -> Term | None:
    """level + e, with `if` values for e, where every branch makes the peak the maximum of itself and of such levels."""
    if level is None:
        return None
    heights: list[tuple[Term, Term]] = []
    for condition, value in values:
        height = ZERO
        work = [value]
        while work:
            t = work.pop()
            if t.op == "max":
                work.extend(t.args)
            elif t != peak:
                grown = _growth(t, level)
                if grown is None:
                    return None
                height = grown if height == ZERO else app("max", height, grown)
        heights.append((condition, height))
    return add(level, _chosen(heights))


def _growth(value: Term, name: Term) -> Term | None:
    """e where the value is name + e, written as sums and differences that begin with the name."""
    parts: list[tuple[str, Term]] = []
    while value.op in ("+", "-") and value != name:
        parts.append((value.op, value.args[1]))
        value = value.args[0]
    if value != name:
        return None
    result = ZERO
    for op, part in reversed(parts):
        result = add(result, part) if op == "+" else sub(result, part)
    return result


def _none_of(branches: Iterable[Branch]) -> Term:
    return conjunction([negate(b.condition) for b in branches])


def primed_base(name: Term) -> Term | None:
    """The name itself, of a name of a value at the end; None for others."""
    return var(name.name[:-1], name.sort) if name.name.endswith("'") else None
