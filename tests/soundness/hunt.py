"""Hunts for a claim that is called proved and that a run breaks.

    python tests/soundness/hunt.py --claims 20000 [--seed 1] [--jobs 2] [--seconds 0.3] [--minutes 5]

Random sheets are judged. Runs of an interpreter of its own, from any inputs, levels, peaks, areas, counters and
choices, are then held against every claim that is proved, of routines, loops and stages; none may break a claim, nor
anything that is an obligation on the way. Where chance has no say the workbench's own runs must come to the same.
Refuted claims are tried from the values shown. Prints how far it is, a table, and everything that should not be.
"""

from __future__ import annotations

import argparse
import random
import sys
import time
import traceback
from collections import Counter
from collections.abc import Mapping
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field
from itertools import count, repeat
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.soundness.generator import (
    may_start,
    random_constants,
    random_entry,
    random_value,
    readable,
    sheet_text,
)
from tests.soundness.interpreter import Activation, Interpreter, Outcome
from tests.soundness.meaning import NoValue, TooMuch, Value, fixed
from workbench.algebra.evaluate import TooLarge, Undefined, compile_term
from workbench.errors import UllageError
from workbench.program.priced import Program
from workbench.program.pricing import price
from workbench.program.running import Machine
from workbench.proof.judging import judge
from workbench.proof.report import ClaimReport, SheetReport
from workbench.sheet import tree

RUNS = 60
REFUTING_RUNS = 60
EVENTS = 6_000
BATCH = 40


@dataclass
class Tally:
    """What came out for some sheets."""

    verdicts: Counter[str] = field(default_factory=Counter)
    runs: int = 0
    checks: int = 0
    violations: list[str] = field(default_factory=list)
    crashes: list[str] = field(default_factory=list)
    differences: list[str] = field(default_factory=list)  # between the interpreter and the workbench's runs
    mistaken: list[str] = field(default_factory=list)  # refuted, but no run from the values shown breaks it
    endless: list[str] = field(default_factory=list)  # of a proved routine, but this run did not end

    def add(self, other: Tally) -> None:
        self.verdicts += other.verdicts
        self.runs += other.runs
        self.checks += other.checks
        for name in ("violations", "crashes", "differences", "mistaken", "endless"):
            getattr(self, name).extend(getattr(other, name))


def hunt(seed: int, seconds: float) -> Tally:
    """One random sheet, judged and tried."""
    return tried(sheet_text(seed), seed, seconds)


def tried(text: str, seed: int, seconds: float) -> Tally:
    """One sheet, judged and tried."""
    tally = Tally()
    sheet = readable(text)
    if sheet is None:
        tally.verdicts["unreadable"] += 1
        return tally
    try:
        program = price("random.ullage", sheet, {})
        report = judge(program, seconds=seconds)
        _Trial(sheet, program, report, text, seed, tally).run()
    except Exception:  # whatever it is, it is to be told
        tally.crashes.append(f"seed {seed}:\n{traceback.format_exc(limit=-8)}\n{text}")
    return tally


