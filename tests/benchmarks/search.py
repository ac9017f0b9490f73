"""How long the table of obligations takes: python tests/benchmarks/search.py [WORD …]

Each obligation in an algebra of its own, once, in milliseconds; with words, only those whose names hold one of them.
"""

from __future__ import annotations

import statistics
import sys
from pathlib import Path
from time import perf_counter

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.proof.obligations import Obligation, false_ones, functions, laws, true_ones
from workbench.algebra.normal import Algebra
from workbench.proof.search import Search

SLOW = 60.0  # milliseconds from which an obligation is named


def measured(o: Obligation) -> tuple[bool, float, str]:
    """Whether it is proved, the time, and why not."""
    search = Search(Algebra(), laws(), functions())
    began = perf_counter()
    found = search.prove(o.facts, o.goal)
    return found.proved is not None, (perf_counter() - began) * 1000, found.why


def report(title: str, table: list[Obligation], expected: bool) -> None:
    times = []
    count = 0
    for o in table:
        proved, took, why = measured(o)
        times.append(took)
        count += proved
        if proved != expected:
            print(f"  {o.name}: {'proved' if proved else why} ({took:.0f} ms)")
        elif took > SLOW and expected:
            print(f"  {o.name}: {took:.0f} ms")
    if times:
        times.sort()
        at = times[min(len(times) - 1, int(len(times) * 0.95))]
        print(f"{title}: {count} of {len(times)} proved, median {statistics.median(times):.1f}, p95 {at:.1f} ms")


def main() -> None:
    words = sys.argv[1:]
    for title, table, expected in (("true", true_ones(), True), ("false", false_ones(), False)):
        report(title, [o for o in table if not words or any(w in o.name for w in words)], expected)


if __name__ == "__main__":
    main()
