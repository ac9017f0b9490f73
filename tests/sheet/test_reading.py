"""What the reader makes of good text, and what it says of bad text: where, what, how to mend it."""

from __future__ import annotations

import time
from fractions import Fraction
from pathlib import Path

import pytest

from workbench.errors import SheetError
from workbench.sheet import tree
from workbench.sheet.reader import decode_sheet, read_formula, read_sheet
from workbench.sheet.words import LARGEST_SHEET, RESERVED
from workbench.sheet.writer import write_expr

ACCEPTANCE = Path(__file__).resolve().parents[1] / "acceptance"


def routine(body: str, header: str = "") -> str:
    return f"routine f(n: nat)\n{header}is\n{body}\nend\n"


def statements(body: str) -> tree.Block:
    reading = read_sheet(routine(body), "")
    assert reading.problems == ()
    (item,) = reading.sheet.items
    assert isinstance(item, tree.Routine)
    return item.body


# ------------------------------------------------------------------ good text
def test_the_acceptance_sheets_read_within_a_second_in_all() -> None:
    start = time.process_time()
    for path in ACCEPTANCE.glob("*/*.ullage"):
        text, _ = decode_sheet(path.read_bytes(), str(path))
        if text is not None:
            read_sheet(text, str(path))
    assert time.process_time() - start < 1


@pytest.mark.parametrize(
    ("text", "brackets"),
    [
        ("2^k^2", "(2^(k^2))"), ("-2^k", "(-(2^k))"), ("2^-k^2", "(2^(-(k^2)))"), ("-a div b", "((-a)div b)"),
        ("a - b - c", "((a - b) - c)"), ("a - -b", "(a - (-b))"), ("a*b + c/d", "((a*b) + (c/d))"),
        ("not a = b and c", "((not(a = b))and c)"), ("a or b and c", "(a or(b and c))"),
        ("a implies b implies c", "(a implies(b implies c))"),
        ("a + if c then 1 else 2 + 3", "(a + (if c then 1 else (2 + 3)))"),
    ],
)  # fmt: skip
def test_operators_bind_as_the_language_says(text: str, brackets: str) -> None:
    assert read_formula(text) == read_formula(brackets)


def test_signs_of_mathematics_mean_their_ascii_forms() -> None:
    text = "¬(a ≤ b ∧ c ≥ 2×d·e) ∨ f ≠ g÷h ⇒ n′ = 1"
    assert write_expr(read_formula(text)) == "not (a <= b and c >= 2*d*e) or f != g/h implies n' = 1"


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("1_000", 1000), ("0.25", Fraction(1, 4)), ("1e-6", Fraction(1, 10**6)), ("2.5E3", 2500), ("4 KiB", 4096),
        ("1EiB", 2**60), ("0.5MiB", 2**19),
    ],
)  # fmt: skip
def test_numbers_are_exact(text: str, value: Fraction) -> None:
    found = read_formula(text)
    assert isinstance(found, tree.Number)
    assert (found.value, found.text) == (value, text)


def test_newlines_are_white_space_in_brackets_and_after_operators_commas_and_colons() -> None:
    text = "routine f(\n  n: nat,\n  m: nat)\n  claim a:\n    n +\n    m <= max(n\n, m)\nis\nend\n"
    reading = read_sheet(text, "")
    assert reading.problems == ()
    assert reading.sheet == read_sheet("routine f(n: nat, m: nat)\nclaim a: n + m <= max(n, m)\nis\nend", "").sheet


def test_newlines_beside_block_words_mean_nothing() -> None:
    one = statements("if n = 0 then skip elif n = 1 then skip else n := n - 1 end; either skip else skip end")
    tests = "if n = 0\nthen\n\nskip\nelif n = 1\nthen skip\n\nelse\nn := n - 1\nend"
    many = statements(f"{tests}\neither\nskip\nelse skip\nend")
    assert one == many
    assert statements("n := if n = 0\nthen 1\nelse 2") == statements("n := if n = 0 then 1 else 2")


