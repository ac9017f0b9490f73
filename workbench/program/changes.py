"""Which names a stretch of priced program may change. Whoever comes after relies on it that no others do."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping

from workbench.program.priced import (
    Acquire,
    Assign,
    Block,
    Call,
    Choose,
    Either,
    Gauge,
    Hold,
    If,
    Loop,
    Release,
    Spend,
    Stage,
)


def changed_by(block: Block, gauges: Mapping[str, Gauge], of_callee: Callable[[str], Iterable[str]]) -> frozenset[str]:
    """State names that the block may change, local ones that end with it among them.

    A `hold` gives back what it took: it changes the peak, the level only where its body does.
    """
    found: set[str] = set()
    work = list(block)
    while work:
        s = work.pop()
        match s:
            case Assign() | Choose():
                found.add(s.target)
            case Spend(counter):
                found.add(counter)
                found |= {f"{g.name}.area" for g in gauges.values() if g.clock == counter}
            case Acquire(gauge):
                found |= {gauge, f"{gauge}.peak"}
            case Release(gauge):
                found.add(gauge)
            case Hold(gauge):
                found.add(f"{gauge}.peak")
                work += s.body
            case If():
                work += [*s.then, *s.otherwise]
            case Either():
                work += [t for b in s.branches for t in b]
            case Call():
                found |= set(of_callee(s.routine)) | ({s.target} if s.target else set())
            case Loop():
                work += [*s.test, *s.body]
            case Stage():
                work += s.body
    return frozenset(found)


def callees(block: Block) -> frozenset[str]:
    """Routines that the block calls."""
    found: set[str] = set()
    work = list(block)
    while work:
        s = work.pop()
        match s:
            case Call():
                found.add(s.routine)
            case Hold() | Loop() | Stage():
                work += s.body
            case If():
                work += [*s.then, *s.otherwise]
            case Either():
                work += [t for b in s.branches for t in b]
    return frozenset(found)
