"""Exact contradictions from linear inequalities: which rows, times what, add up to a false constant.

The search asks this room for a certificate and the kernel checks what comes out, so nothing here is trusted;
still every combination is checked exactly before it is returned. Monomials are independent unknowns here:
whoever wants products of facts multiplies them out into rows first. No floating point, no sympy.

Method: Farkas' lemma by the simplex method for feasibility, on rows of integers. Every inequality gets a slack
variable that must not be negative; a dictionary writes the basic variables as combinations of the others, all of
which are held at 0. A basic variable below 0 is exchanged with one that can lift it; where none can, its line of
the dictionary is the contradiction. After the dictionary form of V. Chvátal, "Linear Programming" (1983), and the
pivoting of B. Dutertre and L. de Moura, "A fast linear-arithmetic solver for DPLL(T)" (2006), both from memory;
strict rows carry an infinitesimal, as in the latter.
"""

from __future__ import annotations

from collections.abc import Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import gcd, lcm
from time import thread_time
from typing import Any, Final, TypeAlias

from workbench.errors import UllageError

CONSTANT: Final = ()
"""The monomial that stands for 1."""

PIVOTS: Final = 1_500
"""Exchanges before giving up. The benchmark's systems of 300 rows need below 100, dense ones of 60 rows below 300."""

EAGER_PIVOTS: Final = 100
"""Exchanges that are chosen for speed; from then on by the smallest index, which cannot cycle (Bland's rule)."""


class LimitReached(UllageError):
    """The pivots or the time ran out before there was an answer."""


class WrongCombination(UllageError):
    """A combination was found that is no contradiction: a mistake in this module, never the caller's."""


@dataclass(frozen=True, slots=True)
class Row:
    """Σ coefficient·monomial >= 0; > 0 where strict; = 0 where equation. The constant stands under CONSTANT."""

    coefficients: Mapping[Any, int | Fraction]  # the monomials: anything hashable
    strict: bool = False
    equation: bool = False


Combination: TypeAlias = list[tuple[int, Fraction]]
Line: TypeAlias = dict[int, int]

# Columns of a dictionary line. From 0: monomials, which are free, then slacks, which are not negative. Below -2:
# slacks of equations, which are 0 for good and stay in the line only for their multipliers.
_UNIT = -1
_INFINITESIMAL = -2
_FIRST_FIXED = -3

_SHORT = 4  # a line that bounds one monomial: it, the slack, and perhaps a constant and an infinitesimal


def find_combination(
    rows: Sequence[Row], *, pivots: int = PIVOTS, deadline: float | None = None, raise_limits: bool = False
) -> Combination | None:
    """Multipliers that turn the rows into a contradiction, or None.

    Returns pairs (index of a row, multiplier), by index, with Σ multiplier·row ≡ c for a constant c < 0, or c = 0
    where a strict row takes part. Multipliers are whole numbers without a common divisor; those of inequalities are
    positive. No proper part of the rows returned has a contradiction (where there are no equations among them).

    None means that some values satisfy all rows, or that a limit was reached: more than `pivots` exchanges, or
    `time.thread_time()` past `deadline`. With `raise_limits` the latter raises LimitReached instead.
    """
    try:
        found = _Dictionary(rows, pivots, deadline).contradiction()
    except LimitReached:
        if raise_limits:
            raise
        return None
    if found is None:
        return None
    combination = _tidy(found)
    if not is_contradiction(rows, combination):
        raise WrongCombination(f"no contradiction: {combination} of {rows}")
    return combination


def is_contradiction(rows: Sequence[Row], combination: Iterable[tuple[int, int | Fraction]]) -> bool:
    """Whether Σ multiplier·row is a constant that the rows forbid. Exact, and independent of how it was found."""
    total: dict[Hashable, int | Fraction] = {}
    strict = False
    for index, given in combination:
        row = rows[index]
        multiplier = given.numerator if given.denominator == 1 else given  # whole numbers add up much faster
        if not row.equation:
            if multiplier < 0:
                return False
            strict = strict or (row.strict and multiplier > 0)
        for monomial, coefficient in row.coefficients.items():
            total[monomial] = total.get(monomial, 0) + multiplier * coefficient
    constant = total.pop(CONSTANT, 0)
    return not any(total.values()) and (constant < 0 or (strict and constant == 0))


