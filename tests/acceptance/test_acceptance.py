"""The acceptance set, in process. Inputs that cannot be read: a message with its place for each mistake."""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any

import pytest

from workbench.library.loading import load
from workbench.printing.messages import format_problems

HERE = Path(__file__).resolve().parent
EXPECTED: dict[str, dict[str, Any]] = json.loads((HERE / "expect.json").read_text(encoding="utf-8"))
REFUSED = {name: wanted for name, wanted in EXPECTED.items() if wanted.get("exit") == 2}
READ = sorted(set(EXPECTED) - set(REFUSED))
CONTROL = re.compile("[\x00-\x09\x0b-\x1f\x7f-\x9f]")


def test_every_sheet_is_in_the_list() -> None:
    assert {str(p.relative_to(HERE)) for p in HERE.glob("*/*.ullage")} == set(EXPECTED)


@pytest.mark.parametrize("name", READ)
def test_legal_sheets_are_read_without_a_problem(name: str) -> None:
    loaded = load(str(HERE / name))
    assert loaded.problems == ()
    assert loaded.sheet is not None


@pytest.mark.parametrize("name", REFUSED)
def test_bad_sheets_are_refused_where_and_as_expected(name: str) -> None:
    wanted = REFUSED[name]
    problems = load(str(HERE / name)).problems
    lines = [p.span.line for p in problems]
    if "lines" in wanted:
        assert lines == wanted["lines"]
    else:
        first, last = wanted["line"] if isinstance(wanted["line"], list) else (wanted["line"], wanted["line"])
        assert len(lines) == 1, "one mistake, one message"
        assert first <= lines[0] <= last
    # The line that is quoted proves nothing: only what is said counts.
    said = " ".join(f"{p.message} {p.mend}" for p in problems).lower()
    assert [word for word in wanted["must_say"] if word.lower() not in said] == []
    told = format_problems(problems)
    assert not CONTROL.search(told)
    assert re.findall(r"\.ullage:(\d+):\d+: ", told) == [str(line) for line in lines]
