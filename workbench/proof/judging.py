"""Verdicts on a whole program: which obligations are proved, and what each claim rests on in the end.

A claim is proved when its obligations are, the side conditions of its routine too, and everything that they lean on.
Claims may lean on each other in a circle, since a recursive call or an iteration is nearer to the end of a run; so
the greatest set of claims that hold each other up is looked for: whatever leans on one that fell is tried again
without it, and else falls too.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Literal

from workbench.algebra.evaluate import Definition, TooLarge, Undefined, Value, evaluate
from workbench.algebra.terms import variables
from workbench.program import mathematics, obligations
from workbench.program.obligation import Lean, Obligation
from workbench.program.obligations import Owed
from workbench.program.priced import Claim, Program
from workbench.proof.deciding import Decider, Finding
from workbench.proof.measuring import Choosing
from workbench.proof.report import (
    ClaimReport,
    Decided,
    MathematicsReport,
    RoutineReport,
    SheetReport,
    Verdict,
    Whole,
    Workings,
)
from workbench.proof.search import SECONDS, Stopped
from workbench.proof.trying import Broken, broken_claims

# For claims that the tool made up itself: most are proved at once or never.
CANDIDATE_SECONDS = 1.0

Key = tuple[str, str, str]  # routine, specification, claim label


@dataclass(slots=True)
class _Routine:
    """One routine while it is judged. `side`: its side conditions, measures among them."""

    owed: Owed
    claims: dict[Key, list[Finding]] = field(default_factory=dict)
    side: list[Finding] = field(default_factory=list)
    broken: dict[Key, Broken] = field(default_factory=dict)


def judge(
    program: Program,
    *,
    seconds: float = SECONDS,
    cancelled: Callable[[], bool] | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> SheetReport:
    """The report of the sheet that the program was made from. `progress(done, total)` counts obligations; `seconds`
    is for each.

    Raises Stopped once `cancelled()` says so.
    """
    return _Judge(program, seconds, cancelled, progress).report()


class _Judge:
    def __init__(
        self,
        program: Program,
        seconds: float,
        cancelled: Callable[[], bool] | None,
        progress: Callable[[int, int], None] | None,
    ) -> None:
        self.program = program
        self.cancelled = cancelled
        self.progress = progress
        self.decider = Decider(program, seconds=seconds, cancelled=cancelled)
        self.done = self.total = 0
        self.mathematics: dict[str, MathematicsReport] = {}
        self.routines: dict[str, _Routine] = {}
        self.groups = obligations.recursive_groups(program)

    # -------------------------------------------------------------- the whole
    def report(self) -> SheetReport:
        wanted = self._wanted()
        for name in wanted:
            routine = self.program.routines[name]
            owed = obligations.of_routine(self.program, routine, self.groups[name])
            self.routines[name] = _Routine(owed)
            self.total += len(owed.obligations) + len(owed.sites)
        self._functions()
        self._laws()
        for r in self.routines.values():
            self._decide_routine(r)
        self._measures()
        self._settle()
        own = [r for r in self.routines.values() if r.owed.routine.sheet == self.program.path]
        reports = tuple(self._routine_report(r) for r in own)
        laws_here = {law.name for law in self.program.laws.values() if law.sheet == self.program.path}
        functions_here = {f.name for f in self.program.functions.values() if f.sheet == self.program.path}
        about = tuple(
            m for m in self.mathematics.values() if m.name in (laws_here if m.kind == "law" else functions_here)
        )
        verdicts: list[str] = [r.verdict for r in reports] + [m.verdict for m in about]
        whole: Whole = "refuted" if "refuted" in verdicts else "open" if "open" in verdicts else "verified"
        workings = Workings(self.decider.algebra, self.decider.laws, self.decider.definitions)
        return SheetReport(self.program.path, whole, (), reports, about, self.program, workings)

    def _wanted(self) -> list[str]:
        """The sheet's own routines and all that they call."""
        found = [r.name for r in self.program.routines.values() if r.sheet == self.program.path]
        for name in found:
            found += [c for c in sorted(self.program.routines[name].calls) if c not in found]
        return found

    def _stop_if_cancelled(self) -> None:
        if self.cancelled is not None and self.cancelled():
            raise Stopped("the caller wants no answer any more")

    def _decide(
        self, obligation: Obligation, without: frozenset[Lean] = frozenset(), seconds: float | None = None
    ) -> Finding:
        self._stop_if_cancelled()
        if obligation.claim is not None and self._inferred(
            Lean(obligation.routine, obligation.specification, obligation.claim)
        ):
            seconds = CANDIDATE_SECONDS
        if seconds is not None:
            seconds = min(seconds, self.decider.seconds)
        return self.decider.decide(obligation, without, seconds)

    def _step(self) -> None:
        self.done += 1
        if self.progress is not None:
            self.progress(self.done, max(self.total, self.done))

    # -------------------------------------------------------------- mathematics
    def _functions(self) -> None:
        """In the order in which they are built on each other; none is unfolded before all that it is defined with is
        sound.
        """
        functions = self.program.functions
        groups = mathematics.recursive_groups(functions)
        for name in self._function_order(groups):
            group = sorted(groups[name] | {name})
            if f"function {name}" in self.mathematics:
                continue
            for member in group:
                owed = mathematics.function_obligations(self.program, functions[member], groups[member])
                self.mathematics[f"function {member}"] = self._mathematics_report(
                    member,
                    "function",
                    [self._decide(o) for o in owed],
                    mathematics.used_functions(functions[member], functions),
                )
            fallen = sorted(self._fallen_mathematics() & {f"function {m}" for m in group})
            for member in group:
                if fallen:
                    self._lean_on(f"function {member}", fallen)
                else:
                    self.decider.allow_function(functions[member])

    def _lean_on(self, name: str, fallen: list[str]) -> None:
        report = self.mathematics[name]
        if report.verdict == "proved":
            self.mathematics[name] = replace(report, verdict="open", leans_on=tuple(fallen))

    def _function_order(self, groups: Mapping[str, frozenset[str]]) -> list[str]:
        functions = self.program.functions
        order: list[str] = []
        waiting = list(functions)
        while waiting:
            placed = set(order)
            ready = [
                n
                for n in waiting
                if all(
                    u in placed
                    for m in groups[n] | {n}
                    for u in mathematics.used_functions(functions[m], functions) - groups[n]
                )
            ]
            order += ready
            waiting = [n for n in waiting if n not in ready]
        return order

    def _laws(self) -> None:
        """In the order of the text: a law may use those before it that are proved, so that none holds itself up."""
        for law in self.program.laws.values():
            findings = [self._decide(o) for o in mathematics.law_obligations(self.program, law)]
            report = self._mathematics_report(law.name, "law", findings)
            self.mathematics[f"law {law.name}"] = report
            if report.verdict == "proved":
                self.decider.allow_law(law)

    def _fallen_mathematics(self) -> set[str]:
        return {name for name, m in self.mathematics.items() if m.verdict != "proved"}

    def _mathematics_report(
        self, name: str, kind: Literal["law", "function"], findings: list[Finding], used: Iterable[str] = ()
    ) -> MathematicsReport:
        leans = {lean.specification for f in findings for lean in f.leans} | {f"function {u}" for u in used}
        bad = sorted(leans & (self._fallen_mathematics() - {f"{kind} {name}"}))
        span = (self.program.laws if kind == "law" else self.program.functions)[name].span
        verdict: Verdict = "proved"
        if any(f.witness is not None for f in findings):
            verdict = "refuted"
        elif bad or any(f.proved is None for f in findings):
            verdict = "open"
        decided = tuple(self._decided(f) for f in findings)
        return MathematicsReport(name, kind, verdict, decided, span, tuple(bad))

    # -------------------------------------------------------------- routines
    def _decide_routine(self, r: _Routine) -> None:
        r.broken = broken_claims(self.program, r.owed, self.decider.evaluator)
        gone = frozenset(Lean(*key) for key in r.broken)
        for key in _claim_keys(r.owed):
            r.claims[key] = []
        for o in r.owed.obligations:
            self._step()
            if o.claim is None:
                r.side.append(self._decide(o, gone))
                continue
            key = (o.routine, o.specification, o.claim)
            # Of a claim that a run breaks the other paths may be provable all the same, which is worth a short try.
            seconds = CANDIDATE_SECONDS if key in r.broken else None
            r.claims[key].append(self._decide(o, gone, seconds))

    def _measures(self) -> None:
        owed = {name: r.owed for name, r in self.routines.items()}
        gone = frozenset(Lean(*key) for r in self.routines.values() for key in r.broken)
        choosing = Choosing(self.program, owed, self.groups, lambda o: self._decide(o, gone))
        for name, findings in choosing.findings().items():
            self.routines[name].side += findings
        for r in self.routines.values():
            for _ in r.owed.sites:
                self._step()

    # -------------------------------------------------------------- who holds whom up
    def _settle(self) -> None:
        while True:
            fallen = self._fallen()
            changed = False
            for finding in self._all_findings():
                if finding.proved is None:
                    continue
                bad = frozenset(lean for lean in finding.leans if self._has_fallen(lean, fallen))
                droppable = frozenset(b for b in bad if b.claim)
                if droppable and not droppable <= finding.without:
                    again = self._decide(finding.obligation, finding.without | droppable)
                    if again.proved is not None:
                        finding.proved, finding.facts = again.proved, again.facts
                        finding.leans, finding.without = again.leans, again.without
                        changed = True
            if self._fallen() == fallen and not changed:
                return

    def _fallen(self) -> set[Lean]:
        """The claims and side conditions that do not hold, as things stand: the least set closed under leaning."""
        fallen: set[Lean] = {Lean("", name, "") for name in self._fallen_mathematics()}
        while True:
            before = len(fallen)
            for name, r in self.routines.items():
                # What a routine calls may stand in a loop or stage that owes nothing itself.
                calls = self.program.routines[name].calls
                if not self._own_side_stands(r, fallen) or any(Lean(c, "", "") in fallen for c in calls):
                    fallen.add(Lean(name, "", ""))
                for key, findings in r.claims.items():
                    bad_side = Lean(name, "", "") in fallen
                    if bad_side or key in r.broken or not all(self._stands(f, fallen) for f in findings):
                        fallen.add(Lean(*key))
            if len(fallen) == before:
                return fallen

    def _own_side_stands(self, r: _Routine, fallen: set[Lean]) -> bool:
        return all(self._stands(f, fallen) for f in r.side)

    def _stands(self, finding: Finding, fallen: set[Lean]) -> bool:
        return finding.proved is not None and not any(self._has_fallen(lean, fallen) for lean in finding.leans)

    @staticmethod
    def _has_fallen(lean: Lean, fallen: set[Lean]) -> bool:
        if lean.routine and not lean.claim:
            return Lean(lean.routine, "", "") in fallen  # side conditions of a routine count as a whole
        return lean in fallen

    def _all_findings(self) -> Iterator[Finding]:
        for r in self.routines.values():
            yield from r.side
            for findings in r.claims.values():
                yield from findings

    # -------------------------------------------------------------- reports
    def _routine_report(self, r: _Routine) -> RoutineReport:
        fallen = self._fallen()
        name = r.owed.routine.name
        claims = []
        for label, spec in r.owed.specifications.items():
            for claim in spec.claims:
                key = (name, label, claim.label)
                report = self._claim_report(r, key, claim, fallen)
                if not (claim.inferred and report.verdict != "proved"):
                    claims.append(report)
        side = tuple(self._decided(f, fallen) for f in r.side)
        callee_fallen = any(
            Lean(c, "", "") in fallen
            or any(lean.routine == c and lean.claim for lean in fallen if not self._inferred(lean))
            for c in self._callees(name)
        )
        verdict: Whole = "verified"
        if any(c.verdict == "refuted" for c in claims) or any(d.verdict == "refuted" for d in side):
            verdict = "refuted"
        elif (
            any(c.verdict == "open" for c in claims)
            or any(d.verdict == "open" for d in side)
            or callee_fallen
            or Lean(name, "", "") in fallen
        ):
            verdict = "open"
        return RoutineReport(r.owed.routine, verdict, tuple(claims), side, self._warnings(r))

    def _callees(self, name: str) -> set[str]:
        found: set[str] = set()
        work = list(self.program.routines[name].calls)
        while work:
            c = work.pop()
            if c not in found:
                found.add(c)
                work.extend(self.program.routines[c].calls)
        return found - {name}

    def _inferred(self, lean: Lean) -> bool:
        if not lean.routine:
            return False
        spec = self.routines[lean.routine].owed.specifications.get(lean.specification)
        return spec is not None and any(c.inferred and c.label == lean.claim for c in spec.claims)

    def _claim_report(self, r: _Routine, key: Key, claim: Claim, fallen: set[Lean]) -> ClaimReport:
        findings = r.claims[key]
        decided = [self._decided(f, fallen) for f in findings]
        broken = r.broken.get(key)
        if broken is not None:
            decided = _with_witness(decided, broken, self.decider.definitions)
        verdict: Verdict = "proved"
        if broken is not None or any(d.verdict == "refuted" for d in decided):
            verdict = "refuted"
        elif Lean(*key) in fallen:
            verdict = "open"
        leans: dict[str, None] = {}
        if verdict == "open":
            for f in findings:
                others = sorted(lean for lean in f.leans if self._has_fallen(lean, fallen) and lean != Lean(*key))
                leans.update(dict.fromkeys(map(_lean_words, others)))
                hinted = {f"law {u.law}" for u in f.obligation.using} & self._fallen_mathematics()
                leans.update(dict.fromkeys(sorted(hinted)))
            name = r.owed.routine.name
            for other in sorted({name} | self._callees(name)):
                if not self._own_side_stands(self.routines[other], fallen):
                    leans[f"the side conditions of {other}"] = None
        return ClaimReport(claim, key[1], verdict, tuple(leans), tuple(decided))

    def _bad_leans(self, finding: Finding, fallen: set[Lean]) -> list[str]:
        return sorted(_lean_words(lean) for lean in finding.leans if self._has_fallen(lean, fallen))

    def _decided(self, f: Finding, fallen: set[Lean] | None = None) -> Decided:
        verdict: Verdict = "proved" if f.proved is not None else "refuted" if f.witness is not None else "open"
        why = f.why
        if verdict == "open" and f.weak is not None:
            why = "what is known of the middle states is too weak: it allows values for which the goal fails"
        leans = tuple(self._bad_leans(f, fallen)) if fallen else ()
        return Decided(
            f.obligation,
            verdict,
            f.witness,
            f.residue if verdict != "proved" else None,
            why if verdict == "open" else "",
            f.proved,
            f.facts,
            leans,
            unreachable=f.unreachable,
        )

    def _warnings(self, r: _Routine) -> tuple[str, ...]:
        if not self.decider.contradictory(r.owed.start):
            return ()
        return ("no values satisfy what is given and known at the start: whatever is claimed is true of nothing",)


