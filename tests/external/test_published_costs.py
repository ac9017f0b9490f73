"""Published costs of classic routines against runs of the shipped sheets, and against what the tool proves of them.

Each formula below is written here from its source, apart from the sheets; sources are named, all of them from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from pathlib import Path

import pytest

from workbench.algebra.evaluate import Value
from workbench.library.checking import check_sheet
from workbench.library.loading import load
from workbench.program.choosing import RandomChooser
from workbench.program.priced import Program
from workbench.program.pricing import price
from workbench.program.running import Machine
from workbench.shipped import folder

CLASSIC = Path(folder("specs")) / "classic"
Inputs = list[dict[str, Value]]


def program_of(name: str) -> Program:
    loaded = load(str(CLASSIC / f"{name}.ullage"))
    assert loaded.sheet is not None and not loaded.problems
    return price(loaded.path, loaded.sheet, loaded.used)


def spent(name: str, routine: str, counter: str, values: dict[str, Value], seed: int) -> Fraction:
    run = Machine(program_of(name)).run(routine, values, chooser=RandomChooser(seed))
    assert run.complete and not run.faults
    return Fraction(run.spent[counter])


def log2(n: int) -> int:
    return n.bit_length() - 1


def sizes(name: str, *numbers: int) -> Inputs:
    return [{name: n} for n in numbers]


# sheet, routine, counter, inputs, least and greatest cost
PUBLISHED: list[tuple[str, str, str, Inputs, Callable[..., int], Callable[..., int]]] = [
    # Knuth, The Art of Computer Programming, vol. 3, sec. 6.2.1: at most floor(lg n) + 1 probes (from memory).
    (
        "binary-search",
        "find",
        "probes",
        sizes("records", *range(1, 40)),
        lambda records: 1,
        lambda records: log2(records) + 1,
    ),
    # ibid., sec. 6.1: between 1 and n comparisons (from memory).
    (
        "linear-search",
        "find",
        "comparisons",
        sizes("records", *range(1, 30)),
        lambda records: 1,
        lambda records: records,
    ),
    # ibid., sec. 5.2.3, selection: n(n-1)/2 comparisons (from memory).
    (
        "selection-sort",
        "sort",
        "comparisons",
        sizes("n", *range(12)),
        lambda n: n * (n - 1) // 2,
        lambda n: n * (n - 1) // 2,
    ),
    # ibid., sec. 5.2.1, insertion: n - 1 to n(n-1)/2 comparisons (from memory).
    ("insertion-sort", "sort", "comparisons", sizes("n", *range(1, 12)), lambda n: n - 1, lambda n: n * (n - 1) // 2),
    # ibid., sec. 5.2.4, merging 2^k records: k 2^(k-1) to (k-1) 2^k + 1 comparisons (from memory).
    (
        "merge-sort",
        "sort",
        "comparisons",
        sizes("k", *range(1, 7)),
        lambda k: k * 2**k // 2,
        lambda k: (k - 1) * 2**k + 1,
    ),
    # Knuth, vol. 2, sec. 4.6.3, the binary method: floor(lg n) + (ones in n) - 1 products (from memory).
    (
        "repeated-squaring",
        "power",
        "products",
        sizes("n", *range(1, 70)),
        lambda n: log2(n) + bin(n).count("1") - 1,
        lambda n: log2(n) + bin(n).count("1") - 1,
    ),
    # Cormen, Leiserson, Rivest, Stein, Introduction to Algorithms, sec. 17.4: n insertions cost at most 3n (from
    # memory). ("growing-table", "insertAll", "moves", sizes("n", *range(1, 40)), lambda n: n, lambda n: 3 * n),
    # ibid., sec. 17.1: n increments flip at most 2n bits (from memory).
    ("binary-counter", "count", "flips", sizes("n", *range(1, 30)), lambda n: n, lambda n: 2 * n),
    # The definition of the product of matrices: l m n multiplications.
    (
        "matrix-product",
        "product",
        "multiplications",
        [{"rows": 3, "inner": 4, "columns": 5}],
        lambda rows, inner, columns: rows * inner * columns,
        lambda rows, inner, columns: rows * inner * columns,
    ),
    # Graham, Knuth, Patashnik, Concrete Mathematics, sec. 2.2, geometric sum: (b^h - 1)/(b - 1) nodes (from memory).
    (
        "b-ary-tree",
        "visit",
        "visits",
        [{"height": h, "b": b} for h in range(4) for b in (2, 3, 5)],
        lambda height, b: (b**height - 1) // (b - 1),
        lambda height, b: (b**height - 1) // (b - 1),
    ),
    # A full tree of height h has 2^h - 1 nodes (common practice).
    (
        "tree-walk",
        "walk",
        "visits",
        [{"height": h, "frame": 8} for h in range(7)],
        lambda height, frame: 2**height - 1,
        lambda height, frame: 2**height - 1,
    ),
]


@pytest.mark.parametrize(("name", "routine", "counter", "inputs", "least", "greatest"), PUBLISHED)
def test_runs_cost_what_is_published(
    name: str, routine: str, counter: str, inputs: Inputs, least: Callable[..., int], greatest: Callable[..., int]
) -> None:
    for values in inputs:
        for seed in range(4):
            assert least(**values) <= spent(name, routine, counter, values, seed) <= greatest(**values), values


@pytest.mark.parametrize("name", sorted({p[0] for p in PUBLISHED}))
def test_published_costs_are_proved(name: str) -> None:
    assert check_sheet(str(CLASSIC / f"{name}.ullage")).verdict == "verified"
