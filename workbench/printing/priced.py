"""The priced program as text: what the tariff made of every statement."""

from __future__ import annotations

from collections.abc import Iterator

from workbench.algebra.formulas import show
from workbench.errors import Span
from workbench.program.priced import (
    Acquire,
    Assign,
    Block,
    Call,
    Choose,
    Either,
    Hold,
    If,
    Loop,
    Release,
    Routine,
    Spend,
    Stage,
)


def priced_lines(routine: Routine) -> Iterator[tuple[str, Span]]:
    """Lines of the routine's priced body, each with the place in the sheet that it comes from."""
    parameters = ", ".join(f"{p.name}: {p.sort}" for p in routine.parameters)
    yield f"routine {routine.name}({parameters})", routine.span
    yield from _block(routine.body, 1)


def _block(block: Block, depth: int) -> Iterator[tuple[str, Span]]:
    lead = "  " * depth
    if not block:
        return
    for s in block:
        match s:
            case Assign():
                yield (
                    f"{lead}{'note ' if s.is_note else ''}{s.target} {'=' if s.is_note else ':='} {show(s.value)}",
                    s.span,
                )
            case Choose():
                where = "" if s.condition.op == "true" else f" where {show(s.condition)}"
                yield f"{lead}{s.target} := any{where}", s.span
            case Spend():
                yield f"{lead}spend {show(s.amount)} {s.counter}{_charge(s.is_charge)}", s.span
            case Acquire():
                yield f"{lead}acquire {show(s.amount)} {s.gauge}", s.span
            case Release():
                yield f"{lead}release {show(s.amount)} {s.gauge}", s.span
            case Hold():
                yield f"{lead}hold {show(s.amount)} {s.gauge} do{_charge(s.is_charge)}", s.span
                yield from _block(s.body, depth + 1)
                yield f"{lead}end", s.span
            case If():
                yield f"{lead}if {show(s.condition)} then", s.span
                yield from _block(s.then, depth + 1)
                if s.otherwise:
                    yield f"{lead}else", s.span
                    yield from _block(s.otherwise, depth + 1)
                yield f"{lead}end", s.span
            case Either():
                for i, branch in enumerate(s.branches):
                    yield f"{lead}{'else' if i else 'either'}", s.span
                    yield from _block(branch, depth + 1)
                yield f"{lead}end", s.span
            case Call():
                target = f"{s.target} := " if s.target else ""
                yield f"{lead}{target}{s.routine}({', '.join(map(show, s.arguments))})", s.span
            case Loop():
                yield f"{lead}loop", s.span
                yield from _block(s.test, depth + 1)
                yield f"{lead}while {show(s.condition)} do", s.span
                yield from _block(s.body, depth + 1)
                yield f"{lead}end", s.span
            case Stage():
                yield f"{lead}stage {s.spec.label}", s.span
                yield from _block(s.body, depth + 1)
                yield f"{lead}end", s.span


def _charge(is_charge: bool) -> str:
    return "    # tariff" if is_charge else ""
