"""Hunts for a claim that is called proved and that a run breaks.

    python tests/soundness/hunt.py --claims 20000 [--seed 1] [--jobs 2] [--seconds 0.3]

Random sheets are judged; every proved claim of a routine is then compared with runs from random inputs, levels,
peaks, areas and counters at the start, and choices. Prints how many claims were tried, proved, refuted and left
open, and every violation.
"""

from __future__ import annotations

import argparse
import random
import sys
import time
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field
from fractions import Fraction
from itertools import count, repeat
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.soundness.generator import Generator, priced
from workbench.algebra.evaluate import TooLarge, Undefined, Value, compile_term
from workbench.errors import UllageError
from workbench.program.choosing import RandomChooser
from workbench.program.priced import Program
from workbench.program.running import Machine
from workbench.proof.judging import judge
from workbench.proof.report import RoutineReport

RUNS = 60
LEVELS = (0, 1, -1, 7, Fraction(1, 2), Fraction(-9, 4), 100, -30)


@dataclass
class Tally:
    """What came out for some sheets."""

    verdicts: Counter[str] = field(default_factory=Counter)
    runs: int = 0
    violations: list[str] = field(default_factory=list)
    mistaken: list[str] = field(default_factory=list)  # refuted, but no run from the values shown breaks it

    def add(self, other: Tally) -> None:
        self.verdicts += other.verdicts
        self.runs += other.runs
        self.violations += other.violations
        self.mistaken += other.mistaken


def hunt(seed: int, seconds: float) -> Tally:
    """One random sheet, judged and tried."""
    text = Generator(seed).sheet()
    program = priced(text)
    tally = Tally()
    if program is None:
        tally.verdicts["unreadable"] += 1
        return tally
    report = judge(program, seconds=seconds)
    for routine in report.routines:
        for claim in routine.claims:
            if not claim.specification:
                tally.verdicts[claim.verdict] += 1
        _try(program, routine, text, seed, tally)
    return tally


def _try(program: Program, report: RoutineReport, text: str, seed: int, tally: Tally) -> None:
    machine = Machine(program)
    proved = [(c, compile_term(c.claim.formula, machine.evaluator.functions)) for c in report.claims
              if c.verdict == "proved" and not c.specification]  # fmt: skip
    if not proved:
        return
    rng = random.Random(seed)
    name = report.routine.name
    for attempt in range(RUNS):
        values: dict[str, Value] = {
            "n": attempt if attempt < 5 else rng.choice(range(9)),
            "frame": rng.choice((1, 2, 3, 8)),
            "level": rng.choice(range(10)),
        }
        entry = random_entry(program, rng)
        try:
            made = machine.run(
                name, values, entry=entry, chooser=RandomChooser(attempt), event_limit=20_000, trace=True
            )
        except UllageError:
            continue
        if not made.complete:
            continue
        tally.runs += 1
        last = made.activations[-1]
        environment: dict[str, Value] = dict(last.start)
        environment.update({f"{k}'": v for k, v in last.end.items()})
        for claim, holds in proved:
            try:
                fine = bool(holds(environment))
            except (Undefined, TooLarge):
                fine = False
            if not fine:
                told = f"seed {seed}: {name}.{claim.label}: {claim.claim.text}\n  {dict(last.start)}\n{text}"
                tally.violations.append(told)


def random_entry(program: Program, rng: random.Random) -> dict[str, Value]:
    """Levels, peaks, areas and counters at the start: anything, with peaks no lower than levels."""
    entry: dict[str, Value] = {c: rng.choice(LEVELS) for c in program.counters}
    for gauge in program.gauges.values():
        level = rng.choice(LEVELS)
        entry[gauge.name] = level
        entry[f"{gauge.name}.peak"] = level + rng.choice((0, 0, 1, 12, 500))
        if gauge.clock:
            entry[f"{gauge.name}.area"] = rng.choice(LEVELS)
    return entry


def main() -> int:
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--claims", type=int, default=20_000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument("--seconds", type=float, default=0.3)
    options = parser.parse_args()
    total = Tally()
    began = time.monotonic()
    with ProcessPoolExecutor(options.jobs) as pool:
        seeds = count(options.seed * 1_000_000)
        while sum(total.verdicts.values()) < options.claims:
            batch = [next(seeds) for _ in range(100)]
            for tally in pool.map(hunt, batch, repeat(options.seconds), chunksize=5):
                total.add(tally)
            claims = sum(total.verdicts.values())
            print(f"{claims} claims, {total.verdicts['proved']} proved, {len(total.violations)} violated", flush=True)
            if total.violations:
                break
    print(f"\nclaims {sum(total.verdicts.values())}: " + ", ".join(f"{n} {v}" for v, n in total.verdicts.items()))
    print(f"runs {total.runs}, violations {len(total.violations)}, {time.monotonic() - began:.0f} s")
    for told in total.violations[:5]:
        print("\n" + told)
    return 1 if total.violations else 0


if __name__ == "__main__":
    sys.exit(main())