class _Trial:
    """The proved and refuted claims of one sheet, against runs."""

    def __init__(
        self, sheet: tree.Sheet, program: Program, report: SheetReport, text: str, seed: int, tally: Tally
    ) -> None:
        self.sheet, self.program, self.text, self.seed, self.tally = sheet, program, text, seed, tally
        self.report = report
        self.machine = Machine(program)
        self.rng = random.Random(seed)
        self.formulas = dict(_written_claims(sheet))
        self.proved: dict[int, list[ClaimReport]] = {}  # by the line where the specification begins
        self.told: set[tuple[str, str]] = set()
        for routine in report.routines:
            spans = {label: spec for label, spec in _lines(routine.routine.name, sheet).items()}
            for claim in routine.claims:
                tally.verdicts[claim.verdict + (" inner" if claim.specification else "")] += 1
                if claim.verdict == "proved":
                    line = spans.get(claim.claim.span.start) if not claim.claim.inferred else claim.claim.span.line
                    if line is not None:
                        self.proved.setdefault(line, []).append(claim)

    def run(self) -> None:
        for routine in (i for i in self.sheet.items if isinstance(i, tree.Routine)):
            own = next(r for r in self.report.routines if r.routine.name == routine.name)
            sure = own.verdict == "verified" or any(c.verdict == "proved" for c in own.claims)
            if sure or self.proved:
                for attempt in range(RUNS):
                    self._try(routine, attempt, sure)
            for claim in own.claims:
                if claim.verdict == "refuted" and not claim.specification:
                    self._refute(routine, claim)

    # -------------------------------------------------------------- proved claims
    def _try(self, routine: tree.Routine, attempt: int, sure: bool) -> None:
        rng = self.rng
        try:
            interpreter = Interpreter(self.sheet, random_constants(self.sheet, rng))
        except (NoValue, KeyError):
            return  # no value for a constant was found
        entry = random_entry(interpreter, rng, from_zero=attempt % 4 == 0)
        arguments: dict[str, Value] = {p.name: random_value(p.sort, rng) for p in routine.parameters}
        first = routine.parameters[0].name if routine.parameters else ""
        if attempt < 4 and first:
            arguments[first] = attempt
        if entry is None or not may_start(interpreter, routine, {**self._zero(interpreter), **entry, **arguments}):
            return
        made = interpreter.run(routine.name, arguments, entry, rng.randrange(10**9), EVENTS)
        self.tally.runs += 1
        where = f"{routine.name} with {_shown(interpreter.meaning.constants)} from {_shown(made.start)}"
        if sure and made.fault:
            self._tell(self.tally.violations, routine.name + " fault", f"{where}: {made.fault}")
        if sure and made.too_much and all(abs(int(a)) <= 3 for a in arguments.values()):
            self._tell(self.tally.endless, routine.name, where)
        for activation in made.activations:
            for claim in self.proved.get(activation.line, ()):
                self._check(claim, activation, interpreter, where)
        if made.ended and not made.chose:
            self._compare(routine, arguments, interpreter, made, where)

    @staticmethod
    def _zero(interpreter: Interpreter) -> dict[str, Value]:
        zero: dict[str, Value] = dict.fromkeys(interpreter.counters, 0)
        for g in interpreter.gauges:
            zero.update({g: 0, f"{g}.peak": 0, f"{g}.area": 0})
        return zero

    def _check(self, claim: ClaimReport, a: Activation, interpreter: Interpreter, where: str) -> None:
        self.tally.checks += 1
        try:
            fine = _holds(self, claim, a, interpreter)
        except NoValue as why:
            self._tell(self.tally.violations, claim.label, f"{where}: {claim.claim.text} has no value: {why}")
            return
        except TooMuch:
            return
        if not fine:
            told = f"{where}: {claim.label}: {claim.claim.text}\n  start {_shown(a.start)}\n  end {_shown(a.end)}"
            self._tell(self.tally.violations, claim.label, told)

    def _tell(self, where: list[str], what: str, told: str) -> None:
        if (what, str(id(where))) not in self.told:
            self.told.add((what, str(id(where))))
            where.append(f"seed {self.seed}: {told}\n{self.text}")

    def _compare(
        self, routine: tree.Routine, arguments: Mapping[str, Value], interpreter: Interpreter, made: Outcome, where: str
    ) -> None:
        values = {**interpreter.meaning.constants, **made.start, **arguments}
        entry = {n: v for n, v in made.start.items() if n not in arguments}
        try:
            other = self.machine.run(routine.name, values, entry=entry, event_limit=10 * EVENTS)
        except UllageError:
            return
        same = other.complete and not other.faults and all(other.end[n] == v for n, v in made.end.items())
        if not same or (routine.result and other.result != made.result):
            told = f"{where}: {_shown(made.end)} {made.result}, not {_shown(other.end)} {other.faults} {other.complete}"
            self._tell(self.tally.differences, routine.name, told)

    # -------------------------------------------------------------- refuted claims
    def _refute(self, routine: tree.Routine, claim: ClaimReport) -> None:
        for decided in claim.obligations:
            if decided.verdict != "refuted" or decided.witness is None:
                continue
            constants = {c: v for c, v in decided.witness.items() if c in self.program.constants}
            spared = random_constants(self.sheet, self.rng)
            try:
                interpreter = Interpreter(self.sheet, {**spared, **constants})
            except (NoValue, KeyError):
                return
            for _ in range(REFUTING_RUNS):
                verdict = self._breaks(routine, claim, interpreter, dict(decided.witness))
                if verdict is None or verdict:
                    return
            told = f"{routine.name}.{claim.label}: {claim.claim.text} is said to fail for {dict(decided.witness)}"
            self._tell(self.tally.mistaken, claim.label, told)

    def _breaks(
        self, routine: tree.Routine, claim: ClaimReport, interpreter: Interpreter, witness: dict[str, Value]
    ) -> bool | None:
        """Whether a run from there breaks the claim; None where it comes to no end, or breaks something else first."""
        entry = random_entry(interpreter, self.rng, from_zero=True) or {}
        for g in interpreter.gauges:
            witness.setdefault(f"{g}.peak", witness.get(g, 0))
            witness.setdefault(g, witness[f"{g}.peak"])
        entry.update({n: v for n, v in witness.items() if n not in interpreter.meaning.constants})
        arguments = {p.name: witness.get(p.name, random_value(p.sort, self.rng)) for p in routine.parameters}
        if not may_start(interpreter, routine, {**self._zero(interpreter), **entry, **arguments}):
            return False
        made = interpreter.run(routine.name, arguments, entry, self.rng.randrange(10**9), EVENTS)
        if not made.ended:
            return None
        try:
            return not _holds(self, claim, made.activations[-1], interpreter)
        except NoValue:
            return True
        except TooMuch:
            return None


