"""`ullage check`: statuses, the document, jobs, what it loads, how it stops."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from workbench.commands import check
from workbench.errors import UsageError

ROOT = Path(__file__).resolve().parents[2]
GOOD = ROOT / "specs" / "01-first-look.ullage"
ENVIRONMENT = {**os.environ, "PYTHONPATH": str(ROOT)}


def ullage(*arguments: str | Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "workbench", *map(str, arguments)],
        capture_output=True, text=True, check=False, env=ENVIRONMENT,
    )  # fmt: skip


@pytest.fixture
def sheets(tmp_path: Path) -> Path:
    text = GOOD.read_text(encoding="utf-8")
    (tmp_path / "a-good.ullage").write_text(text, encoding="utf-8")
    (tmp_path / "b-wrong.ullage").write_text(text.replace("= 3*samples", "= 3*samples + 1"), encoding="utf-8")
    return tmp_path


def test_status_says_verified_not_verified_or_unreadable(sheets: Path) -> None:
    assert ullage("check", sheets / "a-good.ullage").returncode == 0
    wrong = ullage("check", sheets)
    assert wrong.returncode == 1 and "broken by" in wrong.stdout
    (sheets / "c-bad.ullage").write_text("routine (", encoding="utf-8")
    bad = ullage("check", sheets)
    assert bad.returncode == 2 and "c-bad.ullage:1:" in bad.stderr and "Traceback" not in bad.stderr


def test_the_document_has_the_keys_that_were_promised(sheets: Path) -> None:
    (sheets / "c-bad.ullage").write_text("routine (", encoding="utf-8")
    done = ullage("check", sheets, "--json")
    document = json.loads(done.stdout)
    assert set(document) == {"schema", "version", "sheets"} and document["schema"] == 1
    assert [s["verdict"] for s in document["sheets"]] == ["verified", "refuted", "unreadable"]
    assert set(document["sheets"][2]["problems"][0]) == {"line", "column", "message"}
    sheet = document["sheets"][1]
    assert set(sheet) == {"path", "verdict", "problems", "routines", "mathematics"}
    (routine,) = sheet["routines"]
    assert {"name", "verdict", "claims", "obligations"} <= set(routine)
    (claim,) = routine["claims"]
    assert set(claim) == {"label", "text", "formula", "verdict", "leans_on", "obligations"}
    for obligation in (*claim["obligations"], *routine["obligations"]):
        assert set(obligation) == {"id", "case", "kind", "verdict", "witness", "residue", "steps"}
    assert any(o["verdict"] == "refuted" and o["witness"] for o in claim["obligations"])


def test_several_jobs_say_the_same_as_one(sheets: Path) -> None:
    assert ullage("check", sheets, "--jobs", "2").stdout == ullage("check", sheets).stdout


def test_checking_loads_neither_screens_nor_symbolic_algebra() -> None:
    code = (
        "import sys; from workbench.commands.check import main; main([sys.argv[1]]); "
        "print([m for m in ('textual', 'sympy', 'lark') if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(GOOD)], capture_output=True, text=True, check=True, env=ENVIRONMENT
    )
    assert done.stdout.rstrip().endswith("[]")


def test_memory_stays_flat_over_many_sheets(tmp_path: Path) -> None:
    for i in range(60):
        (tmp_path / f"s{i}.ullage").write_bytes(GOOD.read_bytes())
    code = (
        "import resource, sys; from workbench.commands.check import main\n"
        "main([sys.argv[1] + '/s1.ullage']); first = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss\n"
        "main([sys.argv[1]]); print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - first)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path)], capture_output=True, text=True, check=True, env=ENVIRONMENT
    )
    assert int(done.stdout.split()[-1]) < 4_000  # KiB; keeping every sheet's terms would take ten times that


def test_an_interrupt_stops_at_once_and_quietly(tmp_path: Path) -> None:
    for i in range(400):
        (tmp_path / f"s{i}.ullage").write_bytes((ROOT / "specs" / "02-call-frames.ullage").read_bytes())
    child = subprocess.Popen(
        [sys.executable, "-m", "workbench", "check", str(tmp_path), "--jobs", "2"],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, env=ENVIRONMENT, start_new_session=True,
    )  # fmt: skip
    assert child.stdout is not None
    child.stdout.readline()
    os.killpg(child.pid, signal.SIGINT)
    began = time.monotonic()
    _, messages = child.communicate(timeout=20)
    assert child.returncode == 130
    assert "stopped" in messages and "Traceback" not in messages
    assert time.monotonic() - began < 10


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ([], "needs a sheet"),
        (["nowhere.ullage"], "nowhere.ullage"),
        (["--jbos", "2"], "--jbos"),
        (["x", "--jobs", "many"], "--jobs"),
        (["x", "--seconds", "-1"], "--seconds"),
    ],
)
def test_wrong_use_is_told(arguments: list[str], words: str) -> None:
    with pytest.raises(UsageError, match=words):
        check.main(arguments)
