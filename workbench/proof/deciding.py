"""One obligation at a time: values that break it are looked for first, then a proof; each attempt with the facts
that may be used.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace

from workbench.algebra.denormal import term_of
from workbench.algebra.evaluate import Evaluator
from workbench.algebra.normal import Algebra
from workbench.algebra.terms import FALSE, Rational, Term, app, subterms, var
from workbench.program.mathematics import law_condition
from workbench.program.obligation import Lean, Obligation
from workbench.program.priced import Function, Program
from workbench.program.priced import Law as UserLaw
from workbench.proof import laws as lawbook
from workbench.proof.kernel import Proved
from workbench.proof.laws import Law
from workbench.proof.refuting import QUICK_TRIES, THOROUGH_TRIES, tried
from workbench.proof.relevance import relevant
from workbench.proof.sampling import Sampler
from workbench.proof.search import Attempt, Hints, Search

# Whether a path is ever taken is worth this long, no more: the answer changes no verdict.
CONTRADICTION_SECONDS = 0.1
# A first attempt from few facts is quick or of no use.
FEW_SECONDS = 0.25


@dataclass(slots=True)
class Finding:
    """What is known of an obligation so far. `leans`: what its proof rests on. `weak`: values that the facts allow
    although they break the goal, middle states among them: no search will succeed.
    """

    obligation: Obligation
    proved: Proved | None = None
    facts: tuple[int, ...] = ()  # which of the obligation's facts the proof was found from
    leans: frozenset[Lean] = frozenset()
    witness: Mapping[str, Rational | bool] | None = None
    weak: Mapping[str, Rational | bool] | None = None
    residue: Term | None = None
    why: str = ""
    without: frozenset[Lean] = field(default_factory=frozenset)
    unreachable: bool = False


class Decider:
    """Decides the obligations of one program: its algebra, its usable laws and functions, its limits."""

    def __init__(self, program: Program, *, seconds: float, cancelled: Callable[[], bool] | None = None) -> None:
        self.algebra = Algebra()
        self.program = program
        self.seconds = seconds
        self.cancelled = cancelled
        self.definitions = program.definitions()
        self.evaluator = Evaluator(self.definitions)
        self.laws: dict[str, Law] = {law.name: law for law in lawbook.built_in_laws()}
        self.functions: dict[str, Law] = {}
        self._contradictory: dict[tuple[Term, ...], bool] = {}

    # -------------------------------------------------------------- what may be used
    def allow_function(self, function: Function) -> None:
        law = function_law(function)
        self.functions[function.name] = law
        self.laws[function.name] = law

    def allow_law(self, law: UserLaw) -> None:
        self.laws[law.name] = user_law(law)

    # -------------------------------------------------------------- one obligation
    def decide(
        self, obligation: Obligation, without: frozenset[Lean] = frozenset(), seconds: float | None = None
    ) -> Finding:
        """Refuted, proved or neither, with no use of facts that lean on anything in `without`."""
        finding = Finding(obligation, without=without)
        usable = [i for i, f in enumerate(obligation.facts) if f.lean is None or f.lean not in without]
        narrowed = obligation
        if len(usable) < len(obligation.facts):
            narrowed = replace(obligation, facts=tuple(obligation.facts[i] for i in usable))
        reached = self._refute(finding, narrowed, QUICK_TRIES, seed=1)
        if finding.witness is not None or finding.weak is not None:
            self._residue(finding, narrowed)
            return finding
        if self._prove(finding, usable, self.seconds if seconds is None else seconds):
            finding.unreachable = not reached and self.contradictory(tuple(f.formula for f in narrowed.facts))
            return finding
        self._refute(finding, narrowed, THOROUGH_TRIES, seed=2)
        return finding

    def contradictory(self, facts: tuple[Term, ...]) -> bool:
        """Whether no values satisfy the facts, as far as a short search can tell."""
        if facts not in self._contradictory:
            sampler = Sampler(facts, [], self.evaluator)
            reached = next(iter(sampler.draw(QUICK_TRIES)), None) is not None
            search = Search(
                self.algebra, self.laws, self.functions, seconds=CONTRADICTION_SECONDS, cancelled=self.cancelled
            )
            self._contradictory[facts] = not reached and search.prove(facts, FALSE).proved is not None
        return self._contradictory[facts]

    def _refute(self, finding: Finding, narrowed: Obligation, tries: int, seed: int) -> bool:
        """Notes values that break the obligation; returns whether any values reach it."""
        trial = tried(narrowed, self.evaluator, tries, seed)
        if trial.broken is None or narrowed.kind == "choice":
            return trial.reached  # that a few candidates fail does not mean that no value is there
        if narrowed.middle or len(narrowed.facts) < len(finding.obligation.facts):
            finding.weak = trial.broken
        else:
            finding.witness = trial.broken
        return True

    def _residue(self, finding: Finding, narrowed: Obligation) -> None:
        search = Search(self.algebra, self.laws, self.functions, seconds=FEW_SECONDS, cancelled=self.cancelled)
        residue = search.residue([f.formula for f in narrowed.facts], narrowed.goal, narrowed.middle)
        if residue is not None:
            finding.residue = term_of(residue)

    def _prove(self, finding: Finding, usable: Sequence[int], seconds: float) -> bool:
        """Looks for a proof, first from the facts that are likely to matter; notes it, or why there is none."""
        facts = finding.obligation.facts
        few = [usable[i] for i in relevant([facts[i].formula for i in usable], finding.obligation.goal)]
        tries = [(few, min(seconds, FEW_SECONDS))] if len(few) < len(usable) else []
        for chosen, limit in (*tries, (usable, seconds)):
            attempt = self._attempt(finding.obligation, chosen, limit)
            if attempt.proved is not None:
                finding.proved, finding.facts = attempt.proved, tuple(chosen)
                finding.leans = self._leans(finding)
                return True
        finding.why = attempt.why
        finding.residue = None if attempt.residue is None else term_of(attempt.residue)
        return False

    def _attempt(self, obligation: Obligation, chosen: Sequence[int], seconds: float) -> Attempt:
        search = Search(self.algebra, self.laws, self.functions, seconds=seconds, cancelled=self.cancelled)
        hints = Hints(
            cases=obligation.cases,
            using=tuple((u.law, u.arguments) for u in obligation.using if u.law in self.laws),
            middle=obligation.middle,
        )
        return search.prove([obligation.facts[i].formula for i in chosen], obligation.goal, hints)

    def _leans(self, finding: Finding) -> frozenset[Lean]:
        """What the proof rests on: claims behind the facts that it used, side conditions on the path, laws and
        functions.
        """
        proved, obligation = finding.proved, finding.obligation
        assert proved is not None
        used = [obligation.facts[finding.facts[i]] for i in sorted(proved.used)]
        found = {f.lean for f in used if f.lean is not None} | set(obligation.leans)
        found |= {Lean("", name, "") for name in proved.laws}
        found |= self._functions_in([*(f.formula for f in used), obligation.goal], proved.laws)
        return frozenset(found)

    def _functions_in(self, terms: Iterable[Term], laws: Iterable[str]) -> set[Lean]:
        """Functions whose values occur: that they are of their types is used without a step that says so."""
        names = {s.name for t in terms for s in subterms(t) if s.op == "call"}
        for name in laws:
            law = self.laws.get(name.partition(" ")[2])
            if law is not None:
                names |= {s.name for t in (law.given, law.formula) for s in subterms(t) if s.op == "call"}
        return {Lean("", f"function {n}", "") for n in names}


def function_law(f: Function) -> Law:
    """f(parameters) = body, where its arguments are of their types and its given holds."""
    parameters = tuple(var(p.name, p.sort) for p in f.parameters)
    value = Term("call", parameters, f.name, sort=f.sort)
    formula = app("iff" if f.sort == "bool" else "=", value, f.body)
    given = f.given if f.given is not None else Term("true", sort="bool")
    return Law(f.name, parameters, given, formula, "the sheet", f"function {f.name}")


def user_law(law: UserLaw) -> Law:
    parameters = tuple(var(p.name, p.sort) for p in law.parameters)
    return Law(law.name, parameters, law_condition(law), law.formula, "the sheet", f"law {law.name}")
