"""Types, style and the direction of imports: part of the one check command, so that nobody forgets them."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
MODULES = sorted((ROOT / "workbench").rglob("*.py"))
LINES = 450  # "about 400": beyond this a module does two things


def run(*arguments: str) -> None:
    done = subprocess.run(arguments, cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr


def tool(name: str) -> str:
    return str(Path(sys.executable).parent / name)


def test_ruff_finds_nothing() -> None:
    run(tool("ruff"), "check", "--quiet", "workbench", "tests")


def test_types_hold_by_mypy_strict() -> None:
    run(sys.executable, "-m", "mypy")


def test_imports_keep_their_direction() -> None:
    run(tool("lint-imports"))


def test_modules_stay_short() -> None:
    lengths = {str(m.relative_to(ROOT)): len(m.read_text(encoding="utf-8").splitlines()) for m in MODULES}
    assert {name: count for name, count in lengths.items() if count > LINES} == {}


def test_kernel_imports_the_algebra_alone() -> None:
    kernel = [m for m in MODULES if m.parent.name == "proof" and m.stem.startswith("kernel")]
    assert kernel
    for module in kernel:
        for name in imported(module):
            own = name.startswith("workbench.")
            assert not own or name.startswith(KERNEL_MAY_IMPORT), f"{module.name} imports {name}"
            assert own or name.partition(".")[0] in sys.stdlib_module_names, f"{module.name} imports {name}"


KERNEL_MAY_IMPORT = ("workbench.algebra", "workbench.errors", "workbench.proof.kernel", "workbench.proof.laws")


def imported(module: Path) -> list[str]:
    names = []
    for node in ast.walk(ast.parse(module.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names += [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{module.name}: a relative import"
            names.append(node.module or "")
    return names


@pytest.mark.parametrize("room", ["sheet", "algebra"])
def test_lowest_rooms_import_no_other(room: str) -> None:
    for module in (ROOT / "workbench" / room).rglob("*.py"):
        for name in imported(module):
            assert not name.startswith("workbench") or name.startswith((f"workbench.{room}", "workbench.errors")), name
