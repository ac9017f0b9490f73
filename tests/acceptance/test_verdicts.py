"""Every sheet gets the verdicts that it must get, and every run comes to what hand-written programs came to."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

from workbench.library.checking import check_sheet
from workbench.library.loading import load
from workbench.printing.documents import json_value
from workbench.program.choosing import ScriptChooser
from workbench.program.pricing import price
from workbench.program.running import run

HERE = Path(__file__).parent
EXPECTED: dict[str, dict[str, str]] = json.loads((HERE / "expect.json").read_text(encoding="utf-8"))
RUNS: list[dict[str, Any]] = json.loads((HERE / "runs.json").read_text(encoding="utf-8"))
ALLOWED = {"not proved": ("open", "refuted"), "refused": ("open", "refuted", "unreadable")}


@pytest.mark.parametrize("name", [n for n, wanted in EXPECTED.items() if "exit" not in wanted])
def test_claims_get_their_verdicts(name: str) -> None:
    report = check_sheet(str(HERE / name))
    found = {
        f"{r.routine.name}.{c.claim.label}": c for r in report.routines for c in r.claims if not c.specification
    }
    for label, wanted in EXPECTED[name].items():
        assert found[label].verdict in ALLOWED.get(wanted, (wanted,)), label
        if wanted == "refuted":
            assert any(d.witness for d in found[label].obligations), label


@pytest.mark.parametrize("index", range(len(RUNS)))
def test_runs_come_to_what_was_worked_out_by_hand(index: int) -> None:
    wanted = RUNS[index]
    loaded = load(str(HERE / wanted["file"]))
    assert loaded.sheet is not None and not loaded.problems
    values = {n: v if isinstance(v, bool | int) else Fraction(v) for n, v in wanted["values"].items()}
    made = run(price(loaded.path, loaded.sheet, loaded.used), wanted["routine"], values, chooser=ScriptChooser())
    for kind in ("spent", "net", "peak", "area", "mean"):
        assert {n: json_value(v) for n, v in getattr(made, kind).items()} == wanted[kind], kind
    if "result" in wanted:
        assert json_value(made.result) == wanted["result"]
    assert made.complete and not made.faults
