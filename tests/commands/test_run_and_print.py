"""`ullage run` and `ullage print` as they are called."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import pytest

from workbench.commands import print as printing
from workbench.commands import run
from workbench.errors import UsageError

ROOT = Path(__file__).resolve().parents[2]
FRAMES = str(ROOT / "specs" / "02-call-frames.ullage")
FIX = str(ROOT / "specs" / "08-either-way.ullage")


def ullage(*arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "workbench", *arguments],
        capture_output=True, text=True, check=False, env={**os.environ, "PYTHONPATH": str(ROOT)},
    )  # fmt: skip


def test_a_run_comes_to_hand_computed_values(capsys: pytest.CaptureFixture[str]) -> None:
    # readColumn(2): four leaves of 1, three joints of 1, six calls of 1: 13 ticks; two frames of 8 at most.
    assert run.main([FRAMES, "readColumn", "k=2", "frame=8", "--json", "--curve"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["schema"] == 1 and document["complete"]
    assert document["spent"] == {"time": 13}
    assert document["net"] == {"stack": 0} and document["peak"] == {"stack": 16}
    steps = document["curve"]["stack"]
    area = sum((t2 - t1) * level for (t1, level), (t2, _) in pairwise(steps))
    assert document["area"] == {"stack": area}


def test_all_ways_to_choose_give_the_least_and_the_greatest(capsys: pytest.CaptureFixture[str]) -> None:
    assert run.main([FIX, "fix", "--choose", "all", "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["complete"]
    assert document["spent"]["time"] == {"least": 2, "greatest": 64}


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ([FRAMES], "needs a file and a routine"),
        ([FRAMES, "readColum", "k=1", "frame=1"], "readColumn"),
        ([FRAMES, "readColumn", "frame=1"], "k="),
        ([FRAMES, "readColumn", "k=-1", "frame=1"], "natural"),
        ([FRAMES, "readColumn", "k=x", "frame=1"], "number"),
        ([FRAMES, "readColumn", "k=1", "frame=0"], "frame"),
        ([FRAMES, "readColumn", "k=1", "frame=1", "--choose", "some"], "--choose"),
    ],
)
def test_wrong_values_are_told_with_what_is_needed(arguments: list[str], words: str) -> None:
    with pytest.raises(UsageError, match=words):
        run.main(arguments)


def test_a_long_run_is_given_up_and_says_so() -> None:
    done = ullage("run", FRAMES, "readColumn", "k=40", "frame=1", "--events", "5000")
    assert done.returncode == 0 and "not complete" in done.stdout


def test_print_ends_with_the_cautions_and_names_every_step(capsys: pytest.CaptureFixture[str]) -> None:
    assert printing.main([FRAMES]) == 0
    text = capsys.readouterr().out
    assert "substitute the statement" in text and "claim deepest" in text
    assert "IEC 61508-3" in text.splitlines()[-2] + text.splitlines()[-3]
    assert max(map(len, text.splitlines())) <= 130


def test_print_to_a_file_writes_it_whole(tmp_path: Path) -> None:
    output = tmp_path / "review.txt"
    assert printing.main([FRAMES, "--output", str(output)]) == 0
    assert "readColumn" in output.read_text(encoding="utf-8")
    assert [p.name for p in tmp_path.iterdir()] == ["review.txt"]
    with pytest.raises(UsageError):
        printing.main([FRAMES, "--output", str(tmp_path / "no" / "such")])


def test_a_format_that_is_not_there_is_told() -> None:
    with pytest.raises(UsageError, match="there is text"):
        printing.main([FRAMES, "--format", "scroll"])


def test_text_print_is_as_it_was(tmp_path: Path) -> None:
    """The golden file: change it only with a reason, after reading what changed."""
    golden = ROOT / "tests" / "printing" / "golden" / "first-look.txt"
    output = tmp_path / "first-look.txt"
    printing.main([str(ROOT / "specs" / "01-first-look.ullage"), "--output", str(output)])
    text = output.read_text(encoding="utf-8").replace(str(ROOT) + os.sep, "")
    assert text == golden.read_text(encoding="utf-8")
