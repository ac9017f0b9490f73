"""What was found out about a sheet: data that commands, print and screens show. `judging` makes it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal, TypeAlias

from workbench.algebra.evaluate import Definition
from workbench.algebra.normal import Algebra
from workbench.algebra.terms import Rational, Term
from workbench.errors import Problem, Span
from workbench.program.obligation import Obligation
from workbench.program.priced import Claim, Program, Routine
from workbench.proof.kernel import Proved
from workbench.proof.laws import Law

Verdict: TypeAlias = Literal["proved", "open", "refuted"]
Whole: TypeAlias = Literal["verified", "open", "refuted"]


@dataclass(frozen=True, slots=True)
class Decided:
    """An obligation and what became of it.

    `witness`: values (by name; state names at the start of the specification, open constants too) that break it.
    `residue`: what the two sides of an open goal differ by, left minus right. `why`: a sentence for an open one.
    `facts`: which of the obligation's facts stand as the proof's first, second, … fact.
    `leans_on`: what a proved one rests on that is not proved itself, in words; the obligation's verdict stays `proved`.
    `unreachable`: proved because no values take this path.
    """

    obligation: Obligation
    verdict: Verdict
    witness: Mapping[str, Rational | bool] | None = None
    residue: Term | None = None
    why: str = ""
    proof: Proved | None = None
    facts: tuple[int, ...] = ()
    leans_on: tuple[str, ...] = ()
    unreachable: bool = False

    @property
    def used(self) -> frozenset[int] | None:
        """Indices of the obligation's facts that its proof rests on; None where there is no proof."""
        return None if self.proof is None else frozenset(self.facts[i] for i in self.proof.used)


@dataclass(frozen=True, slots=True)
class ClaimReport:
    """`specification` is "" for the routine's own claims, else the label of the loop or stage that has it."""

    claim: Claim
    specification: str
    verdict: Verdict
    leans_on: tuple[str, ...]
    obligations: tuple[Decided, ...]

    @property
    def label(self) -> str:
        return f"{self.specification}.{self.claim.label}" if self.specification else self.claim.label


@dataclass(frozen=True, slots=True)
class RoutineReport:
    """`obligations`: those of no single claim. `warnings`: a given that no values satisfy, and the like."""

    routine: Routine
    verdict: Whole
    claims: tuple[ClaimReport, ...]
    obligations: tuple[Decided, ...]
    warnings: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class MathematicsReport:
    """A law or a function of the sheet."""

    name: str
    kind: Literal["law", "function"]
    verdict: Verdict
    obligations: tuple[Decided, ...]
    span: Span
    leans_on: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Workings:
    """What the proofs of a sheet were found in, and are replayed in: certificates mean nothing elsewhere."""

    algebra: Algebra
    laws: Mapping[str, Law]
    functions: Mapping[str, Definition]


@dataclass(frozen=True, slots=True)
class SheetReport:
    """One sheet: `problems` where it is unreadable, else the reports of what it defines itself (not of what it
    uses).
    """

    path: str
    verdict: Literal["verified", "open", "refuted", "unreadable"]
    problems: tuple[Problem, ...] = ()
    routines: tuple[RoutineReport, ...] = ()
    mathematics: tuple[MathematicsReport, ...] = ()
    program: Program | None = None
    workings: Workings | None = None
