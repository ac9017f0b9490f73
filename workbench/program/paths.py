"""A path through a program: what happened on it, and what the state is in terms of where it began.

An event says what one statement does in terms of the state before it: names updated at once, facts that hold. The
substitution law `(x := e. P) = P with e for x` is applied forwards here to keep the state; `deriving` applies it
backwards, as it is shown.

Names of present values and names of start values are the same names: before the first event they agree.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from workbench.algebra.terms import Term, conjunction, implies, negate, substitute, var
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
            self.facts + tuple(f for f in facts if f.formula.op != "true"),
            (*self.events, event),
            self.middle | event.middle,
            self.leans | event.leans,
            (*self.case, case) if case else self.case,
        )


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


def joined(branches: Sequence[Branch], words: str, span: Span) -> Event:
    """All branches as one event: each name gets `if condition then … else …`, each fact its condition as a guard.

    The conditions are over the names before the statement; exactly one of them holds.
    """
    done = [(b, summary(b.events)) for b in branches]
    names: dict[Term, None] = {}
    for _, path in done:
        names.update(dict.fromkeys(path.state))
    updates = {}
    for name in names:
        value = done[-1][1].state.get(name, name)
        for branch, path in reversed(done[:-1]):
            other = path.state.get(name, name)
            value = other if other == value else app_if(branch.condition, other, value)
        updates[name] = value
    facts = []
    for i, (branch, path) in enumerate(done):
        guard = branch.condition if i < len(done) - 1 or len(done) == 1 else _none_of(b for b, _ in done[:-1])
        for fact in path.facts:
            facts.append(Fact(implies(guard, fact.formula), fact.origin, fact.lean, fact.span))
    return Event(
        "join",
        words,
        span,
        updates,
        tuple(facts),
        frozenset().union(*(p.middle for _, p in done)),
        frozenset().union(*(p.leans for _, p in done)),
    )


def _none_of(branches: Iterable[Branch]) -> Term:
    return conjunction([negate(b.condition) for b in branches])


def app_if(condition: Term, then: Term, otherwise: Term) -> Term:
    return Term("if", (condition, then, otherwise), sort="bool" if then.is_formula else "real")


def primed_base(name: Term) -> Term | None:
    """The name itself, of a name of a value at the end; None for others."""
    return var(name.name[:-1], name.sort) if name.name.endswith("'") else None