def test_windows_line_ends_and_a_byte_order_mark_change_nothing() -> None:
    text = routine("skip\nspend n time", "  claim a: n >= 0\n    cases n = 0\n")
    plain, problems = decode_sheet(b"\xef\xbb\xbf" + text.replace("\n", "\r\n").encode(), "")
    assert problems == ()
    assert plain is not None
    reading = read_sheet(plain, "")
    assert reading.problems == ()
    assert reading.sheet == read_sheet(text, "").sheet


@pytest.mark.parametrize(
    "word", ["below", "in", "over", "lines", "digest", "call", "test", "sheet", "use", "any", "where"]
)
def test_words_that_are_not_reserved_are_names(word: str) -> None:
    assert word not in RESERVED
    text = f"for {word} from {word} below {word} do\n{word} := {word} + 1\n{word}({word})\nspend {word} {word}\nend"
    (loop,) = statements(text)
    assert isinstance(loop, tree.For)
    assert (loop.variable, loop.inclusive, loop.high) == (word, False, tree.Name(word))


def test_any_and_where_mean_a_choice_where_a_value_ends() -> None:
    assert statements("n := any") == (tree.Assign("n", tree.AnyValue()),)
    assert statements("n := any where n < 3") == (tree.Assign("n", tree.AnyValue(read_formula("n < 3"))),)
    assert statements("n := any + 1") == (tree.Assign("n", read_formula("any + 1")),)


def test_units_are_runs_of_letters_digits_and_signs() -> None:
    text = "tariff t\n counter a in 1/s\n counter b in %\n gauge c in m^-2 over a\n gauge d in µs # mean\nend\n"
    reading = read_sheet(text, "")
    assert reading.problems == ()
    (tariff,) = reading.sheet.items
    assert isinstance(tariff, tree.Tariff)
    assert [line.unit for line in tariff.items if not isinstance(line, tree.On)] == ["1/s", "%", "m^-2", "µs"]


def test_spans_point_at_the_text() -> None:
    text = 'sheet "x"\nconstant c: nat = (1 + 2)*3 where c > 0\n'
    (constant,) = read_sheet(text, "").sheet.items
    assert isinstance(constant, tree.Constant)
    value, condition = constant.value, constant.condition
    assert value is not None
    assert condition is not None
    assert text[value.span.start : value.span.end] == "(1 + 2)*3"
    assert (value.span.line, value.span.column) == (2, 19)
    assert text[condition.span.start : condition.span.end] == "c > 0"


def test_an_empty_file_is_a_sheet_of_no_items() -> None:
    assert read_sheet("", "").sheet == tree.Sheet(None, ())
    assert read_sheet("\n # nothing\n;\n", "").problems == ()


@pytest.mark.parametrize("shape", ["({})", "-{}", "not {}", "max({}, 1)", "if a then {} else b", "a + ({})", "2^{}"])
def test_nesting_is_read_up_to_the_limit_and_refused_beyond(shape: str) -> None:
    text = "x"
    for _ in range(120):
        text = shape.format(text)
    read_formula(text)
    for _ in range(200):
        text = shape.format(text)
    with pytest.raises(SheetError) as caught:
        read_formula(text)
    assert len(caught.value.problems) == 1
    assert "deep" in caught.value.problems[0].message


def test_two_hundred_brackets_and_blocks_are_read() -> None:
    read_formula("(" * 200 + "a + b*c = d" + ")" * 200)
    assert len(statements("if n > 0 then\n" * 200 + "n := 2*n + 1\n" + "end\n" * 200)) == 1


# ------------------------------------------------------------------ bad text
FORMULAS = [
    ("", "value or formula"),
    ("1 +", "after '+'"),
    ("(1 + 2", "expected ')'"),
    ("1 2", "end of the formula"),
    ("2n", "runs into 'n'"),
    ("2(n)", "runs into '('"),
    (".5", "0.5"),
    ("1e99999", "too large"),
    ("9" * 5000, "too large"),
    ("max", "'(' after 'max'"),
    ("a = not b", "brackets"),
    ("0 <= peak stack", "first"),
    ("peak stack < 3", "'=', '<=' or '>='"),
    ("peak stack <= 3 <= 4", "one comparison"),
    ("peak 3 <= 4", "counter or gauge"),
    ("stack.top", "'peak' or 'area'"),
    ("if a then b", "'else'"),
    ("sum(i from 1 to n)", "'for'"),
    ("sum(i for if from 1 to n)", "'if' is a word of the language"),
    ("a ! b", "'!'"),
    ("größe", "ASCII"),
    ("a & b", "U+0026"),
    ("a\u00a0b", "U+00A0"),
    ("a := 1", "':='"),
    ("+".join(["a"] * 2_002), "2,000 operators"),
    ("f(" + "1, " * 2_002 + "1)", "2,000 arguments"),
]


