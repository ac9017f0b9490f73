"""Automatic proof of one obligation: which moves to try, in which order, and when to stop.

Nothing here is trusted: a certificate comes out, and only the kernel's replay of it makes a proof. Order of attempts in
a state: put equals for equals and shift names to their lower bounds; add rows up; laws that simplify; split the cases
that stand in the way; definitions; bounds; products of facts; undecided facts; remainders; small values.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from itertools import islice
from time import thread_time

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import NOTHING, Atom, Poly, TooLargeToNormalize, minus, of_atom
from workbench.algebra.terms import COMPARISONS, Term
from workbench.proof import instances
from workbench.proof.kernel import (
    ByRemainder,
    Certificate,
    Cut,
    Instance,
    Invert,
    Leaf,
    Move,
    NotProved,
    OpenPositivePart,
    Proved,
    Rename,
    State,
    check,
    start,
)
from workbench.proof.laws import Law
from workbench.proof.leaves import product_leaf
from workbench.proof.line import Effort, Line, Stopped
from workbench.proof.splitting import decide_first, remainders, row_splits, undecided, zeros
from workbench.proof.tidying import ROUND_LIMIT, equals_for_equals, tidy

__all__ = ["SECONDS", "Attempt", "Hints", "Search", "Stopped"]

# Nested case splits; sheets with more ifs in a row than this are proved from bounds, or not at all.
DEPTH_LIMIT = 8
# Nested unfoldings of definitions; each may bring in new values of the same function.
UNFOLD_LIMIT = 2
# More positive parts and indicators than this are bounded together before they are split one by one.
MANY_SPLITS = 3
# Seconds for one obligation, unless the caller says otherwise: of the processor, so that a busy machine proves as much.
SECONDS = 2.0


@dataclass(frozen=True, slots=True)
class Attempt:
    """`residue` is left minus right side of the goal after all equations are put in, where the goal stays open."""

    proved: Proved | None
    residue: Poly | None = None
    why: str = ""


@dataclass(frozen=True, slots=True)
class Hints:
    """What a person said would help, and which names to eliminate first."""

    cases: tuple[Term, ...] = ()
    using: tuple[tuple[str, tuple[Term, ...]], ...] = ()
    middle: frozenset[str] = frozenset()


# Conditions that are asked of the rows before one of them is split.
DECIDED_LIMIT = 4


class Search:
    """Proves obligations of one sheet: its algebra, its laws and functions, its limits."""

    def __init__(
        self,
        algebra: Algebra,
        laws: Mapping[str, Law],
        functions: Mapping[str, Law],
        *,
        seconds: float = SECONDS,
        cancelled: Callable[[], bool] | None = None,
    ) -> None:
        self.algebra = algebra
        self.laws = laws
        self.functions = functions
        self.seconds = seconds
        self.cancelled = cancelled
        self.user_laws = tuple(law for law in laws.values() if law.lean.startswith("law "))
        self._formulas: dict[str, Poly] | None = None

    # -------------------------------------------------------------- entry
    def prove(self, facts: Sequence[Term], goal: Term, hints: Hints | None = None) -> Attempt:
        """A proof that the kernel has checked, or why there is none."""
        hints = hints or Hints()
        residue: Poly | None = None
        try:
            with self._clock(hints.middle) as effort:
                line = Line(effort, start(self.algebra, facts, goal))
                equals_for_equals(line)
                residue = _residue(line, goal)
                decide_first(line)
                for name, args in hints.using:
                    line.use(Instance(name, tuple(self.algebra.normal(a) for a in args)), keep=True)
                certificate = self._with_cases(line, hints.cases)
                if certificate is not None:
                    return Attempt(check(self.algebra, facts, goal, self.laws, certificate))
            why = "the search found no way"
        except Stopped:
            why = f"no proof within {self.seconds:g} s"
        except TooLargeToNormalize as e:
            why = str(e)
        except NotProved as e:
            why = f"the kernel refused: {e}"
        return Attempt(None, residue, why)

    def residue(self, facts: Sequence[Term], goal: Term, middle: frozenset[str] = frozenset()) -> Poly | None:
        """Left minus right side of the goal after all equations are put in; None where the goal is no comparison."""
        try:
            with self._clock(middle) as effort:
                line = Line(effort, start(self.algebra, facts, goal))
                equals_for_equals(line)
                return _residue(line, goal)
        except (NotProved, Stopped, TooLargeToNormalize):
            return None

    @contextmanager
    def _clock(self, middle: frozenset[str]) -> Iterator[Effort]:
        """The time runs, in the algebra's long work too."""
        deadline = thread_time() + self.seconds
        effort = Effort(self.algebra, self.laws, self.functions, middle, deadline, self.cancelled)
        before, self.algebra.tick = self.algebra.tick, effort.tick
        try:
            yield effort
        finally:
            self.algebra.tick = before

    def _with_cases(self, line: Line, cases: Sequence[Term]) -> Certificate | None:
        """A person's case distinctions come first."""
        if not cases:
            return self._solve(line, 0)
        condition = self.algebra.rewrite(self.algebra.normal(cases[0]), line.state.images)
        atoms = [a for a in sorted(condition.atoms) if a.idempotent]
        if not atoms:
            return self._with_cases(line, cases[1:])
        found = self._split(line, atoms[0], lambda branch: self._with_cases(branch, cases))
        return None if found is None else line.finished(found)

    # -------------------------------------------------------------- one state
    def _solve(self, line: Line, depth: int) -> Certificate | None:
        """A certificate for the state that the line began with."""
        found: Certificate | None = self._easy(line) or self._rounds(line, self._simplifying_moves)
        if found is None and depth == 0 and len(row_splits(line)) > MANY_SPLITS:
            together = line.branch()
            found = self._bounds(together)
            if found is not None:
                found = together.finished(found)
        if found is None and depth < DEPTH_LIMIT:
            for atom in row_splits(line):
                found = self._split(line, atom, lambda b: self._solve(b, depth + 1))
                return None if found is None else line.finished(found)
        if found is None:
            found = self._unfold(line, depth) or self._bounds(line) or self._last_resorts(line, depth)
        return None if found is None else line.finished(found)

    def _easy(self, line: Line) -> Leaf | None:
        tidy(line)
        return line.leaf()

    def _split(self, line: Line, atom: Atom, solve: Callable[[Line], Certificate | None]) -> Certificate | None:
        """Both branches of a comparison, or of the sign inside a positive part."""
        line.effort.tick()
        if atom.kind == "pos":
            return self._split_positive_part(line, atom, solve)
        yes = solve(line.branch(line.state.assume(atom, True)))
        if yes is None:
            return None
        no = solve(line.branch(line.state.assume(atom, False)))
        return None if no is None else Cut(atom, yes, no)

    def _split_positive_part(
        self, line: Line, atom: Atom, solve: Callable[[Line], Certificate | None]
    ) -> Certificate | None:
        """The sign inside first: then the positive part is what is inside, or 0, and nothing grows."""

        def opened(branch: Line) -> Certificate | None:
            branch.attempt(OpenPositivePart(atom))
            found = solve(branch.branch())
            return None if found is None else branch.finished(found)

        sign, _ = line.state.resolved(self.algebra.compare(atom.parts[0], strict=False))
        undecided_signs = [a for a in sorted(sign.atoms) if a.idempotent]
        return self._split(line, undecided_signs[0], opened) if undecided_signs else opened(line.branch())

    def _rounds(self, line: Line, moves: Callable[[State], Iterable[Move]]) -> Leaf | None:
        """Moves of one kind until none says anything new, then the rows added up."""
        tried: set[Move] = set()
        for _ in range(ROUND_LIMIT):
            used = False
            for move in list(moves(line.state)):
                if move in tried:
                    continue
                tried.add(move)
                if line.use(move):
                    used = True
                    tidy(line)
                    break
            if not used:
                break
        return line.leaf() if tried else None

    def _simplifying_moves(self, state: State) -> Iterable[Move]:
        return instances.simplifying(state, instances.deep_atoms(state), self.functions)

    # -------------------------------------------------------------- definitions
    def _unfold(self, line: Line, depth: int) -> Certificate | None:
        """Definitions whose values stand here already; failing that, all of them, a limited number of times over."""
        kinds = ("call", "truth", "fact", "binom", "sum")
        present = {a for a in instances.deep_atoms(line.state) if a.kind in kinds}
        progress = False
        for move in list(instances.unfolding(sorted(present, key=lambda a: -len(a.key)), self.functions)):
            trial = line.branch()
            if not trial.use(move):
                continue
            tidy(trial)
            now = {a for a in instances.deep_atoms(trial.state) if a.kind in kinds}
            if now <= present:
                line.join(trial)
                progress = True
        if not progress and line.unfolded < UNFOLD_LIMIT:
            line.unfolded += 1
            for move in list(instances.unfolding(sorted(present, key=lambda a: -len(a.key)), self.functions)):
                progress = line.use(move) or progress
        if not progress:
            return None
        again = line.branch()
        leaf = self._easy(again)
        if leaf is not None:
            return again.finished(leaf)
        return self._solve(line.branch(), depth + 1) if depth < DEPTH_LIMIT else None

    # -------------------------------------------------------------- bounds, products, last resorts
    def _bounds(self, line: Line) -> Leaf | None:
        leaf = self._invert(line)
        if leaf is not None:
            return leaf
        atoms = instances.deep_atoms(line.state)
        moves = [
            *instances.matching(self.user_laws, atoms, self._patterns()),
            *instances.bounding(atoms),
            *instances.squares(line.state),
        ]
        for move in moves:
            line.use(move)
        tidy(line)
        return line.leaf() or product_leaf(line.state, line.effort.deadline)

    def _patterns(self) -> dict[str, Poly]:
        """What the user's laws say, where it is not too large to match anything."""
        if self._formulas is None:
            self._formulas = {}
            for law in self.user_laws:
                try:
                    self._formulas[law.name] = self.algebra.normal(law.formula)
                except TooLargeToNormalize:
                    self._formulas[law.name] = NOTHING
        return self._formulas

    def _invert(self, line: Line) -> Leaf | None:
        """1/y for y that is known not to be 0: as a power, after y has got a name of its own if it is a sum."""
        for atom in [a for a in instances.deep_atoms(line.state) if a.kind == "inv"]:
            if atom not in instances.deep_atoms(line.state):
                continue
            y = atom.parts[0]
            zero = self.algebra.rewrite(self.algebra.equal(y), line.state.images)
            for unknown in [a for a in zero.atoms if a.idempotent]:
                positive = self.algebra.rewrite(self.algebra.compare(y, strict=True), line.state.images)
                for sign in [a for a in positive.atoms if a.idempotent]:
                    line.proves(sign, True)
                if unknown not in line.state.images:
                    line.proves(unknown, False)
            if len(y.terms) > 1:
                candidates = [a for a in sorted(y.atoms) if y.coefficient(a) in (1, -1) and a.kind in ("var", "pow")]
                if not candidates or not line.attempt(Rename(y, candidates[-1])):
                    continue
                y = self.algebra.rewrite(y, line.state.images)
            single = next(iter(y.atoms), None)
            if single is not None and y == of_atom(single):
                for unknown in self.algebra.rewrite(self.algebra.equal(y), line.state.images).atoms:
                    line.proves(unknown, False)
                line.attempt(Invert(single))
        tidy(line)
        return line.leaf()

    def _last_resorts(self, line: Line, depth: int) -> Certificate | None:
        """Facts not decided yet, remainders of names under floors, small values of naturals."""
        if depth >= DEPTH_LIMIT:
            return None
        for atom in list(islice(undecided(line), DECIDED_LIMIT)):
            if line.decide(atom):
                return self._solve(line.branch(), depth + 1)
        for atom in undecided(line):
            return self._split(line, atom, lambda b: self._solve(b, depth + 1))
        return self._by_remainder(line, depth) or self._by_value(line, depth)

    def _by_remainder(self, line: Line, depth: int) -> Certificate | None:
        for name, divisor in islice(remainders(line), 1):
            branches: list[Certificate] = []
            for left in range(divisor):
                line.effort.tick()
                found = self._solve(line.branch(line.state.remainder(name, divisor, left)), depth + 2)
                if found is None:
                    return None
                branches.append(found)
            return ByRemainder(name, tuple(branches))
        return None

    def _by_value(self, line: Line, depth: int) -> Certificate | None:
        """A natural name of the goal is 0, or at least 1; and so on, a few times."""
        if depth + 2 > DEPTH_LIMIT:
            return None
        for atom in list(islice(zeros(line), DECIDED_LIMIT)):
            if line.decide(atom):
                return self._solve(line.branch(), depth + 1)
        for atom in islice(zeros(line), 1):
            return self._split(line, atom, lambda b: self._solve(b, depth + 2))
        return None


def _residue(line: Line, goal: Term) -> Poly | None:
    while goal.op == "implies":
        goal = goal.args[1]
    if goal.op not in COMPARISONS:
        return None
    left, right = (line.effort.algebra.normal(a) for a in goal.args)
    return line.effort.algebra.rewrite(minus(left, right), line.state.images)
