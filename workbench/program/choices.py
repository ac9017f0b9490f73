"""Values that may satisfy a condition on a name: ends of the ranges that the condition speaks of."""

from __future__ import annotations

from workbench.algebra.terms import FALSE, ONE, TRUE, ZERO, Term, app, num, variables

# More alternatives only make the obligation harder to read and to prove.
CANDIDATE_LIMIT = 6


def candidates(target: Term, condition: Term) -> list[Term]:
    """Terms free of the target that are worth trying as its value."""
    if target.sort == "bool":
        return [TRUE, FALSE]
    bounds: dict[Term, None] = {}
    work = [condition]
    while work:
        f = work.pop()
        if f.op in ("and", "or"):
            work.extend(reversed(f.args))
        elif f.op == "implies":
            work.append(f.args[1])
        elif f.op in ("=", "<=", ">=", "<", ">", "!="):
            for here, there in (f.args, f.args[::-1]):
                if here == target and target not in variables(there):
                    bounds.update(dict.fromkeys(_near(there, f.op, target, on_left=here is f.args[0])))
    found = list(bounds)
    if target.sort == "real" and len(found) >= 2:
        found.append(app("/", app("+", found[0], found[1]), num(2)))
    found += [t for t in (ZERO, ONE) if t not in bounds]
    return found[:CANDIDATE_LIMIT]


def _near(bound: Term, op: str, target: Term, *, on_left: bool) -> list[Term]:
    """The bound itself, or what lies next to it where it is excluded."""
    above = (op in (">", ">=")) == on_left  # target above the bound
    whole = bound if target.sort == "real" else app("ceil" if above else "floor", bound)
    if op in ("=", "<=", ">="):
        return [bound if op == "=" else whole]
    if op == "!=":
        return [app("+", bound, ONE)]
    return [app("+", whole, ONE)] if above else [app("-", whole, ONE)]
