"""Which facts a goal is likely to need: fewer facts make a proof shorter to find and to read.

Nothing is lost by it: where the few do not suffice, all are tried.
"""

from __future__ import annotations

from collections.abc import Sequence

from workbench.algebra.terms import Term, names


def relevant(facts: Sequence[Term], goal: Term) -> list[int]:
    """Indices of the facts about start values alone, and of those that say what the goal's middle states are.

    A middle state that an equation gives needs that equation only; of another one every fact is taken.
    """
    mentioned = [frozenset(n for n in names(f) if "@" in n) for f in facts]
    given = {n: i for i, f in enumerate(facts) for n in _alone(f)}
    chosen = {i for i, m in enumerate(mentioned) if not m}
    waiting = [n for n in names(goal) if "@" in n]
    seen: set[str] = set()
    while waiting:
        name = waiting.pop()
        if name in seen:
            continue
        seen.add(name)
        about = [given[name]] if name in given else [i for i, m in enumerate(mentioned) if name in m]
        for i in about:
            if i not in chosen:
                chosen.add(i)
                waiting.extend(mentioned[i])
    return sorted(chosen)


def _alone(fact: Term) -> list[str]:
    """Names that the fact, as an equation, gives outright."""
    if fact.op not in ("=", "iff"):
        return []
    left, right = fact.args
    return [a.name for a, b in ((left, right), (right, left)) if a.op == "var" and a.name not in names(b)]
