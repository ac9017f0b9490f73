"""Small sheets for the tests of this room: read, checked and priced."""

from __future__ import annotations

from workbench.library.loading import load_text
from workbench.printing.priced import priced_lines
from workbench.program.priced import Block, Hold, Loop, Program, Routine, Stage, Statement
from workbench.program.pricing import price

TARIFF = """
constant frame: nat
state level: int
tariff all
  counter time
  counter writes
  gauge stack over time
  gauge heap
  on call: hold frame stack, spend 2 time
  on declare: hold 4*size stack, spend 3 time
  on assign: spend 1 time
  on test: spend 7 time
end
routine leaf(k: nat) is skip end
routine value(k: nat) -> nat with frame = 8 + k is result := k end
"""
RESOURCES = "tariff plain\n  counter time\n  gauge stack over time\n  gauge heap\nend\n"


def program(text: str) -> Program:
    loaded = load_text("priced.ullage", text)
    assert loaded.sheet is not None and not loaded.problems, loaded.problems
    return price(loaded.path, loaded.sheet, loaded.used)


def body(text: str, before: str = TARIFF) -> Block:
    """The priced body of a routine r(n: nat, q: real, b: bool) with these statements."""
    return program(f"{before}\nroutine r(n: nat, q: real, b: bool) is\n{text}\nend\n").routines["r"].body


def lines(text: str, before: str = TARIFF) -> list[str]:
    """The same as text."""
    return printed(program(f"{before}\nroutine r(n: nat, q: real, b: bool) is\n{text}\nend\n").routines["r"])


def printed(routine: Routine) -> list[str]:
    """The priced body as text, without marks."""
    return [line.removesuffix("    # tariff").removeprefix("  ") for line, _ in priced_lines(routine)][1:]


def first(block: Block, kind: type) -> Statement:
    """The first statement of the kind, wherever it stands."""
    work = list(block)
    while work:
        s = work.pop(0)
        if isinstance(s, kind):
            return s  # type: ignore[no-any-return]
        if isinstance(s, (Hold, Loop, Stage)):
            work = [*s.body, *work]
    raise AssertionError(f"no {kind.__name__}")
