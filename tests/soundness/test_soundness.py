"""A small, fixed part of the hunt, and the interpreter against runs worked out by hand; `hunt.py` is the long one."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path

import pytest

from tests.soundness.hunt import Tally, hunt
from tests.soundness.interpreter import Interpreter
from workbench.library.loading import load
from workbench.sheet import tree

ACCEPTANCE = Path(__file__).resolve().parents[1] / "acceptance"
RUNS = json.loads((ACCEPTANCE / "runs.json").read_text())


def test_no_run_breaks_what_is_proved() -> None:
    total = Tally()
    for seed in range(7):
        total.add(hunt(seed, seconds=0.1))
    assert total.violations == []
    assert total.crashes == []
    assert total.differences == []
    assert total.verdicts["proved"] >= 10
    assert total.verdicts["refuted"] >= 10


@pytest.mark.parametrize("wanted", RUNS, ids=[f"{i}-{r['routine']}" for i, r in enumerate(RUNS)])
def test_the_interpreter_comes_to_what_was_worked_out_by_hand(wanted: dict[str, object]) -> None:
    """Source: tests/acceptance/runs.json, made by hand-written programs apart from any sheet reader."""
    loaded = load(str(ACCEPTANCE / str(wanted["file"])))
    assert loaded.sheet is not None and not loaded.problems
    sheet = tree.Sheet(None, (*(i for used in loaded.used.values() for i in used.items), *loaded.sheet.items))
    values = {n: Fraction(v) if isinstance(v, str) else v for n, v in _table(wanted, "values").items()}
    routine = next(i for i in sheet.items if isinstance(i, tree.Routine) and i.name == wanted["routine"])
    interpreter = Interpreter(sheet, {i.name: values[i.name] for i in sheet.items
                                      if isinstance(i, tree.Constant) and i.name in values})  # fmt: skip
    entry = {s: values.get(s, 0) for s in interpreter.states}
    made = interpreter.run(routine.name, {p.name: values[p.name] for p in routine.parameters}, entry, seed=1)
    assert made.ended, made.fault
    for aspect, suffix in (("spent", ""), ("net", ""), ("peak", ".peak"), ("area", ".area")):
        for name, value in _table(wanted, aspect).items():
            assert made.end[name + suffix] == Fraction(value), (aspect, name)
    if "result" in wanted:
        assert made.result == wanted["result"]


def _table(wanted: dict[str, object], key: str) -> dict[str, int | str]:
    found = wanted[key]
    assert isinstance(found, dict)
    return found
