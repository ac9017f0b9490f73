"""General libraries and standards as a second opinion: sympy on closed forms, an SMT solver on proofs, IEC 80000-13
on prefixes.
"""

from __future__ import annotations

from pathlib import Path

import pytest
import sympy

from tests.benchmarks.obligations import decided
from tests.benchmarks.smt import ask
from workbench.algebra.normal import Algebra
from workbench.algebra.terms import Term, app, num, summation, var
from workbench.proof.laws import built_in_laws
from workbench.proof.search import Search
from workbench.sheet.reader import read_formula
from workbench.sheet.tree import Comparison, Number

SHEETS = Path(__file__).resolve().parents[1] / "acceptance" / "sheets"
N, I = var("n", "nat"), var("i", "int")  # noqa: E741
LAWS = {law.name: law for law in built_in_laws()}


def as_term(expression: sympy.Expr) -> Term:
    """sympy's answer in n as a term."""
    if expression.is_Symbol:
        return N
    if expression.is_Rational:
        return app("/", num(int(expression.p)), num(int(expression.q)))
    arguments = [as_term(a) for a in expression.args]
    op = {"Add": "+", "Mul": "*", "Pow": "^"}[type(expression).__name__]
    result = arguments[0]
    for a in arguments[1:]:
        result = app(op, result, a)
    return result


@pytest.mark.parametrize("text", ["i", "i**2", "i**3", "i**5", "2**i", "i*2**i", "3*i**2 - i + 7", "i*3**i"])
def test_sums_have_the_closed_form_that_sympy_gives(text: str) -> None:
    """sympy.summation (the library's own algorithms) against what the kernel proves."""
    n, i = sympy.symbols("n i", integer=True, nonnegative=True)
    summand = sympy.sympify(text, locals={"i": i})
    closed = sympy.expand(sympy.summation(summand, (i, 1, n)).simplify())
    body = translated(summand, i)
    goal = app("=", summation(I, num(1), N, body), as_term(closed))
    assert Search(Algebra(), LAWS, {}, seconds=5).prove([], goal).proved is not None, closed
    wrong = app("=", goal.args[0], app("+", goal.args[1], num(1)))
    assert Search(Algebra(), LAWS, {}, seconds=0.5).prove([], wrong).proved is None


def translated(expression: sympy.Expr, i: sympy.Symbol) -> Term:
    from workbench.algebra.terms import substitute

    return substitute(as_term(expression), {N: I})


@pytest.mark.parametrize(
    ("suffix", "power"), [("KiB", 10), ("MiB", 20), ("GiB", 30), ("TiB", 40), ("PiB", 50), ("EiB", 60)]
)
def test_binary_prefixes_are_those_of_the_standard(suffix: str, power: int) -> None:
    """IEC 80000-13:2008, clause 4, prefixes for binary multiples (from memory)."""
    formula = read_formula(f"spare <= 3 {suffix}", in_claim=False)
    assert isinstance(formula, Comparison)
    number = formula.operands[1]
    assert isinstance(number, Number) and number.value == 3 * 2**power


def test_an_smt_solver_finds_no_counterexample_to_what_is_proved() -> None:
    asked = decided([str(SHEETS / f"{n}.ullage") for n in ("02-log-replay", "08-position-report", "26-reading-gate")])
    proved = [a for a in asked if a.verdict == "proved"]
    assert len(proved) > 20
    agreed = 0
    for a in proved:
        facts = [f.formula for f in a.obligation.facts if f.lean is None or f.lean not in a.without]
        answer = ask(facts, a.obligation.goal, a.program.functions, milliseconds=500)
        assert answer.verdict != "refuted", (a.obligation.id, a.obligation.case)
        agreed += answer.verdict == "proved"
    assert agreed > len(proved) // 2
