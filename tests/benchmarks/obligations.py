"""How long obligations take, and how many are proved: the tool and, in the same run, a general SMT solver.

    python tests/benchmarks/obligations.py [--sheets FOLDER …] [--repeat 3] [--slowest 10]

Every obligation that `check` decides on the sheets, with the facts that it may use, timed as `check` decides it
(values that break it are looked for first). The solver gets the same facts and goals, and 2 s for each.
"""

from __future__ import annotations

import argparse
import statistics
import sys
import time
from dataclasses import dataclass
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.benchmarks.smt import ask
from workbench.library.folders import sheets_below
from workbench.library.loading import load
from workbench.program.obligation import Lean, Obligation
from workbench.program.priced import Program
from workbench.program.pricing import price
from workbench.proof import judging
from workbench.proof.deciding import Decider, Finding

HERE = Path(__file__).resolve().parents[1] / "acceptance"


@dataclass
class Asked:
    """One obligation as it was decided, and how long it took, in seconds of processor time."""

    program: Program
    obligation: Obligation
    without: frozenset[Lean]
    seconds: float
    verdict: str


class Recording(Decider):
    """Decides as ever, and notes what it was asked."""

    asked: list[Asked]

    def decide(
        self, obligation: Obligation, without: frozenset[Lean] = frozenset(), seconds: float | None = None
    ) -> Finding:
        began = time.process_time()
        found = super().decide(obligation, without, seconds)
        took = time.process_time() - began
        verdict = "proved" if found.proved else "refuted" if found.witness else "open"
        Recording.asked.append(Asked(self.program, obligation, without, took, verdict))
        return found


def decided(paths: list[str]) -> list[Asked]:
    """Everything that judging the sheets asks for, in order."""
    Recording.asked = []
    setattr(judging, "Decider", Recording)  # noqa: B010
    try:
        for path in paths:
            loaded = load(path)
            if loaded.sheet is not None and not loaded.problems:
                judging.judge(price(loaded.path, loaded.sheet, loaded.used))
    finally:
        setattr(judging, "Decider", Decider)  # noqa: B010
    return Recording.asked


def solved(asked: Asked) -> tuple[str, bool, float]:
    facts = [f.formula for f in asked.obligation.facts if f.lean is None or f.lean not in asked.without]
    began = time.process_time()
    answer = ask(facts, asked.obligation.goal, asked.program.functions)
    return answer.verdict, answer.exact, time.process_time() - began


def row(name: str, verdicts: list[str], seconds: list[float]) -> str:
    counts = [verdicts.count(v) for v in ("proved", "refuted", "open")]
    ordered = sorted(seconds)
    p95 = ordered[min(len(ordered) - 1, int(len(ordered) * 0.95))]
    median = statistics.median(ordered)
    times = f"{1000 * median:12.1f}{1000 * p95:10.1f}{sum(seconds):10.1f}"
    return f"{name:12}{counts[0]:8}{counts[1]:9}{counts[2]:6}{times}"


def main() -> int:
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--sheets", nargs="*", default=[str(HERE / "sheets"), str(HERE / "broken")])
    parser.add_argument("--repeat", type=int, default=3)
    parser.add_argument("--slowest", type=int, default=10)
    options = parser.parse_args()
    paths = sheets_below(options.sheets)
    runs = [decided(paths) for _ in range(options.repeat)]
    first = runs[0]
    ours = [statistics.median(run[i].seconds for run in runs if i < len(run)) for i in range(len(first))]
    verdicts = [a.verdict for a in first]
    theirs = [solved(a) for a in first]
    print(f"{len(paths)} sheets, {len(first)} obligations; processor time, medians of {options.repeat} runs\n")
    print(f"{'':12}{'proved':>8}{'refuted':>9}{'open':>6}{'median ms':>12}{'p95 ms':>10}{'sum s':>10}")
    print(row("ullage", verdicts, ours))
    print(row("SMT solver", [v for v, _, _ in theirs], [t for _, _, t in theirs]))
    ratio = statistics.median(ours) / statistics.median(t for _, _, t in theirs)
    print(f"\nmedian time, ullage : solver = {ratio:.2f}")
    print(f"\nslowest {options.slowest}")
    for seconds, a in sorted(zip(ours, first, strict=True), key=lambda p: -p[0])[: options.slowest]:
        name = Path(a.program.path).name
        print(f"{1000 * seconds:9.0f} ms  {name} {a.obligation.id} {a.obligation.claim or a.obligation.kind}")
    worse = [a for a, (v, _, _) in zip(first, theirs, strict=True) if v == "proved" and a.verdict != "proved"]
    print(f"\nproved by the solver alone: {len(worse)}")
    for a in worse:
        print(f"  {Path(a.program.path).name} {a.obligation.id} {a.obligation.case}")
    refuted = [a for a, (v, exact, _) in zip(first, theirs, strict=True) if v == "refuted" and exact]
    wrong = [a for a in refuted if a.verdict == "proved"]
    for a in wrong:
        print(f"PROVED HERE AND REFUTED BY THE SOLVER: {a.program.path} {a.obligation.id} {a.obligation.goal}")
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
