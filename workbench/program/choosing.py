"""Who decides at `either` and `any` while a program runs: chance with a seed, or a script of decisions."""

from __future__ import annotations

import random
from collections.abc import Sequence
from fractions import Fraction
from typing import Protocol

from workbench.algebra.evaluate import Compiled, TooLarge, Undefined, Value, is_of_sort
from workbench.algebra.terms import Sort

# Values tried for `any`, beside the ends of the ranges that its condition names.
_WHOLE = (0, 1, 2, 3, 4, 5, 6, 7, 8, 10, 12, 16, 20, 32, 64, 100, 255, 1_000)
_USUAL: dict[Sort, tuple[Value, ...]] = {
    "nat": _WHOLE,
    "int": (*_WHOLE, *(-n for n in _WHOLE if n)),
    "real": (*_WHOLE, *(-n for n in _WHOLE if n), Fraction(1, 2), Fraction(-7, 3)),
    "bool": (False, True),
}


class Chooser(Protocol):
    """Decides between `count` possibilities, numbered from 0."""

    def pick(self, count: int) -> int: ...


class RandomChooser:
    """Decides by chance; the same seed decides the same way."""

    def __init__(self, seed: int) -> None:
        self._random = random.Random(seed)

    def pick(self, count: int) -> int:
        return self._random.randrange(count)


class ScriptChooser:
    """Decides as a script says, and takes the first possibility where the script has ended. Notes all that was
    possible.
    """

    def __init__(self, script: Sequence[int] = ()) -> None:
        self.script = tuple(script)
        self.taken: list[tuple[int, int]] = []  # (decision, how many there were)

    def pick(self, count: int) -> int:
        at = len(self.taken)
        decision = self.script[at] if at < len(self.script) else 0
        self.taken.append((decision, count))
        return min(decision, count - 1)

    def next_script(self) -> tuple[int, ...] | None:
        """The script that comes after this one, in the order of a count; None after the last."""
        taken = list(self.taken)
        while taken:
            decision, count = taken.pop()
            if decision + 1 < count:
                return (*(d for d, _ in taken), decision + 1)
        return None


def possible_values(
    sort: Sort, ends: Sequence[Compiled], condition: Compiled | None, name: str, frame: dict[str, Value]
) -> list[Value]:
    """Values of the sort that satisfy the condition, out of the usual ones and the ends of the ranges in it."""
    found: dict[Value, None] = {}
    for end in ends:
        try:
            found[end(frame)] = None
        except (Undefined, TooLarge):
            continue
    found.update(dict.fromkeys(_USUAL[sort]))
    fitting = [v for v in found if is_of_sort(v, sort)]
    if condition is None:
        return fitting
    kept: list[Value] = []
    before = frame.get(name)
    for value in fitting:
        frame[name] = value
        try:
            if condition(frame):
                kept.append(value)
        except (Undefined, TooLarge):
            continue
    if before is None:
        frame.pop(name, None)
    else:
        frame[name] = before
    return kept
