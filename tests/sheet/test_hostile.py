"""Whatever the bytes, reading ends soon, raises nothing and puts nothing raw on a terminal."""

from __future__ import annotations

import inspect
import re
import sys
import time
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from workbench.library.loading import load_text
from workbench.printing.messages import format_problems
from workbench.sheet.reader import decode_sheet, read_sheet
from workbench.sheet.words import LARGEST_SHEET
from workbench.sheet.writer import write_sheet

ACCEPTANCE = Path(__file__).resolve().parents[1] / "acceptance"
TEXTS = [t for p in sorted(ACCEPTANCE.glob("*/*.ullage")) if (t := decode_sheet(p.read_bytes(), "")[0])]
PIECES = sorted({piece for text in TEXTS for piece in re.findall(r"\w+|\s+|[^\w\s]", text) if len(piece) < 30})
CONTROL = re.compile("[\x00-\x09\x0b-\x1f\x7f-\x9f\u061c\u200e\u200f\u2028-\u202e\u2066-\u2069]")
QUICK = settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
SECONDS = 2  # for an ordinary sheet; what is a mebibyte of one-character tokens may take TOKENS_SECONDS
TOKENS_SECONDS = 10  # about 5 µs for each of a million tokens, on a slow machine under load


def survive(text: str, seconds: float = SECONDS) -> str:
    """What a person is told of this text; fails where that takes too long, or points to no place in it."""
    start = time.process_time()
    problems = load_text("/nowhere/hostile.ullage", text).problems
    told = format_problems(problems)
    assert time.process_time() - start < seconds
    assert not CONTROL.search(told)
    lines = text.split("\n")
    for p in problems:
        assert 1 <= p.span.line <= len(lines)
        assert 1 <= p.span.column <= len(lines[p.span.line - 1]) + 1
        assert p.source_line == lines[p.span.line - 1].rstrip("\r")
    assert len(told) < 100 * 1_000
    return told


@QUICK
@given(st.binary(max_size=300))
def test_random_bytes_are_refused_or_read(data: bytes) -> None:
    text, problems = decode_sheet(data, "hostile.ullage")
    assert (text is None) == bool(problems)
    assert not CONTROL.search(format_problems(problems))
    survive(data.decode("latin-1"))


@QUICK
@given(st.text(max_size=200))
def test_random_text_is_survived(text: str) -> None:
    survive(text)


@QUICK
@given(st.lists(st.sampled_from(PIECES), max_size=120).map("".join))
def test_shuffled_pieces_of_sheets_are_survived(text: str) -> None:
    survive(text)


@QUICK
@given(st.sampled_from(TEXTS), st.sampled_from(TEXTS), st.floats(0, 1), st.floats(0, 1))
def test_truncated_and_spliced_sheets_are_survived(one: str, other: str, until: float, since: float) -> None:
    survive(one[: int(until * len(one))] + other[int(since * len(other)) :])
    survive(one[: int(until * len(one))])


@QUICK
@given(st.sampled_from(TEXTS), st.lists(st.tuples(st.floats(0, 1), st.sampled_from(PIECES), st.booleans()), max_size=4))
def test_sheets_with_pieces_changed_are_survived(text: str, changes: list[tuple[float, str, bool]]) -> None:
    pieces = re.findall(r"\w+|\s+|[^\w\s]", text)
    for place, piece, instead in changes:
        at = int(place * len(pieces))
        pieces[at : at + instead] = [piece]
    survive("".join(pieces))


