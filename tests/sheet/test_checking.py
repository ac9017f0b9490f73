"""Names and types: what is said of a sheet that reads well and means nothing."""

from __future__ import annotations

import pytest

from workbench.errors import Problem
from workbench.sheet import tree
from workbench.sheet.checking import check_names
from workbench.sheet.reader import read_sheet

TARIFF = "tariff board\n counter time\n gauge stack over time\n gauge handles\nend\n"  # five lines


def check(text: str, used: dict[str, str] | None = None, laws: dict[str, int] | None = None) -> list[Problem]:
    reading = read_sheet(text, "sheet.ullage")
    assert reading.problems == ()
    others = {path: read_sheet(t, path).sheet for path, t in (used or {}).items()}
    return check_names("sheet.ullage", reading.sheet, others, laws or {}, reading.doubts)


def routine(body: str = "", header: str = "", signature: str = "(n: nat, b: bool) -> nat") -> str:
    """The header begins in line 7; without one the body begins in line 8."""
    return f"{TARIFF}routine f{signature}\n{header}is\n{body}\nend\n"


GOOD = [
    "",
    routine("n := n + 1\nresult := f(n, not b)\nf(1, n > 0)\nvar x: bool := b\nx := x = b\nx := (n = 1) != b"),
    routine("if n > 0 then\nvar x: nat\nelse\nvar x: int\nend\neither\nnote x = 1\nelse\nnote x = b\nend"),
    routine("for i from 0 below n do\nskip\nend\nfor i from 1 to 3 do\nvar x: nat := i\nend"),
    routine("var x: nat := any where x < n\nx := any where x > n\nresult := any where result = x\nb := any"),
    routine("stage s\n claim x' = n\nis\nvar x: nat := n\nend\nresult := x"),
    routine("while n > 0\n given result = 0\n claim n' = 0 and result' = result\n measure n\ndo\nn := n - 1\nend"),
    routine("for i from 1 to n\n given i >= 1\n claim i' = n + 1\ndo\nskip\nend"),
    routine("spend stack.peak - stack time\nnote before = n"),
    routine("", " claim stack.area' - stack.area >= 0\n claim result = 1 implies mean stack <= 2\n measure n, n + 1\n"),
    routine("", " claim n = n\n  cases b\n  using l(n)\n  using g(n)\n") + "law l(k: nat): k = k\n"
    "function g(k: nat): nat = if k = 0 then 0 else g(k - 1)\n",
    routine("hold frame stack do\nskip\nend", " given frame > 0\n", "(n: nat) with frame = 2*n")
    + "constant frame: nat = 3 where frame > 2\n",
    TARIFF.replace("end", "on call: hold frame stack\nend")
    + "routine g() with frame = 1\nis\nend\nroutine h()\nis\nend",
    TARIFF.replace("end", "on declare: hold 4*size stack\non call: hold frame stack\nend") + "constant size4: nat\n",
    "state a: nat where a <= b\nstate b: nat\nfunction f(a: nat): nat = sum(b for b from 1 to a)\n",
    "constant a: nat = b + 1\nconstant b: nat\nlaw l(n: int) given n > 0: 2*n > n by induction on n from 1\n",
    "constant frame: nat\n" + routine() + 'budget "t": f(n + 1, true) spent time <= 5*frame given n = 3, frame = 4\n'
    'budget "u": f(m, c) mean stack <= m given c = true\n'
    'pool "p": 3 of f(1, b) within 2 KiB handles overflow below 0.5\n',
]


@pytest.mark.parametrize("text", GOOD)
def test_what_the_language_allows_passes(text: str) -> None:
    assert check(text) == []