def _claim_keys(owed: Owed) -> list[Key]:
    return [(owed.routine.name, label, c.label) for label, spec in owed.specifications.items() for c in spec.claims]


def _lean_words(lean: Lean) -> str:
    if not lean.routine:
        return lean.specification
    where = f"{lean.routine}.{lean.specification}" if lean.specification else lean.routine
    return f"{where}.{lean.claim}" if lean.claim else f"the side conditions of {lean.routine}"


def _with_witness(decided: list[Decided], broken: Broken, functions: Mapping[str, Definition]) -> list[Decided]:
    """The run's start values stand at the obligation whose path they take."""
    if any(d.verdict == "refuted" for d in decided):
        return decided
    places = [i for i, d in enumerate(decided) if d.obligation.kind == "claim" and d.verdict != "proved"]
    places = places or [i for i, d in enumerate(decided) if d.obligation.kind == "claim"]
    fitting = [i for i in places if _takes_path(decided[i].obligation, broken.values, functions)]
    for i in (fitting or places)[:1]:
        decided[i] = replace(decided[i], verdict="refuted", witness=broken.values, why="", proof=None)
    return decided


def _takes_path(obligation: Obligation, values: Mapping[str, Value], functions: Mapping[str, Definition]) -> bool:
    """Whether all facts that speak of start values alone hold of the values."""
    for fact in obligation.facts:
        if all(v.name in values for v in variables(fact.formula)):
            try:
                if not evaluate(fact.formula, values, functions):
                    return False
            except (Undefined, TooLarge):
                return False
    return True
