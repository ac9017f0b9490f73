"""Automatic proof of one obligation: which moves to try, in which order, and when to stop.

Nothing here is trusted: a certificate comes out, and only the kernel's replay of it makes a proof. Order of attempts in
a state: put equals for equals and shift names to their lower bounds; add rows up; laws that simplify; split the cases
that stand in the way; definitions; bounds; products of facts; undecided facts; remainders; small values.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from time import monotonic
from typing import TypeAlias

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import NOTHING, Atom, Poly, TooLargeToNormalize, minus, of_atom, scaled
from workbench.algebra.terms import COMPARISONS, Term, app
from workbench.errors import UllageError
from workbench.proof import instances
from workbench.proof.kernel import (
    ByRemainder,
    Certificate,
    Cut,
    Define,
    Instance,
    Invert,
    Leaf,
    Move,
    NotProved,
    OpenPositivePart,
    Proved,
    Rename,
    Shift,
    State,
    SumLaw,
    Then,
    ThreeWays,
    check,
    moved,
    start,
)
from workbench.proof.laws import Law
from workbench.proof.leaves import linear_leaf, product_leaf

# Nested case splits; sheets with more ifs in a row than this are proved from bounds, or not at all.
DEPTH_LIMIT = 8
# Nested unfoldings of definitions; each may bring in new values of the same function.
UNFOLD_LIMIT = 2
# Rounds of simplification before it is taken to run in circles.
ROUND_LIMIT = 40
# Divisors up to this are split by remainder.
DIVISOR_LIMIT = 8
# A name is tried at 0, 1, … up to this many values.
VALUE_LIMIT = 4
# Seconds for one obligation, unless the caller says otherwise.
SECONDS = 2.0


class Stopped(UllageError):
    """The time ran out, or the caller wants no answer any more."""


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


# How the rest of a certificate is wrapped, outermost last.
Wrapper: TypeAlias = Callable[[Certificate], Certificate]


@dataclass(slots=True)
class Line:
    """A state and the moves that led to it from where the caller stood."""

    state: State
    wrappers: list[Wrapper] = field(default_factory=list)
    compared: set[Atom] = field(default_factory=set)  # equations looked at in three ways
    unfolded: int = 0

    def move(self, move: Move, state: State) -> None:
        self.state = state
        self.wrappers.append(lambda rest: Then(move, rest))

    def branch(self, state: State) -> Line:
        return Line(state, [], set(self.compared), self.unfolded)

    def finished(self, leaf: Certificate) -> Certificate:
        for wrap in reversed(self.wrappers):
            leaf = wrap(leaf)
        return leaf


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
        self.deadline = 0.0
        self._middle: frozenset[str] = frozenset()
        users = [law for law in laws.values() if law.lean.startswith("law ")]
        self.user_laws = tuple(users)
        self._formulas: dict[str, Poly] = {law.name: algebra.normal(law.formula) for law in users}

    # -------------------------------------------------------------- entry
    def prove(self, facts: Sequence[Term], goal: Term, hints: Hints | None = None) -> Attempt:
        hints = hints or Hints()
        self.deadline = monotonic() + self.seconds
        self._middle = hints.middle
        residue: list[Poly] = []
        try:
            line = Line(start(self.algebra, facts, goal))
            self._equals_for_equals(line)
            residue.extend(self._residue(line, goal))
            for name, args in hints.using:
                self._use(line, Instance(name, tuple(self.algebra.normal(a) for a in args)), keep=True)
            certificate = self._with_cases(line, list(hints.cases))
            if certificate is not None:
                return Attempt(check(self.algebra, facts, goal, self.laws, certificate))
            why = "the search found no way"
        except Stopped:
            why = f"no proof within {self.seconds:g} s"
        except TooLargeToNormalize as e:
            why = str(e)
        except NotProved as e:
            why = f"the kernel refused: {e}"
        return Attempt(None, residue[0] if residue else None, why)

    def _residue(self, line: Line, goal: Term) -> list[Poly]:
        while goal.op == "implies":
            goal = goal.args[1]
        if goal.op not in COMPARISONS:
            return []
        left, right = (self.algebra.normal(a) for a in goal.args)
        return [self.algebra.rewrite(minus(left, right), line.state.images)]

    def _with_cases(self, line: Line, cases: list[Term]) -> Certificate | None:
        """A person's case distinctions come first."""
        while cases:
            condition = self.algebra.rewrite(self.algebra.normal(cases[0]), line.state.images)
            atoms = [a for a in sorted(condition.atoms) if a.idempotent]
            if atoms:
                found = self._split(line, atoms[0], lambda branch: self._with_cases(branch, cases))
                return None if found is None else line.finished(found)
            cases = cases[1:]
        return self._solve(line, 0)

    def _tick(self) -> None:
        if monotonic() > self.deadline or (self.cancelled is not None and self.cancelled()):
            raise Stopped("the time for this obligation is up")

    # -------------------------------------------------------------- one state
    def _solve(self, line: Line, depth: int) -> Certificate | None:
        """A certificate for the state that the line began with."""
        leaf = self._easy(line) or self._rounds(line, self._simplifying_moves)
        if leaf is not None:
            return line.finished(leaf)
        many = sum(1 for a in self._row_splits(line.state)) > 3
        if depth == 0 and many:
            leaf = self._bounds(line.branch(line.state))
            if leaf is not None:
                return line.finished(leaf)
        if depth < DEPTH_LIMIT:
            for atom in self._row_splits(line.state):
                found = self._split(line, atom, lambda b: self._solve(b, depth + 1))
                return None if found is None else line.finished(found)
        leaf = self._unfold(line, depth)
        if leaf is not None:
            return line.finished(leaf)
        leaf = self._bounds(line) or self._last_resorts(line, depth)
        return None if leaf is None else line.finished(leaf)

    def _easy(self, line: Line) -> Leaf | None:
        self._tidy(line)
        self._tick()
        return linear_leaf(line.state, self.deadline)

    def _split(self, line: Line, atom: Atom, solve: Callable[[Line], Certificate | None]) -> Certificate | None:
        """Both branches of a comparison, or of the sign inside a positive part."""
        self._tick()
        if atom.kind == "pos":
            opened = line.branch(line.state)
            opened.move(OpenPositivePart(atom), line.state.open_positive_part(atom))
            inner = self.algebra.rewrite(self.algebra.compare(atom.parts[0], strict=False), line.state.images)
            undecided = [a for a in sorted(inner.atoms) if a.idempotent]
            if not undecided:
                found = solve(opened)
                return None if found is None else opened_finish(opened, found)
            found = self._split(opened, undecided[0], solve)
            return None if found is None else Then(OpenPositivePart(atom), found)
        yes = solve(line.branch(line.state.assume(atom, True)))
        if yes is None:
            return None
        no = solve(line.branch(line.state.assume(atom, False)))
        return None if no is None else Cut(atom, yes, no)

    def _row_splits(self, state: State) -> list[Atom]:
        """Indicators and positive parts that stand in rows, those of the goal (which rests on no fact) first, outermost first."""
        found: dict[Atom, None] = {}
        rows = sorted(state.rows.values(), key=lambda r: bool(r.deps))
        for row in rows:
            for atom in sorted(row.poly.atoms, key=lambda a: (a.kind == "pos", len(a.key))):
                if atom.idempotent or atom.kind == "pos":
                    found[atom] = None
        for row in rows:
            for atom in sorted(row.poly.deep - row.poly.atoms, key=lambda a: len(a.key)):
                if (atom.idempotent or atom.kind == "pos") and not atom.loose and not self._inside_sum(row.poly, atom):
                    found[atom] = None
        goal = [k for k in state.pending if not k.deps]
        for k in goal:
            for atom in sorted(k.poly.atoms, key=lambda a: len(a.key)):
                found[atom] = None
        return [a for a in found if a not in state.images]

    @staticmethod
    def _inside_sum(poly: Poly, atom: Atom) -> bool:
        return any(a.kind == "sum" and atom in a.parts[2].deep for a in poly.deep)

    # -------------------------------------------------------------- equals for equals, lower bounds
    def _tidy(self, line: Line) -> None:
        """Equations put in, integer names shifted to their lower bounds, equations that fail looked at three ways."""
        for _ in range(ROUND_LIMIT):
            self._equals_for_equals(line)
            if not (self._compare_three_ways(line) or self._shift(line) or self._pinned(line)):
                return

    def _equals_for_equals(self, line: Line) -> None:
        for _ in range(ROUND_LIMIT):
            found = self._definition(line.state)
            if found is None:
                return
            line.move(found, line.state.define(found.row, found.atom))

    def _definition(self, state: State) -> Define | None:
        best: tuple[tuple[int, int, int], Define] | None = None
        for number, row in state.rows.items():
            if row.relation != "=" or not row.poly.terms:
                continue
            for atom in row.poly.atoms:
                slope = row.poly.coefficient(atom)
                if slope is None or atom.kind in ("ind", "truth") or atom.loose:
                    continue
                rest = minus(row.poly, scaled(of_atom(atom), slope))
                if atom.integer and not (slope in (1, -1) and rest.is_integer):
                    continue
                rank = (self._definition_rank(atom, rest), len(rest.terms), number)
                if best is None or rank < best[0]:
                    best = (rank, Define(number, atom))
        return None if best is None else best[1]

    def _definition_rank(self, atom: Atom, rest: Poly) -> int:
        """Middle states first, then reals, integers, naturals; other atoms by size, the largest first."""
        if atom.kind == "var":
            if str(atom.data[0]) in self._middle:
                return 0
            if not atom.integer:
                return 1
            return 2 if not atom.nonneg else 3 if rest.constant is None else 1
        return 10_000 - min(len(atom.key), 9_000)

    def _compare_three_ways(self, line: Line) -> bool:
        for atom, image in line.state.images.items():
            if atom.kind == "ind" and atom.data == ("eq",) and image is NOTHING and atom not in line.compared:
                line.compared.add(atom)
                line.move(ThreeWays(atom), line.state.three_ways(atom))
                return True
        return False

    def _shift(self, line: Line) -> bool:
        for number, row in line.state.rows.items():
            if row.relation != ">=" or not row.deps:
                continue
            for atom in row.poly.atoms:
                if atom.kind != "var" or not atom.integer or row.poly.coefficient(atom) != 1:
                    continue
                bound = minus(of_atom(atom), row.poly)
                if not bound.is_integer or (atom.nonneg and not (bound.terms and bound.nonneg)):
                    continue
                line.move(Shift(number, atom), line.state.shift(number, atom))
                return True
        return False

    def _pinned(self, line: Line) -> bool:
        """-x >= 0 for a natural x: x = 0."""
        for row in line.state.rows.values():
            if row.relation != ">=" or len(row.poly.terms) != 1:
                continue
            (mono, c), = row.poly.terms.items()
            if c < 0 and len(mono) == 1 and mono[0][0].nonneg and not mono[0][0].loose:
                equation = self.algebra.equal(of_atom(mono[0][0]))
                atom = next(iter(equation.atoms), None)
                if atom is not None and atom.kind == "ind" and atom not in line.state.images and self._decide(line, atom):
                    return True
        return False

    # -------------------------------------------------------------- moves tried
    def _decide(self, line: Line, atom: Atom) -> bool:
        """Whether the rows prove the indicator; the line then goes on with it."""
        self._tick()
        other = line.branch(line.state.assume(atom, False))
        self._compare_three_ways(other)
        leaf = linear_leaf(other.state, self.deadline)
        if leaf is None:
            return False
        no = other.finished(leaf)
        line.wrappers.append(lambda rest: Cut(atom, rest, no))
        line.state = line.state.assume(atom, True)
        return True

    def _refute(self, line: Line, atom: Atom) -> bool:
        other = line.branch(line.state.assume(atom, True))
        leaf = linear_leaf(other.state, self.deadline)
        if leaf is None:
            return False
        yes = other.finished(leaf)
        line.wrappers.append(lambda rest: Cut(atom, yes, rest))
        line.state = line.state.assume(atom, False)
        return True

    def _use(self, line: Line, move: Move, *, keep: bool = False) -> bool:
        """The move, if its condition can be decided and it says something new; else the line stays as it was."""
        self._tick()
        trial = Line(line.state, list(line.wrappers), set(line.compared), line.unfolded)
        try:
            state = moved(line.state, move, self.laws)
        except NotProved:
            return False
        except TooLargeToNormalize:
            return False
        before = {id(k) for k in line.state.pending}
        trial.move(move, state)
        fresh = [k for k in state.pending if id(k) not in before]
        for k in fresh:
            if not self._decide_condition(trial, k.poly) and not keep:
                return False
        if trial.state.next_row == line.state.next_row and len(trial.state.images) == len(line.state.images) and not keep:
            return False
        line.state, line.wrappers, line.compared = trial.state, trial.wrappers, trial.compared
        return True

    def _decide_condition(self, line: Line, indicator: Poly) -> bool:
        """condition implies formula: decides the atoms of the condition, which stand in every term but the constant one."""
        for _ in range(6):
            current = self.algebra.rewrite(indicator, line.state.images)
            terms = [set(a for a, _ in mono) for mono in current.terms if mono]
            if not terms or not any(line.state.images.get(a) is None for t in terms for a in t):
                return True
            common = set.intersection(*terms)
            condition = [a for a in sorted(common, key=lambda a: len(a.key)) if a.kind in ("ind", "truth")]
            if not condition:
                atoms = {a for t in terms for a in t}
                condition = sorted(atoms, key=lambda a: len(a.key))[:3]
            if not any(a not in line.state.images and (self._decide(line, a) or self._refute(line, a)) for a in condition):
                return False
        return False

    def _rounds(self, line: Line, moves: Callable[[State], Iterable[Move]]) -> Leaf | None:
        """Moves of one kind until none says anything new, then the rows added up."""
        tried: set[Move] = set()
        for _ in range(ROUND_LIMIT):
            used = False
            for move in list(moves(line.state)):
                if move in tried:
                    continue
                tried.add(move)
                if self._use(line, move):
                    used = True
                    self._tidy(line)
                    break
            if not used:
                break
        return linear_leaf(line.state, self.deadline) if tried else None

    def _simplifying_moves(self, state: State) -> Iterable[Move]:
        return instances.simplifying(state, instances.deep_atoms(state), self.functions)

    # -------------------------------------------------------------- definitions
    def _unfold(self, line: Line, depth: int) -> Certificate | None:
        """Definitions whose values stand here already; failing that, all of them, a limited number of times over."""
        kinds = ("call", "truth", "fact", "binom", "sum")
        present = {a for a in instances.deep_atoms(line.state) if a.kind in kinds}
        progress = False
        for move in list(instances.unfolding(sorted(present, key=lambda a: -len(a.key)), self.functions)):
            trial = line.branch(line.state)
            if not self._use(trial, move):
                continue
            self._tidy(trial)
            now = {a for a in instances.deep_atoms(trial.state) if a.kind in kinds}
            if now <= present:
                self._join(line, trial)
                progress = True
        if not progress and line.unfolded < UNFOLD_LIMIT:
            line.unfolded += 1
            for move in list(instances.unfolding(sorted(present, key=lambda a: -len(a.key)), self.functions)):
                progress = self._use(line, move) or progress
        if not progress:
            return None
        again = line.branch(line.state)
        leaf = self._easy(again)
        if leaf is not None:
            return again.finished(leaf)
        return self._solve(line.branch(line.state), depth + 1) if depth < DEPTH_LIMIT else None

    @staticmethod
    def _join(line: Line, trial: Line) -> None:
        line.wrappers.extend(trial.wrappers)
        line.state, line.compared = trial.state, trial.compared

    # -------------------------------------------------------------- bounds, products, last resorts
    def _bounds(self, line: Line) -> Certificate | None:
        begun = len(line.wrappers)
        leaf: Certificate | None = self._invert(line)
        if leaf is None:
            atoms = instances.deep_atoms(line.state)
            for move in self._bounding_moves(line.state, atoms):
                self._use(line, move)
            self._tidy(line)
            self._tick()
            leaf = linear_leaf(line.state, self.deadline) or product_leaf(line.state, self.deadline)
        if leaf is None or begun:
            return leaf
        return leaf

    def _bounding_moves(self, state: State, atoms: list[Atom]) -> list[Move]:
        found = list(instances.matching(self.user_laws, atoms, self._formulas))
        found.extend(instances.bounding(atoms))
        return found

    def _invert(self, line: Line) -> Leaf | None:
        """1/y for y that is known not to be 0: as a power, after y has got a name of its own if it is a sum."""
        for atom in [a for a in instances.deep_atoms(line.state) if a.kind == "inv"]:
            if atom not in {a for a in instances.deep_atoms(line.state)}:
                continue
            y = atom.parts[0]
            zero = self.algebra.rewrite(self.algebra.equal(y), line.state.images)
            for unknown in [a for a in zero.atoms if a.idempotent]:
                positive = self.algebra.rewrite(self.algebra.compare(y, strict=True), line.state.images)
                for sign in [a for a in positive.atoms if a.idempotent]:
                    self._decide(line, sign)
                if unknown not in line.state.images:
                    self._refute(line, unknown)
            if len(y.terms) > 1:
                candidates = [a for a in sorted(y.atoms) if y.coefficient(a) in (1, -1) and a.kind in ("var", "pow")]
                if not candidates:
                    continue
                rename = Rename(y, candidates[-1])
                if not self._use(line, rename):
                    continue
                lone = self.algebra.rewrite(y, line.state.images)
                y = lone
            single = next(iter(y.atoms), None)
            if single is not None and y == of_atom(single):
                self._use(line, Invert(single))
        self._tidy(line)
        return linear_leaf(line.state, self.deadline)

    def _last_resorts(self, line: Line, depth: int) -> Certificate | None:
        """Facts not decided yet, remainders of names under floors, small values of naturals."""
        if depth >= DEPTH_LIMIT:
            return None
        for k in line.state.pending:
            for atom in sorted(k.poly.atoms, key=lambda a: len(a.key)):
                if atom.idempotent and atom not in line.state.images and not atom.loose:
                    return self._split(line, atom, lambda b: self._solve(b, depth + 1))
        found = self._by_remainder(line, depth)
        return found if found is not None else self._by_value(line, depth)

    def _by_remainder(self, line: Line, depth: int) -> Certificate | None:
        for atom in instances.deep_atoms(line.state):
            if atom.kind != "floor":
                continue
            divisor = _divisor(atom)
            for name in sorted(atom.parts[0].atoms):
                if divisor is None or name.kind != "var" or not name.integer or name.loose:
                    continue
                branches: list[Certificate] = []
                for left in range(divisor):
                    self._tick()
                    branch = line.branch(line.state.remainder(name, divisor, left))
                    found = self._solve(branch, depth + 2)
                    if found is None:
                        break
                    branches.append(found)
                else:
                    return ByRemainder(name, tuple(branches))
                return None
        return None

    def _by_value(self, line: Line, depth: int) -> Certificate | None:
        """A natural name of the goal is 0, or at least 1; and so on, a few times."""
        if depth + 2 > DEPTH_LIMIT:
            return None
        names: dict[Atom, None] = {}
        for row in line.state.rows.values():
            if not row.deps:
                for a in sorted(row.poly.deep):
                    if a.kind == "var" and a.nonneg and a.integer and not a.loose:
                        names[a] = None
        for name in list(names)[:2]:
            equation = self.algebra.equal(of_atom(name))
            for atom in equation.atoms:
                if atom.kind == "ind" and atom not in line.state.images:
                    return self._split(line, atom, lambda b: self._solve(b, depth + 2))
        return None


def opened_finish(line: Line, certificate: Certificate) -> Certificate:
    return line.finished(certificate)


def _divisor(atom: Atom) -> int | None:
    """d, where the floor is of integers divided by d."""
    from workbench.algebra.polynomial import denominator

    d = denominator(atom.parts[0])
    return d if 2 <= d <= DIVISOR_LIMIT and scaled(atom.parts[0], d).is_integer else None


def negated(goal: Term) -> Term:
    return app("not", goal)


__all__ = ["SECONDS", "Attempt", "Hints", "Search", "SumLaw", "negated"]
