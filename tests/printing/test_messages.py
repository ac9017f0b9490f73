"""Problems as they are printed."""

from __future__ import annotations

import unicodedata

from hypothesis import given
from hypothesis import strategies as st

from workbench.errors import Problem, Span
from workbench.printing.messages import format_problem, format_problems, visible


def problem(line: str, column: int, mend: str | None = "mend it", message: str = "it is wrong") -> Problem:
    return Problem("a.ullage", Span(0, 1, 7, column), message, mend, line)


def test_a_problem_is_place_and_message_line_and_caret_and_mending() -> None:
    assert format_problem(problem("  spend 1 tine", 11)) == (
        "a.ullage:7:11: it is wrong\n      spend 1 tine\n              ^\n    mend it\n"
    )


def test_a_problem_without_line_or_mending_is_one_line() -> None:
    assert format_problem(problem("", 1, mend=None)) == "a.ullage:7:1: it is wrong\n"


def test_the_caret_stands_below_its_character_after_tabs_wide_and_combining_characters() -> None:
    for line, column, before in [("\tx", 2, 1), ("# 風x", 4, 4), ("# e\u0301x", 5, 3), ("\x1bx", 2, 4)]:
        shown, caret = format_problem(problem(line, column)).split("\n")[1:3]
        assert caret == "    " + " " * before + "^"
        assert "x" in shown


def test_of_a_long_line_a_window_round_the_caret_is_shown() -> None:
    line = "a" * 500 + "!" + "b" * 500
    shown, caret = format_problem(problem(line, 501)).split("\n")[1:3]
    assert len(shown) <= 102
    assert shown[len(caret) - 1] == "!"
    assert shown.strip().startswith("…a")
    assert shown.endswith("b…")


def test_a_column_behind_the_line_points_behind_it() -> None:
    assert format_problem(problem("ab", 9)).split("\n")[2] == "      ^"


def test_control_characters_are_written_out() -> None:
    assert visible("a\x1b[31m\x00\x07\x9b\u202e\u2066\u2028\n\t") == (
        "a\\x1b[31m\\x00\\x07\\x9b\\u202e\\u2066\\u2028\\x0a\\x09"
    )
    assert visible("Grüße, 風 — ≤ µs") == "Grüße, 風 — ≤ µs"
    assert visible("a\ud800b") == "a\\ud800b"


@given(st.text())
def test_nothing_that_could_steer_a_terminal_is_left(text: str) -> None:
    shown = visible(text)
    assert not {unicodedata.category(c) for c in shown} & {"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"}
    shown.encode()


@given(st.text(), st.integers(1, 300), st.text(), st.text())
def test_messages_hold_no_control_character_but_newlines(line: str, column: int, message: str, mend: str) -> None:
    told = format_problem(problem(line, column, mend, message))
    assert told.count("\n") <= 4
    assert not [c for c in told.replace("\n", "") if unicodedata.category(c) in ("Cc", "Cf", "Zl", "Zp")]


def test_problems_stand_an_empty_line_apart() -> None:
    one = problem("x", 1)
    assert format_problems([one, one]) == format_problem(one) + "\n" + format_problem(one)
    assert format_problems([]) == ""