HEAD = "tariff b\ncounter time\ngauge stack over time\nend\nroutine f(n: nat)\nis\n"
LONG_LINES = {
    "a comment": "#" * (LARGEST_SHEET - 1),
    "a text": 'sheet "' + "a" * (LARGEST_SHEET - 9) + '"',
    "a text without end": 'sheet "' + "a" * (LARGEST_SHEET - 9),
    "a name": HEAD + "n" * (LARGEST_SHEET - 100),
    "a number": HEAD + "n := " + "9" * (LARGEST_SHEET - 100),
    "an exponent": HEAD + "n := 1e" + "9" * (LARGEST_SHEET - 100),
    "spaces": " " * LARGEST_SHEET,
    "one strange character": "@" * LARGEST_SHEET,
    "nothing": "\0" * LARGEST_SHEET,
    "escapes": '"' + "\x1b[2J\u202e" * (LARGEST_SHEET // 10),
    "a mistake far to the right": HEAD + "spend 1" + " " * (LARGEST_SHEET - 100) + ") time",
    "many problems in one line": HEAD + "spend ) x;" * 200 + "#" * (LARGEST_SHEET - 3_000),
}
MANY_TOKENS = {
    "brackets": HEAD + "n := " + "(" * (LARGEST_SHEET - 100),
    "minus signs": HEAD + "n := " + "-" * (LARGEST_SHEET - 100) + "n",
    "negations": HEAD + "n := " + "not " * (LARGEST_SHEET // 4 - 100) + "n",
    "powers": HEAD + "n := " + "n^" * (LARGEST_SHEET // 2 - 100) + "n",
    "conditions": HEAD + "n := " + "if n then n else " * (LARGEST_SHEET // 17 - 100) + "n",
    "a sum": HEAD + "n := " + "n+" * (LARGEST_SHEET // 2 - 100) + "n",
    "arguments": HEAD + "f(" + "1," * (LARGEST_SHEET // 2 - 100) + "1)",
    "blocks": HEAD + "if n>0 then " * (LARGEST_SHEET // 12 - 100),
    "lines in a bracket": "(" + "\n" * (LARGEST_SHEET - 1),
    "ends": "end\n" * (LARGEST_SHEET // 4),
    "a circle of constants": "".join(f"constant c{i}: nat = c{i + 1}\n" for i in range(30_000)),
}


@pytest.mark.parametrize("text", LONG_LINES.values(), ids=LONG_LINES.keys())
def test_lines_of_a_mebibyte_take_no_more_than_a_moment(text: str) -> None:
    assert len(text) <= LARGEST_SHEET
    survive(text)


@pytest.mark.parametrize("text", MANY_TOKENS.values(), ids=MANY_TOKENS.keys())
def test_an_eighth_of_a_mebibyte_of_tokens_takes_an_eighth_of_the_time(text: str) -> None:
    assert len(text) <= LARGEST_SHEET
    survive(text[: len(text) // 8], TOKENS_SECONDS / 8)


@pytest.mark.parametrize(
    ("deep", "said"),
    [
        ("n := " + "(" * 15_000, "200 deep"),
        ("n := " + "-" * 15_000 + "n", "deep"),
        ("b := " + "not " * 15_000 + "b", "deep"),
        ("n := " + "2^" * 15_000 + "2", "deep"),
        ("n := " + "f(" * 15_000, "200 deep"),
        ("n := " + "1+(" * 15_000, "200 deep"),
        ("n := " + "sum(" * 15_000, "200 deep"),
        ("n := " + "if b then 1 else " * 15_000 + "2", "200 deep"),
        ("b := " + "b implies " * 15_000 + "b", "deep"),
        ("while n > 0 do\n" * 15_000, "200 deep"),
        ("either " * 15_000, "200 deep"),
        ("stage s is " * 10_000, "200 deep"),
    ],
    ids=lambda v: v[:12],
)
def test_nesting_without_bounds_gets_one_message(deep: str, said: str) -> None:
    told = survive(HEAD + deep + "\nend\n", TOKENS_SECONDS)
    assert told.count("hostile.ullage:") == 1
    assert said in told


def test_long_chains_of_branches_are_flat() -> None:
    branches = "".join(f"elif n = {i} then skip\n" for i in range(5_000))
    assert survive(HEAD + "if n = 0 then skip\n" + branches + "end\nend\n") == ""


DEEPEST = {  # as deep as the language allows, each in the way that needs most of Python's stack
    "brackets": "n := " + "1+(" * 199 + "n" + ")" * 199,
    "calls of functions": "n := " + "g(" * 199 + "n" + ")" * 199,
    "conditions": "n := " + "if b then 1 else " * 199 + "n",
    "loops": "".join(f"for i{k} from 1 to n do\n" for k in range(199)) + "n := 1\n" + "end\n" * 199,
}


@pytest.mark.parametrize("body", DEEPEST.values(), ids=DEEPEST.keys())
def test_the_deepest_text_needs_two_thirds_of_the_stack(body: str) -> None:
    text = f"function g(n: nat): nat = n\n{HEAD.replace('n: nat', 'n: nat, b: bool')}{body}\nend\n"
    usual = sys.getrecursionlimit()
    try:
        sys.setrecursionlimit(len(inspect.stack(0)) + 667)  # of the usual thousand: the rest is the caller's
        sheet = load_text("/nowhere/deep.ullage", text).sheet
        assert sheet is not None
        assert read_sheet(write_sheet(sheet), "").problems == ()
    finally:
        sys.setrecursionlimit(usual)


def test_a_sheet_of_too_many_words_is_told_so_at_once() -> None:
    text = "routine r(n: nat)\nis\n" + "  n:=n+1\n" * 100_000 + "end\n"
    began = time.process_time()
    (problem,) = read_sheet(text, "long.ullage").problems
    assert "words and signs" in problem.message and problem.span.line > 10_000
    assert time.process_time() - began < 2