@pytest.mark.parametrize(("text", "part"), FORMULAS, ids=lambda v: v[:20])
def test_a_bad_formula_gets_one_message(text: str, part: str) -> None:
    with pytest.raises(SheetError) as caught:
        read_formula(text)
    (problem,) = caught.value.problems
    assert part in f"{problem.message} {problem.mend}"


def test_short_forms_stand_in_claims_only() -> None:
    with pytest.raises(SheetError) as caught:
        read_formula("spent time = 1", in_claim=False)
    assert "claims only" in caught.value.problems[0].message
    assert "claims only" in read_sheet(routine("skip", "  given spent time = 1\n"), "").problems[0].message


SHEETS = [
    # text, lines of the problems, part of the first message or its mend
    ("routin f()\nis\nend", [1], "is 'routine' meant?"),
    ("cosntant c: nat", [1], "is 'constant' meant?"),
    ("foo bar", [1], "expected an item"),
    ("end", [1], "closes nothing"),
    ('constant c: nat\nsheet "late"', [2], "title"),
    ('sheet title', [1], "title"),
    ('use firmware', [1], "path"),
    ('use "open', [1], "never closed"),
    ("constant c nat", [1], "expected ':'"),
    ("constant c: natural", [1], "the types are"),
    ("constant c: reel", [1], "is 'real' meant?"),
    ("constant if: nat", [1], "word of the language"),
    ("function f(n: nat) = n", [1], "type"),
    ("function f(n: nat): nat = if n = 0 then 1", [1], "'else'"),
    ("law l(n: nat) n = n", [1], "expected ':'"),
    ("law l(n: nat): n = n by induction", [1], "'on'"),
    ("law l(n: nat): n = n by induction on n from 0.5", [1], "no whole number"),
    ("tariff t\n counter time in\nend", [2], "unit"),
    ("tariff t\n counter time in ms·h\nend", [2], "end of the line"),
    ("tariff t\n conter time\nend", [2], "is 'counter' meant?"),
    ("tariff t\n on cal: spend 1 time\nend", [2], "is 'call' meant?"),
    ("tariff t\n on call spend 1 time\nend", [2], "expected ':'"),
    ("tariff t\n on call: keep 1 time\nend", [2], "'spend' or 'hold'"),
    ("tariff t\n counter time\nroutine f()\nis\nend", [1], "never closed"),
    ("tariff t\n counter time\nedn\nroutine f()\nis\nend", [3], "is 'end' meant?"),
    ("routine f()\n  skip\nend", [2], "'is'"),
    ("routine f()\n  claim a: 1 = 1\n\nconstant c: nat\n", [4], "'is'"),
    ("routine f()\n", [2], "'is'"),
    ("routine f(n nat)\nis\n f(n, n)\nend", [1], "expected ':'"),
    ("routine f(n: nat)\n clami a: n = n\nis\nend", [2], "is 'claim' meant?"),
    ("routine f(n: nat)\n a: n = n\nis\nend", [2], "claim a: …"),
    ("routine f(n: nat)\n n <= 3\nis\nend", [2], "line of a header"),
    ("routine f(n: nat) claim n = n\nis\nend", [1], "end of the line"),
    ("routine f(n: nat)\n cases n = 0\nis\nend", [2], "under a claim"),
    ("routine f(n: nat)\n claim end: n = n\nis\nend", [2], "cannot be a label"),
    ("routine f(n: nat)\n claim a: = n\n   using l(n)\n claim b: n n\nis\nend", [2, 4], "expected a value"),
    (routine("spnd 1 time\nspend 1 time"), [3], "is 'spend' meant?"),
    (routine("n = 1"), [3], "':='"),
    (routine("var x: nat = 1"), [3], "':='"),
    (routine("note x := 1"), [3], "note NAME = …"),
    (routine("frob"), [3], "frob(…) is a call"),
    (routine("1"), [3], "expected a statement"),
    (routine("skip skip"), [3], "lines of their own"),
    (routine("n := 1\n+ 2"), [4], "expected a statement"),
    (routine("n := 1 +\nskip"), [3], "after '+'"),
    (routine("n := (1 + 2\nskip"), [3], "never closed"),
    (routine("claim n = n"), [3], "stands in headers"),
    (routine("if n > then\nskip\nend\nspend ) time"), [3, 6], "after '>'"),
    (routine("if n > 0\nskip\nend"), [3], "'then'"),
    (routine("if n > 0 do\nskip\nend"), [3], "'then'"),
    (routine("if n > 0 then\nskip\nelse\nskip\nelse\nskip\nend"), [7], "'else' comes last"),
    (routine("either\nskip\nelif n = 0 then\nskip\nend"), [5], "'elif' in an 'either'"),
    (routine("else\nskip"), [3], "belongs to no 'if'"),
    (routine("while n > 0\n  measure n\n  n := n - 1\nend"), [5], "'do'"),
    (routine("for i to 3 do\nskip\nend"), [3], "expected 'from'"),
    (routine("for i from 1 3 do\nskip\nend"), [3], "'to' or 'below'"),
    (routine("for i from below 3 do\nskip\nend"), [3], "first value"),
    (routine("hold 3 stack\nskip\nend"), [3], "'acquire' keeps it"),
    (routine("hold 3 do\nskip\nend"), [3], "name of a gauge"),
    (routine("stage\nclaim n = n\nis\nskip\nend"), [3], "name of a stage"),
    (routine("  for i from 1 to n do\n    if n > 0 then\n    skip\n    end\n  skip"), [3], "'for' is never closed"),
    ("routine f()\nis\n  skip\n\nroutine g()\nis\nend", [1], "'routine' is never closed"),
    (routine("skip\n\x00"), [4], "U+0000"),
    (routine('spend "two" time'), [3], "found the text"),
    ('budget "b": f(1) net time <= 3', [1], "'spent', 'peak' or 'mean'"),
    ('budget "b" f(1) spent time <= 3', [1], "expected ':'"),
    ('pool "p": many of f(1) within 3 heap', [1], "how many"),
    ('pool "p": 4 of f(1) within 3 heap overflow below x', [1], "probability"),
    ('source "a.c" lines 4', [1], "'to'"),
    ("constant a: nat = 1 +\nconstant b: nat = )\nroutine f()\nis\n spend\nend", [1, 2, 5], "after '+'"),
]


