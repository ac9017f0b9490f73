"""What the papers promise: the commands in them are those that CI runs, and the folders they name are there."""

from __future__ import annotations

import re
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


def commands(paper: str) -> list[str]:
    text = (ROOT / paper).read_text(encoding="utf-8")
    return re.findall(r"^(python3 -m venv .*)$", text, flags=re.MULTILINE)


def test_readme_has_one_command_for_the_job_and_one_for_the_tests() -> None:
    job, tests = commands("README.md")
    assert job.endswith("ullage check specs")
    assert tests.endswith("python -m pytest")


def test_ci_runs_the_readmes_test_command() -> None:
    script = (ROOT / ".ci" / "run").read_text(encoding="utf-8").splitlines()
    assert commands("README.md")[1] in script


def test_developers_page_names_every_room() -> None:
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    rooms = {p.parent.name for p in (ROOT / "workbench").glob("*/__init__.py")}
    assert {room for room in rooms if f"`{room}/`" not in text} == set()


def test_developers_page_names_every_dependency() -> None:
    import tomllib

    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    wanted = [*project["dependencies"], *project["optional-dependencies"]["test"]]
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    assert [w for w in wanted if f"`{re.split('[<>=]', w)[0]}`" not in text] == []
