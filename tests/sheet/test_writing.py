"""What is written reads back to the same tree, and an edit of one formula leaves all else alone."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings

from tests.sheet.trees import CLAIMED, SHEETS
from workbench.sheet import tree
from workbench.sheet.reader import read_formula, read_sheet
from workbench.sheet.writer import replace, write_expr, write_sheet

ACCEPTANCE = Path(__file__).resolve().parents[1] / "acceptance"
LEGAL = sorted([*ACCEPTANCE.glob("sheets/*.ullage"), *ACCEPTANCE.glob("broken/*.ullage")])
QUICK = settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.too_slow])


@QUICK
@given(CLAIMED)
def test_every_formula_reads_back_to_an_equal_tree(expr: tree.Expr) -> None:
    assert read_formula(write_expr(expr)) == expr


@settings(QUICK, max_examples=60)
@given(SHEETS)
def test_every_sheet_reads_back_to_an_equal_tree(sheet: tree.Sheet) -> None:
    reading = read_sheet(write_sheet(sheet), "random.ullage")
    assert reading.problems == ()
    assert reading.sheet == sheet


@pytest.mark.parametrize("path", LEGAL, ids=lambda p: p.stem)
def test_sheets_of_the_acceptance_set_read_back_to_equal_trees(path: Path) -> None:
    reading = read_sheet(path.read_text(encoding="utf-8"), str(path))
    assert reading.problems == ()
    again = read_sheet(write_sheet(reading.sheet), str(path))
    assert again.problems == ()
    assert again.sheet == reading.sheet


@pytest.mark.parametrize(
    "text",
    [
        "2^k - 1", "k*frame", "n*(n - 1)/2", "-a div b", "2^-1", "2^-x^2", "(-a)^2", "-a^2", "a - -b", "a - (b - c)",
        "a^b^c", "(a^b)^c", "a implies b implies c", "(a implies b) implies c", "not a and b", "not (a and b)",
        "0 <= i < n", "(a < b) = (b < c)", "not a = b", "1 + if c then 2 else 3", "(if c then 2 else 3) + 1",
        "if a then if b then 1 else 2 else 3", "k > 0 implies spent time <= 3*k", "not spent time <= 3",
        "peak stack <= if n = 0 then 0 else 32*(lg(n) + 1)", "stack.peak' = max(stack.peak, stack + 2 KiB)",
        "sum(i^2 for i from 1 to n)", "result' = binom(n, k)*fact(n)", "a*(b/c)", "a/b/c", "(a mod b)^2", "2^(k - 1)",
    ],
)  # fmt: skip
def test_formulas_are_written_with_no_more_brackets_than_needed(text: str) -> None:
    assert write_expr(read_formula(text)) == text


@pytest.mark.parametrize(
    ("value", "text"),
    [(Fraction(12), "12"), (Fraction(1, 4), "0.25"), (Fraction(-1, 8), "-0.125"), (Fraction(1, 3), "1/3")],
)
def test_numbers_without_numeral_are_written_exactly(value: Fraction, text: str) -> None:
    assert write_expr(tree.Number(value)) == text
    squared = tree.Binary("^", tree.Number(value), tree.Number(Fraction(2)))
    bare = value > 0 and "/" not in text
    assert write_expr(squared) == (f"{text}^2" if bare else f"({text})^2")


def test_a_sum_of_two_thousand_terms_is_written_and_read() -> None:
    text = " + ".join(f"x{i}" for i in range(2_000))
    assert write_expr(read_formula(text)) == text


def test_an_edit_of_one_formula_keeps_comments_and_all_else() -> None:
    path = ACCEPTANCE / "sheets" / "15-position-fix.ullage"
    text = path.read_text(encoding="utf-8")
    (routine,) = [i for i in read_sheet(text, "").sheet.items if isinstance(i, tree.Routine)]
    claim = next(c for c in routine.header.claims if c.label == "enough")
    edited = replace(text, claim.formula_span, "4 <= result\n  <= 11")
    assert edited == text.replace("enough: 4 <= result <= 12   ", "enough: 4 <= result <= 11   ")
    assert edited != text


def test_the_span_of_a_bracketed_formula_holds_its_brackets() -> None:
    text = "routine f(n: nat)\n  claim (n >= 0)  # always\nis\nend\n"
    (routine,) = read_sheet(text, "").sheet.items
    assert isinstance(routine, tree.Routine)
    span = routine.header.claims[0].formula_span
    assert text[span.start : span.end] == "(n >= 0)"