@pytest.mark.parametrize(("text", "lines", "part"), SHEETS, ids=lambda v: repr(v)[:30])
def test_each_mistake_gets_one_message_at_its_line(text: str, lines: list[int], part: str) -> None:
    problems = read_sheet(text, "bad.ullage").problems
    assert [p.span.line for p in problems] == lines
    assert part in f"{problems[0].message} {problems[0].mend}"
    for p in problems:
        assert p.source_line == text.split("\n")[p.span.line - 1]


def test_no_more_than_a_hundred_problems_are_told() -> None:
    assert len(read_sheet("foo\n\nconstant c:\n" * 500, "").problems) == 100


def test_bytes_that_are_no_text_are_refused_with_their_place() -> None:
    text, (problem,) = decode_sheet("sheet \"ä\"\n# caf".encode() + b"\xe9", "x")
    assert text is None
    assert (problem.span.line, problem.span.column) == (2, 6)
    assert "UTF-8" in problem.message


def test_a_sheet_of_more_than_a_mebibyte_is_refused() -> None:
    assert decode_sheet(b"#" * LARGEST_SHEET, "x")[0] is not None
    text, (problem,) = decode_sheet(b"#" * (LARGEST_SHEET + 1), "x")
    assert text is None
    assert "too large" in problem.message