BAD = [
    # text, lines, part of the first message or its mend
    (routine("n := m"), [8], "there is no name 'm'"),
    (routine("nn := 1"), [8], "is 'n' meant?"),
    (routine("n := n'"), [8], "end value"),
    (routine("n := b"), [8], "expected a number, found a formula"),
    (routine("b := 1"), [8], "expected a formula"),
    (routine("n := b + 1"), [8], "expected a number"),
    (routine("b := n and b"), [8], "expected a formula"),
    (routine("b := not n"), [8], "expected a formula"),
    (routine("b := n = b"), [8], "expected a number"),
    (routine("b := b < b"), [8, 8], "expected a number"),
    (routine("n := if b then 1 else b"), [8], "expected a number"),
    (routine("n := max(n)"), [8], "at least 2 arguments"),
    (routine("n := lg(n, n)"), [8], "takes 1 argument, found 2"),
    (routine("n := binom(n)"), [8], "takes 2 arguments"),
    (routine("n := fact(b)"), [8], "expected a number"),
    (routine("n := sum(b for i from 1 to n)"), [8], "expected a number"),
    (routine("n := sum(n for n from 1 to 3)"), [8], "would hide the parameter"),
    (routine("n := g(1)"), [8], "there is no function 'g'"),
    (routine("n := n(1)"), [8], "is a parameter, no function"),
    (routine("n := f"), [8], "is a routine, no value"),
    (routine("n := f(1, b) + 1"), [8], "called inside an expression"),
    (routine("n := f(1)"), [8], "takes 2 arguments, found 1"),
    (routine("f(b, 1)"), [8, 8], "expected a number"),
    (routine("b := f(1, b)"), [8], "returns a nat"),
    (routine("g(1)"), [8], "there is no routine 'g'"),
    (routine("n(1)"), [8], "is a parameter, no routine"),
    (routine("n := h()") + "routine h()\nis\nend", [8], "has no result"),
    (routine("result := 1", signature="()"), [8], "has no result"),
    (routine("time := 1"), [8], "is spent"),
    (routine("stack := 1"), [8], "cannot be assigned"),
    (routine("c := 1") + "constant c: nat", [8], "the constant 'c' cannot be assigned"),
    (routine("note x = 1\nx := 2"), [9], "the note 'x' cannot be assigned"),
    (routine("note x = time"), [8], "the counter 'time' cannot stand in a note"),
    (routine("note x = stack.peak"), [8], "the gauge 'stack' cannot stand in a note"),
    (routine("for i from 1 to n do\ni := 2\nend"), [9], "the loop alone moves it"),
    (routine("for i from i to n do\nskip\nend"), [8], "there is no name 'i'"),
    (routine("w := 1", signature="(n: nat) with w = n"), [8], "the binding 'w' cannot be assigned"),
    (routine("", signature="(n: nat) with w = n, v = w"), [6], "there is no name 'w'"),
    (routine("", signature="(n: nat) with w = time"), [6], "cannot stand in a binding"),
    (routine("", signature="(n: nat, n: int)"), [6], "would hide the parameter"),
    (routine("var time: nat"), [8], "would hide the counter"),
    (routine("var f: nat"), [8], "would hide the routine"),
    (routine("var x: nat := x"), [8], "there is no name 'x'"),
    (routine("if b then\nvar x: nat\nend\nx := 1"), [11], "there is no variable 'x'"),
    (routine("var x: nat size b"), [8], "expected a number"),
    (routine("if n then\nskip\nend"), [8], "expected a formula"),
    (routine("while n do\nskip\nend"), [8], "expected a formula"),
    (routine("spend 1 tine"), [8], "is 'time' meant?"),
    (routine("spend 1 stack"), [8], "acquired, released and held"),
    (routine("acquire 1 time"), [8], "it is spent"),
    (routine("hold 1 n do\nskip\nend"), [8], "the gauges are 'stack', 'handles'"),
    (routine("spend b time"), [8], "expected a number"),
    (routine("stage s\nis\nend\nstage s\nis\nend"), [11], "stands twice"),
    (routine("stage s\n measure n\nis\nend"), [9], "a stage has no measure"),
    (routine("stage s\n claim x = n\nis\nvar x: nat := n\nend"), [9], "its end value is x'"),
    (routine("while b\n measure n\n measure n\ndo\nskip\nend"), [10], "a second measure"),
    (routine("while b\n claim a: b\n claim a: b\ndo\nskip\nend"), [10], "stands twice in this header"),
    (routine("", " given result = 1\n"), [7], "'result' means nothing in a given"),
    (routine("", " given time' = 1\n"), [7], "end values stand in claims"),
    (routine("", " measure time'\n"), [7], "end values stand in claims"),
    (routine("", " measure b\n"), [7], "expected a number"),
    (routine("", " claim n' = 0\n"), [7], "no end value in a routine's claim"),
    (routine("", " claim result' = 0\n"), [7], "value returned"),
    (routine("", " claim c' = c\n") + "constant c: nat", [7], "it never changes"),
    (routine("var x: nat", " claim x = 1\n"), [7], "there is no name 'x'"),
    (routine("", " claim n\n"), [7], "expected a formula"),
    (routine("", " claim spent stack = 1\n"), [7], "'spent' needs a counter"),
    (routine("", " claim net time = 1\n"), [7], "'net' needs a gauge"),
    (routine("", " claim area handles = 1\n"), [7], "over no counter"),
    (routine("", " claim handles.area' = 1\n"), [7], "over no counter"),
    (routine("", " claim time.peak' = 1\n"), [7], "'peak' needs a gauge"),
    (routine("", " claim spent time = b\n"), [7], "expected a number"),
    (routine("", " claim n = 0\n  using l(n, n)\n") + "law l(k: nat): k = k", [8], "takes 1 argument"),
    (routine("", " claim n = 0\n  using m(n)\n") + "law l(k: nat): k = k", [8], "law or function"),
    (routine("", " claim n = 0\n  using f(n)\n"), [8], "neither law nor function"),
    ("constant c: nat\nstate c: nat", [2], "defined twice, first in line 1"),
    ("tariff t\nend\ntariff t\nend", [3], "the tariff 't' is defined twice"),
    ("constant a: nat = b\nconstant b: nat = c\nconstant c: nat = a", [1], "needs itself"),
    ("constant a: nat = s\nstate s: nat", [1], "cannot stand in the value of a constant"),
    ("constant a: bool = 1", [1], "expected a formula"),
    ("constant a: nat where a", [1], "expected a formula"),
    ("state a: nat where a' > 0", [1], "end value"),
    ("function f(n: nat): nat = s\nstate s: nat", [1], "cannot stand in a function"),
    ("function f(n: nat): bool = n", [1], "expected a formula"),
    ("function f(n: nat): nat = f(n, n)", [1], "takes 1 argument, found 2"),
    ("function f(n: nat): nat measure m = n", [1], "there is no name 'm'"),
    ("law l(n: nat): n + 1", [1], "expected a formula"),
    ("law l(n: nat): n = n by induction on m", [1], "no parameter of the law"),
    ("law l(x: real): x = x by induction on x", [1], "nat or int"),
    ("law l(n: nat): l(n)", [1], "is a law, no function"),
    (TARIFF.replace("end", "gauge ram over tiem\nend"), [5], "is 'time' meant?"),
    (TARIFF.replace("end", "on test: hold 1 stack\nend"), [5], "only 'spend' may stand here"),
    (TARIFF.replace("end", "on assign: spend size time\nend"), [5], "there is no name 'size'"),
    (TARIFF.replace("end", "on test: spend n time\nend"), [5], "there is no name 'n'"),
    (TARIFF.replace("end", "on call: spend 1 stack\nend"), [5], "'spend' needs a counter"),
    ("constant frame: nat\n" + TARIFF.replace("end", "on call: hold framme stack\nend")
     + "routine g()\nis\n g()\nend", [6], "is 'frame' meant?"),
    (TARIFF.replace("end", "on call: hold frame stack\nend") + "routine g() with frame = 1\nis\n h()\nend\n"
     "routine h()\nis\nend", [5], "a call of 'h' has the price 'frame'"),
    (TARIFF.replace("end", "on call: hold frame stack\nend") + "routine g() with frmae = 1\nis\nend", [5],
     "is 'frmae' meant?"),
    (routine() + 'budget "x": g(1) spent time <= 3', [10], "there is no routine 'g'"),
    (routine() + 'budget "x": f(1) spent time <= 3', [10], "takes 2 arguments"),
    (routine() + 'budget "x": f(n, b) spent stack <= 3', [10], "needs a counter"),
    (routine() + 'budget "x": f(n, b) mean handles <= 3', [10], "over no counter"),
    (routine() + 'budget "x": f(n, b) spent time <= 3 given m = 2', [10], "the names in the arguments are 'n', 'b'"),
    (routine() + 'budget "x": f(n, b) spent time <= 3 given n = 2, n = 3', [10], "given twice"),
    (routine() + 'budget "x": f(n, b) spent time <= 3 given b = 3', [10], "expected a formula"),
    (routine() + 'budget "x": f(n, b) spent time <= m', [10], "there is no name 'm'"),
    (routine() + 'pool "x": 0 of f(n, b) within 3 stack', [10], "nobody"),
    (routine() + 'pool "x": 1 of f(n, b) within 3 time', [10], "needs a gauge"),
    (routine() + 'pool "x": 1 of f(n, b) within 3 stack overflow below 2', [10], "between 0 and 1"),
    ('source "a.c" lines 4 to 3', [1], "lines count from 1"),
    ('source "a.c" digest "12"', [1], "64 hexadecimal digits"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "lines", "part"), BAD, ids=lambda v: repr(v)[-40:])
