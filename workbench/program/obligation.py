"""Obligations: closed formulas, facts => goal, that a claim or a side condition needs on one path.

Data only; `obligations` makes them from a priced program, the proof room decides them.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Literal, TypeAlias

from workbench.algebra.terms import Term
from workbench.errors import Span
from workbench.program.priced import Using

Kind: TypeAlias = Literal["claim", "given", "measure", "range", "domain", "choice"]


@dataclass(frozen=True, slots=True, order=True)
class Lean:
    """What a fact rests on: a claim of a specification, or with `claim` "" its side conditions.

    `specification` is "" for a routine itself, else the label of its loop or stage.
    Laws and functions are leaned on through ("", "law NAME", "") and ("", "function NAME", "").
    """

    routine: str
    specification: str
    claim: str


@dataclass(frozen=True, slots=True)
class Fact:
    """`origin` in words, as it is shown: "given", "the test fails", "claim elapsed of pack"."""

    formula: Term
    origin: str
    lean: Lean | None = None
    span: Span | None = None


@dataclass(frozen=True, slots=True)
class Step:
    """One line of the program part of a derivation: the substitution law applied to one statement, last one first.

    `before` and `after` are the formula on either side; `span` is the statement used; `words` names the move.
    """

    move: str
    words: str
    before: Term
    after: Term
    span: Span | None


def _none(needed: Callable[[int], bool]) -> tuple[Step, ...]:
    return ()


@dataclass(frozen=True, slots=True)
class Obligation:
    """facts => goal over start values and fresh names.

    `routine` and `specification` say whose it is, `claim` which claim's (None: the specification's side condition).
    `case` is the path in words. `middle` holds the names of middle states that a call, loop or stage left: values for
    them are no refutation. `leans` is what the path rests on whatever facts the proof uses (side conditions of what
    it calls). `derive` gives the program part of the derivation, computed when it is looked at.
    """

    id: str
    kind: Kind
    routine: str
    specification: str
    claim: str | None
    case: str
    facts: tuple[Fact, ...]
    goal: Term
    span: Span
    path: tuple[Span, ...] = ()
    middle: frozenset[str] = frozenset()
    leans: frozenset[Lean] = frozenset()
    cases: tuple[Term, ...] = ()
    using: tuple[Using, ...] = ()
    derive: Callable[[Callable[[int], bool]], tuple[Step, ...]] = field(default=_none, compare=False, repr=False)