def _holds(trial: _Trial, claim: ClaimReport, a: Activation, interpreter: Interpreter) -> bool:
    """The claim on one start and end. Written ones by their trees, inferred ones by their terms."""
    table: dict[str, Value] = {**interpreter.meaning.constants, **a.start, **{f"{k}'": v for k, v in a.end.items()}}
    if claim.claim.inferred:
        try:
            return bool(compile_term(claim.claim.formula, trial.machine.evaluator.functions)(table))
        except (Undefined, TooLarge) as why:
            raise TooMuch from why
    formula = trial.formulas[claim.claim.span.start]
    if not claim.specification and "result" in a.end:
        table["result"] = a.end["result"]
    return interpreter.meaning.holds(formula, fixed({**table, **a.bound}))


def _written_claims(sheet: tree.Sheet) -> list[tuple[int, tree.Expr]]:
    return [(c.span.start, c.formula) for _, _, h in _headers(sheet) for c in h.claims]


def _lines(routine: str, sheet: tree.Sheet) -> dict[int, int]:
    """By the start of each claim the line of the statement that it belongs to."""
    return {c.span.start: line for r, line, h in _headers(sheet) if r.name == routine for c in h.claims}


def _headers(sheet: tree.Sheet) -> list[tuple[tree.Routine, int, tree.Header]]:
    found = []
    for routine in (i for i in sheet.items if isinstance(i, tree.Routine)):
        found.append((routine, routine.span.line, routine.header))
        work = list(routine.body)
        while work:
            s = work.pop()
            match s:
                case tree.While() | tree.For() | tree.Stage():
                    found.append((routine, s.span.line, s.header))
                    work += s.body
                case tree.If():
                    work += [t for _, b in s.branches for t in b] + list(s.otherwise or ())
                case tree.Either():
                    work += [t for b in s.branches for t in b]
                case tree.HoldStatement():
                    work += s.body
    return found


def _shown(values: Mapping[str, Value]) -> str:
    return "{" + ", ".join(f"{k}: {v}" for k, v in values.items()) + "}"


def main() -> int:
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--claims", type=int, default=20_000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument("--seconds", type=float, default=0.3)
    parser.add_argument("--minutes", type=float, default=0, help="stop after so long; 0: when the claims are done")
    options = parser.parse_args()
    total, sheets, began = Tally(), 0, time.monotonic()
    with ProcessPoolExecutor(options.jobs) as pool:
        seeds = count(options.seed * 1_000_000)
        while sum(total.verdicts.values()) < options.claims:
            batch = [next(seeds) for _ in range(BATCH)]
            sheets += BATCH
            for tally in pool.map(hunt, batch, repeat(options.seconds)):
                total.add(tally)
            print(_line(total, sheets, began), flush=True)
            if options.minutes and time.monotonic() - began > 60 * options.minutes:
                break
    for name in ("violations", "crashes", "differences", "mistaken", "endless"):
        for told in getattr(total, name)[:12]:
            print(f"\n=== {name}: {told}")
    print("\n" + _line(total, sheets, began))
    print(", ".join(f"{v}: {n}" for v, n in sorted(total.verdicts.items())))
    return 1 if total.violations or total.crashes or total.differences else 0


def _line(total: Tally, sheets: int, began: float) -> str:
    proved = total.verdicts["proved"] + total.verdicts["proved inner"]
    return (
        f"{time.monotonic() - began:.0f} s: {sheets} sheets, {sum(total.verdicts.values())} claims, {proved} proved, "
        f"{total.runs} runs, {total.checks} checks, {len(total.violations)} violations, {len(total.crashes)} crashes, "
        f"{len(total.differences)} differences, {len(total.mistaken)} mistaken, {len(total.endless)} endless"
    )


if __name__ == "__main__":
    sys.exit(main())
