"""Start-up: what the first answers load, and how long the quickest takes."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path
from time import perf_counter

import pytest

ROOT = Path(__file__).resolve().parents[2]
ROUNDS = 12


def loaded_by(*arguments: str) -> set[str]:
    """Modules that a call leaves loaded, beyond those of a bare interpreter."""
    script = "import sys; before = set(sys.modules); from workbench.__main__ import main; main(sys.argv[1:]); "
    script += "print('LOADED', *(set(sys.modules) - before))"
    done = subprocess.run(
        [sys.executable, "-c", script, *arguments], cwd=ROOT, capture_output=True, text=True, check=True
    )
    return set(done.stdout.splitlines()[-1].split()[1:])


@pytest.mark.parametrize("option", ["--version", "--help"])
def test_first_answers_load_nothing_but_the_entry(option: str) -> None:
    loaded = loaded_by(option)
    assert not {name.partition(".")[0] for name in loaded} & {"textual", "rich", "sympy", "argparse", "platformdirs"}
    assert loaded == {"workbench", "workbench.__main__", "__future__"}


def test_wrong_use_loads_no_screens_and_no_algebra() -> None:
    assert not {name.partition(".")[0] for name in loaded_by("no-such-thing")} & {"textual", "sympy", "argparse"}


def test_version_takes_at_most_three_times_a_bare_interpreter() -> None:
    bare, version = float("inf"), float("inf")
    for _ in range(ROUNDS):  # by turns, and the best of each: other work on the machine slows both
        bare = min(bare, seconds("-c", "pass"))
        version = min(version, seconds("-m", "workbench", "--version"))
    assert version <= 3 * bare, f"{version * 1000:.1f} ms against {bare * 1000:.1f} ms"


def seconds(*arguments: str) -> float:
    start = perf_counter()
    subprocess.run([sys.executable, *arguments], cwd=ROOT, stdout=subprocess.DEVNULL, check=True)
    return perf_counter() - start
