"""One table of obligations, true and false, of the kinds that sheets give, and the functions and laws they may use."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path

from workbench.algebra.terms import TRUE, Sort, Term, app, call, var
from workbench.program.translate import Vocabulary, translate
from workbench.proof.laws import Law, built_in_laws
from workbench.sheet.reader import read_formula

DATA = Path(__file__).parent / "obligations_of_sheets"


@dataclass(frozen=True, slots=True)
class Obligation:
    name: str
    facts: tuple[Term, ...]
    goal: Term


# name, parameters, type, body
FUNCTIONS: tuple[tuple[str, str, Sort, str], ...] = (
    ("moves", "n: nat", "nat", "if n = 0 then 0 else 2*moves(n - 1) + 1"),
    ("fib", "n: nat", "nat", "if n <= 1 then n else fib(n - 1) + fib(n - 2)"),
    ("halvings", "n: nat", "nat", "if n <= 1 then 0 else halvings(n div 2) + 1"),
    ("merges", "n: nat", "nat", "if n <= 1 then 0 else merges(n div 2) + merges(n - n div 2) + n"),
    ("tri", "n: nat", "nat", "if n = 0 then 0 else tri(n - 1) + n"),
    ("even", "n: nat", "bool", "if n = 0 then true else not even(n - 1)"),
    ("price", "x: real", "real", "if x < 10 then 3*x else 2*x + 10"),
    ("steps", "b: nat, k: nat", "nat", "if k = 0 then 1 else b*steps(b, k - 1) + 1"),
)

# name, parameters, given, formula
LAWS: tuple[tuple[str, str, str, str], ...] = (
    ("moves closed", "n: nat", "true", "moves(n) = 2^n - 1"),
    ("fib grows", "n: nat", "n >= 1", "fib(n) >= 1"),
    ("tri closed", "n: nat", "true", "tri(n) = n*(n + 1)/2"),
    ("split", "a: nat, b: nat", "a >= 1 and b >= 1", "a*lg(a) + b*lg(b) + a + b <= (a + b)*(lg(a + b) + 1)"),
    ("halvings small", "n: nat", "n >= 1", "halvings(n) <= lg(n)"),
)

# ------------------------------------------------------------------ reading
def term(text: str, sorts: dict[str, Sort]) -> Term:
    def look(name: str, primed: bool) -> Term:
        return var(name + "'" * primed, sorts[name])

    return translate(read_formula(text), look, Vocabulary({name: sort for name, _, sort, _ in FUNCTIONS}))


def sorts_of(text: str) -> dict[str, Sort]:
    """`n m: nat; x: real`, or with commas: name and type by name."""
    found: dict[str, Sort] = {}
    for group in text.replace(",", ";").split(";"):
        names, _, sort = group.rpartition(":")
        for name in names.split():
            found[name] = sort.strip()  # type: ignore[assignment]
    return found


def _read(table: str) -> Iterator[Obligation]:
    for line in (DATA / table).read_text(encoding="utf-8").splitlines():
        if line.startswith("#"):
            continue
        name, types, facts, goal = line.split(" | ")
        sorts = sorts_of(types)
        given = [f for f in facts.split("; ") if f.strip() != "true"]
        yield Obligation(name, tuple(term(f, sorts) for f in given), term(goal, sorts))


@cache
def true_ones() -> tuple[Obligation, ...]:
    return tuple(_read("true.txt"))


@cache
def false_ones() -> tuple[Obligation, ...]:
    return tuple(_read("false.txt"))


@cache
def functions() -> dict[str, Law]:
    """Their defining equations, as laws."""
    found = {}
    for name, parameters, sort, body in FUNCTIONS:
        sorts = sorts_of(parameters)
        names = tuple(var(n, s) for n, s in sorts.items())
        equation = app("iff" if sort == "bool" else "=", call(name, sort, names), term(body, sorts))
        found[name] = Law(name, names, TRUE, equation, "a sheet", f"function {name}")
    return found


@cache
def laws() -> dict[str, Law]:
    """All laws that the search may use, those of the sheet and of its functions included."""
    found = {law.name: law for law in built_in_laws()} | functions()
    for name, parameters, given, formula in LAWS:
        sorts = sorts_of(parameters)
        names = tuple(var(n, s) for n, s in sorts.items())
        found[name] = Law(name, names, term(given, sorts), term(formula, sorts), "a sheet", f"law {name}")
    return found
