"""Every sheet that travels with the program is verified, and there are enough of them to learn from."""

from __future__ import annotations

from pathlib import Path

import pytest

from workbench.library.checking import check_sheet
from workbench.library.folders import sheets_below
from workbench.shipped import folder

SHEETS = sheets_below([str(folder("specs"))])


@pytest.mark.parametrize("path", SHEETS, ids=lambda p: Path(p).stem)
def test_shipped_sheet_is_verified(path: str) -> None:
    report = check_sheet(path)
    open_ones = [c.label for r in report.routines for c in r.claims if c.verdict != "proved"]
    assert report.verdict == "verified", open_ones


def test_there_are_enough_to_learn_from() -> None:
    assert len([p for p in SHEETS if "classic" not in p]) >= 10
    assert len([p for p in SHEETS if "classic" in p]) >= 8


def test_every_classic_names_where_its_cost_is_published() -> None:
    for path in SHEETS:
        if "classic" in path:
            text = Path(path).read_text(encoding="utf-8")
            assert "from memory" in text or "common practice" in text, path
