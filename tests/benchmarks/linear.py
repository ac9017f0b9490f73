"""How long exact contradictions take: python tests/benchmarks/linear.py

Systems like the search's: facts over a few names, products of pairs of facts as rows, and a negated goal that
either is refuted by a planted sum of them or only just is not. Times are the best of three, in milliseconds.
"""

from __future__ import annotations

import random
import statistics
import sys
from pathlib import Path
from time import perf_counter

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from workbench.proof.linear import LimitReached, Row, find_combination

Polynomial = dict[tuple[str, ...], int]
SEEDS = 20
# (names, facts, products kept): rows come out at about the products kept
SIZES = ((3, 4, 9), (4, 6, 14), (5, 8, 19), (8, 14, 60), (12, 23, 300), (14, 25, 300))


def product(p: Polynomial, q: Polynomial) -> Polynomial:
    result: Polynomial = {}
    for m, a in p.items():
        for n, b in q.items():
            key = tuple(sorted(m + n))
            result[key] = result.get(key, 0) + a * b
    return {m: c for m, c in result.items() if c}


def facts(rng: random.Random, names: list[str], count: int) -> list[Polynomial]:
    point = {v: i * 7 % 5 + 1 for i, v in enumerate(names)}  # satisfies them all
    found: list[Polynomial] = [{(v,): 1} for v in names]
    while len(found) < count:
        chosen = rng.sample(names, rng.choice([1, 2, 2, 3]))
        fact: Polynomial = {(v,): rng.choice([-3, -2, -1, -1, 1, 1, 1, 2]) for v in chosen}
        fact[()] = rng.randint(-2, 4)
        if sum(c * (point[m[0]] if m else 1) for m, c in fact.items()) >= 0:
            found.append(fact)
    return found


def system(seed: int, size: tuple[int, int, int], constant: int, support: int) -> list[Row]:
    """The goal is `constant` less a sum of `support` rows: contradictory for certain where the constant is negative."""
    rng = random.Random(seed)
    names, count, kept = size
    known = facts(rng, [f"v{i}" for i in range(names)], count)
    products = known + [product(p, q) for i, p in enumerate(known) for q in known[: i + 1]]
    rng.shuffle(products)
    products = products[:kept]
    goal: Polynomial = {(): constant}
    for chosen in rng.sample(products, min(support, kept)):
        factor = rng.randint(1, 4)
        for monomial, coefficient in chosen.items():
            goal[monomial] = goal.get(monomial, 0) - factor * coefficient
    return [Row(p) for p in [*products, goal]]


def measure(size: tuple[int, int, int], constant: int, support: int) -> str:
    times, answers = [], {"contradiction": 0, "none": 0, "limit": 0}
    rows: list[Row] = []
    for seed in range(SEEDS):
        rows = system(seed, size, constant, support)
        best = float("inf")
        answer = ""
        for _ in range(3):
            start = perf_counter()
            try:
                answer = "none" if find_combination(rows, raise_limits=True) is None else "contradiction"
            except LimitReached:
                answer = "limit"
            best = min(best, perf_counter() - start)
        answers[answer] += 1
        times.append(best * 1000)
    monomials = len({m for row in rows for m in row.coefficients})
    said = ", ".join(f"{count} {answer}" for answer, count in answers.items() if count)
    figures = f"{statistics.median(times):8.2f} {max(times):8.2f}"
    return f"{len(rows):5} {monomials:9} {support:8} {constant:8}   {figures}   {said}"


def main() -> None:
    print(" rows monomials  support constant     median      max   answers")
    for size in SIZES:
        for constant in (-1, 1):
            for support in (3, 12):
                print(measure(size, constant, support), flush=True)


if __name__ == "__main__":
    main()