def _tidy(found: Mapping[int, int]) -> Combination:
    """By index, without a common divisor."""
    divisor = gcd(*found.values())
    return [(index, Fraction(multiplier // divisor)) for index, multiplier in sorted(found.items())]


class _Dictionary:
    """The rows as lines over non-basic columns.

    A line {column: c} of basic column k reads 0 = Σ c·column + line[_UNIT] + line[_INFINITESIMAL]·ε, with
    line[k] < 0. Basic monomials are free and never leave again, so that their lines are thrown away.
    """

    def __init__(self, rows: Sequence[Row], pivots: int, deadline: float | None) -> None:
        self.pivots_left = pivots
        self.deadline = deadline
        self.eager_left = EAGER_PIVOTS
        self.lines: dict[int, Line] = {}
        self.scales: dict[int, tuple[int, int]] = {}  # column of a slack: (row, what the row was multiplied by)
        self.equations: list[int] = []
        self._fill(rows, _useful(rows))

    def _fill(self, rows: Sequence[Row], useful: Sequence[int]) -> None:
        columns: dict[Hashable, int] = {CONSTANT: _UNIT}
        for index in useful:
            for monomial in rows[index].coefficients:
                if monomial not in columns:
                    columns[monomial] = len(columns) - 1
        self.slacks_from = slacks_from = len(columns) - 1
        remaining = []
        for index in useful:
            monomial = _plain_sign(rows[index])
            if monomial is not None and columns[monomial] < slacks_from:
                columns[monomial] = slacks_from + index  # the row says monomial >= 0, so the monomial is its own slack
                self.scales[slacks_from + index] = index, 1
            else:
                remaining.append(index)
        lone: dict[int, int] = {}  # monomial: slack of a row that bounds it and nothing else
        for index in remaining:
            column = self._add(index, rows[index], columns)
            line = self.lines[column]
            if len(line) <= _SHORT and column >= 0:
                bounded = [c for c in line if 0 <= c < slacks_from]
                if len(bounded) == 1:
                    lone.setdefault(bounded[0], column)
        for monomial_column, column in lone.items():
            if monomial_column in self.lines[column]:
                self._exchange(column, monomial_column)

    def _add(self, index: int, row: Row, columns: Mapping[Hashable, int]) -> int:
        """Puts the row in as a line; its slack's column."""
        scale = 1
        for coefficient in row.coefficients.values():
            if type(coefficient) is not int:
                scale = lcm(scale, coefficient.denominator)
        line: Line = {}
        for monomial, coefficient in row.coefficients.items():
            if coefficient:
                line[columns[monomial]] = coefficient.numerator * (scale // coefficient.denominator)
        if row.equation:
            column = _FIRST_FIXED - index
            self.equations.append(column)
        else:
            column = self.slacks_from + index
            if row.strict:
                line[_INFINITESIMAL] = -1
        line[column] = -1
        self.scales[column] = index, scale
        self.lines[column] = line
        return column

    # -------------------------------------------------------------- the method
    def contradiction(self) -> dict[int, int] | None:
        """Multiplier by row index, or None where the rows can be satisfied. Raises LimitReached."""
        for column in self.equations:
            found = self._settle_equation(column)
            if found:
                return found
        while True:
            choice = self._choose()
            if choice is None:
                return None
            column, entering = choice
            if entering is None:
                return self._multipliers(self.lines[column], 1)
            self._exchange(column, entering)

    def _settle_equation(self, column: int) -> dict[int, int] | None:
        line = self.lines[column]
        free = [c for c in line if 0 <= c < self.slacks_from]
        if free:
            self._exchange(column, min(free, key=self._length_of_column))
            return None
        slacks = [c for c in line if c >= 0]
        value = line.get(_UNIT, 0) or line.get(_INFINITESIMAL, 0)
        sign = -1 if value > 0 else 1
        if value and all(sign * line[c] < 0 for c in slacks):
            return self._multipliers(line, sign)
        if slacks:
            self._exchange(column, min(slacks, key=self._length_of_column))
        else:
            del self.lines[column]
        return None

    def _choose(self) -> tuple[int, int | None] | None:
        """A basic slack below 0 and what to exchange it with (None: nothing, a contradiction); None: all are well."""
        slacks_from = self.slacks_from
        best: tuple[int, list[int]] | None = None
        eager = self.eager_left > 0
        for column, line in self.lines.items():
            value = line.get(_UNIT, 0)
            if value > 0 or (value == 0 and line.get(_INFINITESIMAL, 0) >= 0):
                continue
            candidates = [c for c, a in line.items() if c >= 0 and (a > 0 or c < slacks_from)]
            if not candidates:
                return column, None
            if best is None or (len(candidates) < len(best[1]) if eager else column < best[0]):
                best = column, candidates
        if best is None:
            return None
        column, candidates = best
        if not eager:
            return column, min(candidates)
        self.eager_left -= 1
        free = [c for c in candidates if c < slacks_from]
        return column, min(free or candidates, key=self._length_of_column)

    def _length_of_column(self, column: int) -> int:
        return sum(column in line for line in self.lines.values())

    def _exchange(self, leaving: int, entering: int) -> None:
        self._count()
        line = self.lines.pop(leaving)
        if line[entering] > 0:
            line = {c: -a for c, a in line.items()}
        down = -line[entering]
        for column, other in self.lines.items():
            up = other.get(entering)
            if up:
                self.lines[column] = _sum(other, down, line, up, entering)
        if entering >= self.slacks_from:
            self.lines[entering] = line

    def _count(self) -> None:
        self.pivots_left -= 1
        if self.pivots_left < 0:
            raise LimitReached("no answer within the pivots allowed")
        if self.deadline is not None and thread_time() > self.deadline:
            raise LimitReached("no answer within the time allowed")

    def _multipliers(self, line: Line, sign: int) -> dict[int, int]:
        found: dict[int, int] = {}
        for column, coefficient in line.items():
            if column in self.scales:
                index, scale = self.scales[column]
                found[index] = -sign * coefficient * scale
        return found


def _plain_sign(row: Row) -> Hashable | None:
    """The monomial, where the row says `monomial >= 0` and nothing else."""
    if len(row.coefficients) != 1 or row.strict or row.equation:
        return None
    ((monomial, coefficient),) = row.coefficients.items()
    return monomial if coefficient == 1 and monomial != CONSTANT else None


def _sum(one: Line, times: int, other: Line, also_times: int, cancelled: int) -> Line:
    """times·one + also_times·other without what cancels, its common divisor taken out."""
    common = gcd(times, also_times)
    times //= common
    also_times //= common
    result = dict(one) if times == 1 else {c: a * times for c, a in one.items()}
    for column, coefficient in other.items():
        total = result.get(column, 0) + coefficient * also_times
        if total:
            result[column] = total
        else:
            del result[column]
    divisor = gcd(*result.values())
    return result if divisor == 1 else {c: a // divisor for c, a in result.items()}


def _useful(rows: Sequence[Row]) -> list[int]:
    """Rows that can take part in a contradiction.

    A monomial that only one row has, or that all rows have with one sign, cannot be cancelled: its rows drop out,
    which may leave others in the same position.
    """
    rising: dict[Hashable, set[int]] = {}  # monomial: rows of which a positive multiple can raise its coefficient
    falling: dict[Hashable, set[int]] = {}
    for index, row in enumerate(rows):
        for monomial, coefficient in row.coefficients.items():
            if coefficient and monomial != CONSTANT:
                if coefficient > 0 or row.equation:
                    rising.setdefault(monomial, set()).add(index)
                if coefficient < 0 or row.equation:
                    falling.setdefault(monomial, set()).add(index)
    waiting = list(rising.keys() ^ falling.keys())
    waiting.extend(m for row in rows if row.equation for m in row.coefficients)
    dropped: set[int] = set()
    nowhere: set[int] = set()
    while waiting:
        monomial = waiting.pop()
        up, down = rising.get(monomial, nowhere), falling.get(monomial, nowhere)
        if up and down and (len(up) > 1 or up != down):
            continue
        for index in up | down:
            dropped.add(index)
            for other in rows[index].coefficients:
                rising.get(other, nowhere).discard(index)
                falling.get(other, nowhere).discard(index)
                waiting.append(other)
    return [index for index in range(len(rows)) if index not in dropped] if dropped else list(range(len(rows)))