def test_each_mistake_gets_one_message_at_its_line(text: str, lines: list[int], part: str) -> None:
    problems = check(text)
    assert [p.span.line for p in problems] == lines
    assert part in f"{problems[0].message} {problems[0].mend}"


@pytest.mark.parametrize(
    "number",
    ["9^9^9^9", "2^20000", "2^-20000", "0.5^99999", "10^3999*10", "fact(5000)", "fact(9^9)", "binom(2e9, 1e9)"],
)
def test_numbers_too_large_are_refused_at_once_and_once(number: str) -> None:
    (problem,) = check(f"constant c: real = {number}")
    assert "too large" in problem.message


@pytest.mark.parametrize("number", ["2^10000", "1^9999999999", "0^99999", "fact(500)", "binom(1e9, 3)", "10^3000"])
def test_large_numbers_within_the_limit_pass(number: str) -> None:
    assert check(f"constant c: real = {number}") == []


def test_all_items_of_used_sheets_are_there() -> None:
    other = "state charge: nat\nroutine day(sun: nat)\nis\nend\nlaw l(n: nat): n = n\n"
    used = {"/lib/battery.ullage": TARIFF + other}
    header = " claim charge' >= 0 and spent time = 0\n  using l(7)\n"
    text = f"routine week()\n{header}is\n day(1)\n hold 1 stack do\n end\nend"
    assert check(text, used) == []
    assert "is 'day' meant?" in str(check("routine week()\nis\n dya(1)\nend", used)[0].mend)


