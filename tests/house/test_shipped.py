"""Sheets and themes travel with the program."""

from __future__ import annotations

import subprocess
import sys
import zipfile
from pathlib import Path
from typing import Literal

import pytest

from workbench.shipped import NotShipped, folder

ROOT = Path(__file__).resolve().parents[2]
NAMES: tuple[Literal["specs", "themes"], ...] = ("specs", "themes")


@pytest.mark.parametrize("name", NAMES)
def test_checkout_uses_its_own_folders(name: Literal["specs", "themes"]) -> None:
    assert folder(name) == ROOT / name


def test_installed_package_uses_the_folders_inside_it(tmp_path: Path) -> None:
    (tmp_path / "workbench" / "shipped_specs").mkdir(parents=True)
    (tmp_path / "specs").mkdir()  # somebody else's, beside the package
    assert folder("specs", tmp_path / "workbench") == tmp_path / "workbench" / "shipped_specs"


def test_missing_folder_is_named(tmp_path: Path) -> None:
    with pytest.raises(NotShipped, match="lacks its folder of themes"):
        folder("themes", tmp_path / "workbench")


def test_wheel_holds_every_shipped_file_and_every_module(tmp_path: Path) -> None:
    build = [sys.executable, "-m", "hatchling", "build", "-t", "wheel", "-d", str(tmp_path)]
    subprocess.run(build, cwd=ROOT, check=True, capture_output=True)
    (wheel,) = tmp_path.glob("*.whl")
    held = set(zipfile.ZipFile(wheel).namelist())
    for name in NAMES:
        for file in (ROOT / name).rglob("*"):
            if file.is_file():
                assert f"workbench/shipped_{name}/{file.relative_to(ROOT / name)}" in held
    for module in (ROOT / "workbench").rglob("*.py"):
        assert str(module.relative_to(ROOT)) in held
    assert not [name for name in held if name.startswith("tests/")]
