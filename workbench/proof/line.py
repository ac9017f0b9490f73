"""A line of a proof under search: a state, the moves that led to it, and single steps forward.

Whatever happens on a line is written down as kernel moves; `finished` turns them into a certificate.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from time import thread_time
from typing import TypeAlias

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import Atom, Poly, TooLargeToNormalize
from workbench.errors import UllageError
from workbench.proof.kernel import Certificate, Cut, Leaf, Move, NotProved, State, Then, ThreeWays, moved
from workbench.proof.laws import Law
from workbench.proof.leaves import linear_leaf

# Atoms of one law's condition that are decided, one after the other, before the instance is given up.
CONDITION_LIMIT = 6


class Stopped(UllageError):
    """The time ran out, or the caller wants no answer any more."""


@dataclass(frozen=True, slots=True)
class Effort:
    """What one attempt may use: the sheet's mathematics, names to eliminate first, and the time."""

    algebra: Algebra
    laws: Mapping[str, Law]
    functions: Mapping[str, Law]
    middle: frozenset[str]
    deadline: float
    cancelled: Callable[[], bool] | None = None

    def tick(self) -> None:
        if thread_time() > self.deadline or (self.cancelled is not None and self.cancelled()):
            raise Stopped("the time for this obligation is up")


# How the rest of a certificate is wrapped.
Wrapper: TypeAlias = Callable[[Certificate], Certificate]


@dataclass(slots=True)
class Line:
    """A state and the moves that led to it from where the caller stood, outermost first."""

    effort: Effort
    state: State
    wrappers: list[Wrapper] = field(default_factory=list)
    compared: set[Atom] = field(default_factory=set)  # equations looked at in three ways
    unfolded: int = 0

    def branch(self, state: State | None = None) -> Line:
        """A line of its own from here, or from another state."""
        return Line(self.effort, self.state if state is None else state, [], set(self.compared), self.unfolded)

    def join(self, other: Line) -> None:
        """Goes on where a branch from this very line has got to."""
        self.wrappers.extend(other.wrappers)
        self.state, self.compared, self.unfolded = other.state, other.compared, other.unfolded

    def finished(self, certificate: Certificate) -> Certificate:
        for wrap in reversed(self.wrappers):
            certificate = wrap(certificate)
        return certificate

    # -------------------------------------------------------------- steps
    def move(self, move: Move) -> None:
        """One kernel move; raises NotProved where it does not apply."""
        self.state = moved(self.state, move, self.effort.laws)
        self.wrappers.append(lambda rest: Then(move, rest))

    def attempt(self, move: Move) -> bool:
        """The move, where it applies; whether it did."""
        try:
            self.move(move)
        except (NotProved, TooLargeToNormalize):
            return False
        return True

    def leaf(self) -> Leaf | None:
        self.effort.tick()
        return linear_leaf(self.state, self.effort.deadline)

    def decide(self, atom: Atom) -> bool:
        """Whether the rows prove the indicator, or refute it; the line then goes on with what holds."""
        return self.proves(atom, True) or self.proves(atom, False)

    def proves(self, atom: Atom, holds: bool) -> bool:
        """Whether the rows prove that the indicator holds (or that it does not); the line then goes on with that."""
        self.effort.tick()
        if not atom.idempotent or atom in self.state.images:
            return False  # decided meanwhile
        other = self.branch(self.state.assume(atom, not holds))
        other.compare_three_ways()
        leaf = linear_leaf(other.state, self.effort.deadline)
        if leaf is None:
            return False
        closed = other.finished(leaf)
        self.wrappers.append(lambda rest: Cut(atom, rest, closed) if holds else Cut(atom, closed, rest))
        self.state = self.state.assume(atom, holds)
        return True

    def compare_three_ways(self) -> bool:
        """An equation that fails: what is compared lies above or below. One such equation a call."""
        for atom, image in self.state.images.items():
            if atom.kind != "ind" or atom.data != ("eq",) or image.terms or atom in self.compared:
                continue
            self.compared.add(atom)
            signs = (self.effort.algebra.compare(atom.parts[0], strict=strict) for strict in (True, False))
            above, weak = (self.state.resolved(sign)[0] for sign in signs)
            if above != weak:
                self.move(ThreeWays(atom))
                return True
        return False

    def use(self, move: Move, *, keep: bool = False) -> bool:
        """The move, if its condition can be decided and it says something new; else the line stays as it was."""
        self.effort.tick()
        trial = self.branch()
        try:
            trial.move(move)
        except (NotProved, TooLargeToNormalize):
            return False
        before = {id(k) for k in self.state.pending}
        fresh = [k for k in trial.state.pending if id(k) not in before]
        for known in fresh:
            if not trial._decide_condition(known.poly) and not keep:
                return False
        rows = trial.state.next_row != self.state.next_row
        if not rows and len(trial.state.images) == len(self.state.images) and not keep:
            return False
        self.join(trial)
        return True

    def _decide_condition(self, indicator: Poly) -> bool:
        """condition implies formula: decides what the condition consists of, which stands in all terms but the
        constant one.
        """
        for _ in range(CONDITION_LIMIT):
            current = self.effort.algebra.rewrite(indicator, self.state.images)
            terms = [{a for a, _ in mono} for mono in current.terms if mono]
            if not terms or not any(a not in self.state.images for t in terms for a in t):
                return True
            common = set.intersection(*terms)
            condition = [a for a in sorted(common, key=_size) if a.kind in ("ind", "truth")]
            if not condition:
                condition = sorted({a for t in terms for a in t if a.idempotent}, key=_size)[:3]
            if not any(a not in self.state.images and self.decide(a) for a in condition):
                return False
        return False


def _size(atom: Atom) -> tuple[int, Atom]:
    return len(atom.key), atom