def test_a_name_that_a_used_sheet_has_too_is_refused() -> None:
    used = {"/lib/a.ullage": "constant c: nat", "/lib/b.ullage": "constant d: nat"}
    (problem,) = check('use "a.ullage"\nuse "b.ullage"\nstate c: nat', used)
    assert (problem.span.line, "first in 'a.ullage'" in problem.message) == (3, True)
    used["/lib/b.ullage"] = "constant c: nat"
    (problem,) = check('use "a.ullage"\nuse "b.ullage"', used)
    assert (problem.span.line, "then in 'b.ullage'" in problem.message) == (2, True)


def test_a_used_tariff_prices_calls_of_this_sheet() -> None:
    used = {"/lib/t.ullage": TARIFF.replace("end", "on call: hold frame stack\nend")}
    (problem,) = check("routine g()\nis\n g()\nend", used)
    assert (problem.span.line, "'frame'" in problem.message) == (3, True)
    assert check("routine g() with frame = 3\nis\n g()\nend", used) == []


def test_hints_may_name_built_in_laws() -> None:
    text = routine("", " claim n = n\n  using square(n)\n")
    assert check(text, laws={"square": 1}) == []
    assert "takes 2 arguments" in check(text, laws={"square": 2})[0].message
    assert "law or function" in check(text)[0].message


def test_what_may_be_declared_in_an_unreadable_line_is_not_called_unknown() -> None:
    for lost in ["var : nat := 1", "var x nat", "var x: nat := = 2", "for from 1 to 3 do\nend"]:
        reading = read_sheet(routine(f"{lost}\nn := x\nspend 1 tine"), "")
        assert len(reading.problems) == 1
        found = check_names("", reading.sheet, {}, {}, reading.doubts)
        assert "there is no name 'x'" not in [p.message for p in found]
    reading = read_sheet(TARIFF.replace("counter time", "counter time on") + "routine f()\nis\n spend 1 time\nend", "")
    assert check_names("", reading.sheet, {}, {}, reading.doubts) == []


def test_an_unknown_name_is_told_once_a_routine_and_a_hundred_problems_at_most() -> None:
    assert len(check(routine("n := m\nn := m + m\nm := 1"))) == 1
    assert len(check("".join(f"routine f{i}()\nis\n g()\nend\n" for i in range(300)))) == 100


def test_a_sum_of_two_thousand_terms_is_checked() -> None:
    assert check(routine("n := " + " + ".join(["n"] * 2_000))) == []


def test_problems_name_the_sheet_and_stand_in_the_order_of_its_text() -> None:
    problems = check(routine("n := x\nn := y") + "constant c: nat = z\n")
    assert [p.span.line for p in problems] == sorted(p.span.line for p in problems)
    assert {p.path for p in problems} == {"sheet.ullage"}
    assert isinstance(read_sheet("", "").sheet, tree.Sheet)
