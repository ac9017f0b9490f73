"""The priced program: every event turned into basic events, every expression into a term.

This is what runs and what is proved; `pricing` makes it from a checked sheet, and nothing else does.

State names are plain strings: a parameter, `var`, sheet state or `result` by its name, a counter `time`,
and for a gauge `stack` its level `stack`, its `stack.peak` and, where it has a clock, `stack.area`.
In claims a primed name (`time'`) is the value at the end; in statements there are only present values.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TypeAlias

from workbench.algebra.evaluate import Definition
from workbench.algebra.terms import Sort, Term
from workbench.errors import Span


@dataclass(frozen=True, slots=True)
class Variable:
    name: str
    sort: Sort


# ------------------------------------------------------------------ statements
@dataclass(frozen=True, slots=True)
class Assign:
    """target := value. `sort` is the target's; a `note` is one with `keeps` False (no range to check)."""

    target: str
    sort: Sort
    value: Term
    span: Span
    is_note: bool = False


@dataclass(frozen=True, slots=True)
class Choose:
    """target := any where condition. In the condition the target's name means the new value.

    An uninitialised declaration is one with `condition` TRUE and `is_declaration`.
    """

    target: str
    sort: Sort
    condition: Term
    span: Span
    is_declaration: bool = False


@dataclass(frozen=True, slots=True)
class Spend:
    counter: str
    amount: Term
    span: Span
    is_charge: bool = False  # comes from the tariff, not from the author


@dataclass(frozen=True, slots=True)
class Acquire:
    gauge: str
    amount: Term
    span: Span


@dataclass(frozen=True, slots=True)
class Release:
    gauge: str
    amount: Term
    span: Span


@dataclass(frozen=True, slots=True)
class Hold:
    """Acquire, body, release of the same amount (its value on entry)."""

    gauge: str
    amount: Term
    body: Block
    span: Span
    is_charge: bool = False


@dataclass(frozen=True, slots=True)
class If:
    """The tests' charges stand before it as Spend statements."""

    condition: Term
    then: Block
    otherwise: Block
    span: Span


@dataclass(frozen=True, slots=True)
class Either:
    branches: tuple[Block, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Call:
    """The call alone: its charges stand round it. `target` gets the result, if there is one."""

    routine: str
    arguments: tuple[Term, ...]
    target: str | None
    target_sort: Sort | None
    span: Span


@dataclass(frozen=True, slots=True)
class Loop:
    """test charges, test, body, again. Of a `for`, the first assignment (with its charge) stands before it,
    the step (with its charge) is the body's end, and `variable` names its variable.

    `scope` lists the program variables visible at its head, `changed` the state names that an iteration may change
    (counters and gauge parts among them). `lower` is a `for`'s first value (known to be <= variable); it uses
    only names that the loop cannot change, as does `upper`, the last value that passes the test.
    """

    spec: Specification
    test: Block
    condition: Term
    body: Block
    scope: tuple[Variable, ...]
    changed: frozenset[str]
    span: Span
    variable: str | None = None
    lower: Term | None = None
    upper: Term | None = None


@dataclass(frozen=True, slots=True)
class Stage:
    """A named block with claims of its own; the program after it knows only those.

    `scope` lists the program variables visible at its start, `declared` those that it adds and that outlive it.
    """

    spec: Specification
    body: Block
    scope: tuple[Variable, ...]
    declared: tuple[Variable, ...]
    changed: frozenset[str]
    span: Span


Statement: TypeAlias = Assign | Choose | Spend | Acquire | Release | Hold | If | Either | Call | Loop | Stage
Block: TypeAlias = tuple[Statement, ...]


# ------------------------------------------------------------------ specifications
@dataclass(frozen=True, slots=True)
class Cases:
    condition: Term
    span: Span


@dataclass(frozen=True, slots=True)
class Using:
    law: str
    arguments: tuple[Term, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Claim:
    """`formula` is the full one (short forms expanded); `text` is what the author wrote, or a short form for an
    inferred one.
    """

    label: str
    formula: Term
    text: str
    hints: tuple[Cases | Using, ...]
    span: Span
    inferred: bool = False


@dataclass(frozen=True, slots=True)
class Specification:
    """What a routine, loop or stage promises. `label` is unique in its routine: "" for the routine itself."""

    label: str
    givens: tuple[Term, ...]
    claims: tuple[Claim, ...]
    measure: tuple[Term, ...] | None
    span: Span


@dataclass(frozen=True, slots=True)
class Routine:
    name: str
    parameters: tuple[Variable, ...]
    result: Sort | None
    spec: Specification
    body: Block
    changed: frozenset[str]  # what a call may change: sheet state, counters, gauge parts
    calls: frozenset[str]
    sheet: str  # path of the sheet that defines it
    span: Span


# ------------------------------------------------------------------ the whole
@dataclass(frozen=True, slots=True)
class Constant:
    """`value` None: open, any value of its sort that meets the condition."""

    name: str
    sort: Sort
    value: Term | None
    condition: Term | None
    span: Span
    sheet: str


@dataclass(frozen=True, slots=True)
class StateVariable:
    name: str
    sort: Sort
    condition: Term | None
    span: Span
    sheet: str


@dataclass(frozen=True, slots=True)
class Gauge:
    name: str
    clock: str | None
    unit: str | None


@dataclass(frozen=True, slots=True)
class Counter:
    name: str
    unit: str | None


@dataclass(frozen=True, slots=True)
class Function:
    """`given` restricts the arguments that it is defined for; `measure` falls at each recursive use."""

    name: str
    parameters: tuple[Variable, ...]
    sort: Sort
    measure: Term | None
    body: Term
    given: Term | None
    span: Span
    sheet: str


@dataclass(frozen=True, slots=True)
class Law:
    name: str
    parameters: tuple[Variable, ...]
    given: Term | None
    formula: Term
    induction_on: str | None
    induction_from: int
    span: Span
    sheet: str


@dataclass(frozen=True, slots=True)
class Program:
    """Everything a sheet says and uses, ready to run and to prove. Dictionaries keep the order of the text."""

    path: str
    constants: dict[str, Constant]
    states: dict[str, StateVariable]
    counters: dict[str, Counter]
    gauges: dict[str, Gauge]
    functions: dict[str, Function]
    laws: dict[str, Law]
    routines: dict[str, Routine]
    variables: dict[str, Sort] = field(default_factory=dict)

    def definitions(self) -> dict[str, Definition]:
        """The functions as evaluation takes them."""
        return {
            f.name: Definition(tuple((p.name, p.sort) for p in f.parameters), f.sort, f.body, f.given)
            for f in self.functions.values()
        }

    def clocked(self, counter: str) -> tuple[Gauge, ...]:
        """Gauges whose area is taken over this counter."""
        return tuple(g for g in self.gauges.values() if g.clock == counter)
