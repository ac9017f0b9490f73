"""The tree of a sheet, as it was written.

One class a form of the grammar, nothing computed. Spans take no part in comparisons, so that two
texts which say the same have equal trees. Names are not resolved here; `checking` does that.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal, TypeAlias

from workbench.errors import Span

Sort: TypeAlias = Literal["nat", "int", "real", "bool"]
Aspect: TypeAlias = Literal["spent", "net", "peak", "area", "mean"]
Event: TypeAlias = Literal["call", "declare", "assign", "test"]

NOWHERE = Span(0, 0, 1, 1)


def _span() -> Span:
    return field(default=NOWHERE, compare=False, repr=False)


# ------------------------------------------------------------------ formulas and expressions
@dataclass(frozen=True, slots=True)
class Number:
    value: Fraction
    text: str = field(default="", compare=False)  # as it was written: 1_000, 4 KiB
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Truth:
    value: bool
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Name:
    """A name, `result`, or a part of a gauge such as `stack.peak`; primed means the end value."""

    name: str
    primed: bool = False
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Unary:
    op: Literal["-", "not"]
    operand: Expr
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Binary:
    op: Literal["+", "-", "*", "/", "div", "mod", "^", "and", "or", "implies"]
    left: Expr
    right: Expr
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Comparison:
    """A chain: operands[0] ops[0] operands[1] ops[1] …"""

    operands: tuple[Expr, ...]
    ops: tuple[Literal["=", "!=", "<", "<=", ">", ">="], ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Conditional:
    condition: Expr
    then: Expr
    otherwise: Expr
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Application:
    """max, min, abs, floor, ceil, lg, fact, binom, a sheet's function, or (as a value) a routine."""

    name: str
    arguments: tuple[Expr, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Summation:
    body: Expr
    variable: str
    low: Expr
    high: Expr
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Short:
    """A short form: `peak stack <= e`."""

    aspect: Aspect
    resource: str
    op: Literal["=", "<=", ">="]
    bound: Expr
    span: Span = _span()


Expr: TypeAlias = (
    Number | Truth | Name | Unary | Binary | Comparison | Conditional | Application | Summation | Short
)


# ------------------------------------------------------------------ statements
@dataclass(frozen=True, slots=True)
class Skip:
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class AnyValue:
    condition: Expr | None = None
    span: Span = _span()


Value: TypeAlias = Expr | AnyValue  # an Application of a routine's name is a call


@dataclass(frozen=True, slots=True)
class Assign:
    target: str  # a name, or "result"
    value: Value
    span: Span = _span()
    target_span: Span = _span()


@dataclass(frozen=True, slots=True)
class CallStatement:
    routine: str
    arguments: tuple[Expr, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Note:
    name: str
    value: Expr
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class If:
    """branches: (condition, block) of `if` and every `elif`."""

    branches: tuple[tuple[Expr, Block], ...]
    otherwise: Block | None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Either:
    branches: tuple[Block, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class While:
    condition: Expr
    header: Header
    body: Block
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class For:
    variable: str
    low: Expr
    high: Expr
    inclusive: bool  # to: True, below: False
    header: Header
    body: Block
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Var:
    name: str
    sort: Sort
    size: Expr | None = None
    value: Value | None = None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class ResourceStatement:
    """spend, acquire or release an amount."""

    verb: Literal["spend", "acquire", "release"]
    amount: Expr
    resource: str
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class HoldStatement:
    amount: Expr
    gauge: str
    body: Block
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Stage:
    name: str
    header: Header
    body: Block
    span: Span = _span()


Statement: TypeAlias = (
    Skip | Assign | CallStatement | Note | If | Either | While | For | Var | ResourceStatement | HoldStatement | Stage
)
Block: TypeAlias = tuple[Statement, ...]


# ------------------------------------------------------------------ headers
@dataclass(frozen=True, slots=True)
class CasesHint:
    condition: Expr
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class UsingHint:
    law: str
    arguments: tuple[Expr, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Claim:
    """`formula_span` is the stretch of text that an edit of the formula replaces."""

    label: str | None
    formula: Expr
    hints: tuple[CasesHint | UsingHint, ...] = ()
    span: Span = _span()
    formula_span: Span = _span()


@dataclass(frozen=True, slots=True)
class Source:
    path: str
    first_line: int | None = None
    last_line: int | None = None
    digest: str | None = None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Given:
    formula: Expr
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Measure:
    components: tuple[Expr, ...]
    span: Span = _span()


HeaderItem: TypeAlias = Given | Claim | Measure | Source


@dataclass(frozen=True, slots=True)
class Header:
    """Givens, claims, measure and sources in the order in which they stand."""

    items: tuple[HeaderItem, ...] = ()

    @property
    def givens(self) -> tuple[Given, ...]:
        return tuple(i for i in self.items if isinstance(i, Given))

    @property
    def claims(self) -> tuple[Claim, ...]:
        return tuple(i for i in self.items if isinstance(i, Claim))

    @property
    def measure(self) -> Measure | None:
        return next((i for i in self.items if isinstance(i, Measure)), None)


# ------------------------------------------------------------------ items
@dataclass(frozen=True, slots=True)
class Parameter:
    name: str
    sort: Sort
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Use:
    path: str
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Constant:
    name: str
    sort: Sort
    value: Expr | None = None
    condition: Expr | None = None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class State:
    name: str
    sort: Sort
    condition: Expr | None = None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Function:
    name: str
    parameters: tuple[Parameter, ...]
    sort: Sort
    measure: Expr | None
    body: Expr
    given: Expr | None = None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Law:
    name: str
    parameters: tuple[Parameter, ...]
    given: Expr | None
    formula: Expr
    induction_on: str | None = None
    induction_from: int | None = None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Counter:
    name: str
    unit: str | None = None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Gauge:
    name: str
    unit: str | None = None
    clock: str | None = None
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Charge:
    verb: Literal["spend", "hold"]
    amount: Expr
    resource: str
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class On:
    event: Event
    charges: tuple[Charge, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Tariff:
    name: str
    items: tuple[Counter | Gauge | On, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Binding:
    name: str
    value: Expr
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Routine:
    name: str
    parameters: tuple[Parameter, ...]
    result: Sort | None
    bindings: tuple[Binding, ...]  # with frame = 16 + 8*n
    header: Header
    body: Block
    span: Span = _span()
    name_span: Span = _span()


@dataclass(frozen=True, slots=True)
class Budget:
    title: str
    routine: str
    arguments: tuple[Expr, ...]
    aspect: Literal["spent", "peak", "mean"]
    resource: str
    limit: Expr
    bindings: tuple[Binding, ...] = ()
    span: Span = _span()


@dataclass(frozen=True, slots=True)
class Pool:
    title: str
    count: int
    routine: str
    arguments: tuple[Expr, ...]
    room: Expr
    gauge: str
    overflow_below: Fraction | None = None
    bindings: tuple[Binding, ...] = ()
    span: Span = _span()


Item: TypeAlias = Use | Source | Constant | State | Function | Law | Tariff | Routine | Budget | Pool


@dataclass(frozen=True, slots=True)
class Sheet:
    title: str | None
    items: tuple[Item, ...]
    span: Span = _span()
