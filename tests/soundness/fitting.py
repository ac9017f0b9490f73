"""Formulas that have given values: exact combinations of a basis, found from runs by Gauss's elimination."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from tests.soundness.meaning import Meaning, NoValue, TooMuch, Value, fixed
from workbench.sheet.reader import read_formula
from workbench.sheet.tree import Expr

# More samples than this tell nothing new; this many more than unknowns make a coincidence unlikely.
SAMPLES = 60
SPARE = 5
# Larger denominators come of coincidence.
DENOMINATOR = 12


@dataclass(frozen=True)
class Sample:
    """Values at a start, with those at the end by primed names."""

    start: Mapping[str, Value]
    both: Mapping[str, Value]


@dataclass(frozen=True)
class Basis:
    """Functions of the names at the start, plain ones first: text and tree."""

    parts: tuple[tuple[str, Expr], ...]
    sizes: tuple[int, ...]

    @staticmethod
    def over(numbers: Sequence[str], flags: Sequence[str], constants: Sequence[str], powers: Sequence[str]) -> Basis:
        """`numbers`: integers; `flags`: booleans; `powers`: naturals that are small."""
        plain = ["1", *numbers, *constants, *(f"(if {b} then 1 else 0)" for b in flags)]
        more = [f"{v}*{c}" for v in numbers for c in constants]
        more += [f"{v}*{w}" for i, v in enumerate(numbers) for w in numbers[i:]]
        more += [f"2^{v}" for v in powers]
        most = [f"2^{v}*{c}" for v in powers for c in constants] + [f"{v}*2^{v}" for v in powers]
        most += [f"{v}*{v}*{c}" for v in numbers for c in constants] + [f"lg({v} + 1)" for v in powers]
        most += [f"({v} div 2)" for v in powers] + [f"(if {b} then {v} else 0)" for b in flags for v in numbers]
        last = [f"{v}^3" for v in numbers] + [f"{v}*2^{v}*{c}" for v in powers for c in constants]
        last += [f"{v}*{w}*{c}" for v in numbers for w in numbers if v < w for c in constants]
        texts = plain + more + most + last
        sizes = (len(plain), len(plain + more), len(plain + more + most), len(texts))
        return Basis(tuple((t, read_formula(t)) for t in texts), sizes)


def fitted(samples: Sequence[tuple[Mapping[str, Value], Value]], basis: Basis, meaning: Meaning) -> str | None:
    """A combination that has all these values; None where there is none, or too few samples to tell."""
    rows: dict[tuple[Fraction, ...], Fraction] = {}
    for start, value in samples[:SAMPLES]:
        try:
            look = fixed({**meaning.constants, **start})
            row = tuple(Fraction(meaning.value(tree, look)) for _, tree in basis.parts)
        except (NoValue, TooMuch, KeyError):
            continue
        if rows.setdefault(row, Fraction(value)) != value:
            return None
    for size in basis.sizes:
        if len(rows) < SPARE + 1:
            return None
        found = _solved([(*row[:size], value) for row, value in rows.items()], size)
        if found is not None:
            return _written(found, [text for text, _ in basis.parts])
    return None


def _solved(rows: list[tuple[Fraction, ...]], size: int) -> list[Fraction] | None:
    table = [list(row) for row in rows]
    pivots: list[int] = []
    for column in range(size):
        place = len(pivots)
        at = next((i for i in range(place, len(table)) if table[i][column]), None)
        if at is None:
            continue
        table[place], table[at] = table[at], table[place]
        head = table[place][column]
        table[place] = [x / head for x in table[place]]
        for i, row in enumerate(table):
            if i != place and row[column]:
                factor = row[column]
                table[i] = [x - factor * y for x, y in zip(row, table[place], strict=True)]
        pivots.append(column)
    if len(table) < len(pivots) + max(SPARE, len(pivots) // 2) or any(row[-1] for row in table[len(pivots) :]):
        return None
    solution = [Fraction(0)] * size
    for i, column in enumerate(pivots):
        solution[column] = table[i][-1]
    return solution if all(c.denominator <= DENOMINATOR for c in solution) else None


def _written(coefficients: Sequence[Fraction], texts: Sequence[str]) -> str:
    parts = []
    for c, text in zip(coefficients, texts, strict=False):
        if c:
            number = f"{c}" if c.denominator == 1 and c > 0 else f"({c})"
            parts.append(number if text == "1" else text if c == 1 else f"{number}*{text}")
    return " + ".join(parts) or "0"
