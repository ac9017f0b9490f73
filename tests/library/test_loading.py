"""Sheets with all that they use, from the disk: order, circles, and the fence round the library."""

from __future__ import annotations

import os
import time
from pathlib import Path

import pytest

from workbench.library.loading import MOST_SHEETS, Loaded, load, load_text, resolve
from workbench.sheet import tree
from workbench.sheet.words import LARGEST_SHEET

TARIFF = "tariff board\n counter time in ms\nend\n"


def write(folder: Path, **sheets: str) -> Path:
    for name, text in sheets.items():
        path = folder / f"{name}.ullage"
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    return folder


def told(loaded: Loaded) -> list[tuple[int, str]]:
    return [(p.span.line, p.message) for p in loaded.problems]


def test_used_sheets_stand_first_and_once(tmp_path: Path) -> None:
    write(
        tmp_path,
        top='use "left.ullage"\nuse "right.ullage"\nroutine top()\nis\n left()\n right()\nend\n',
        left='use "base.ullage"\nroutine left()\nis\n spend 1 time\nend\n',
        right='use "base.ullage"\nroutine right()\nis\n spend one time\nend\n',
        base=TARIFF + "constant one: nat = 1\n",
    )
    loaded = load(str(tmp_path / "top.ullage"))
    assert loaded.problems == ()
    names = [Path(p).stem for p in loaded.used]
    assert sorted(names) == ["base", "left", "right"]
    assert names[0] == "base"
    assert all(isinstance(s, tree.Sheet) for s in loaded.used.values())
    assert all(os.path.isabs(p) for p in loaded.used)


def test_the_text_given_stands_in_place_of_the_file(tmp_path: Path) -> None:
    write(tmp_path, base=TARIFF, top="nonsense")
    text = 'use "base.ullage"\nroutine f()\nis\n spend 1 time\nend\n'
    loaded = load_text(str(tmp_path / "top.ullage"), text)
    assert (loaded.problems, loaded.text, len(loaded.used)) == ((), text, 1)


def test_bytes_may_come_from_elsewhere_than_the_disk() -> None:
    files = {"/nowhere/a.ullage": b'use "b.ullage"\nconstant c: nat = d\n', "/nowhere/b.ullage": b"constant d: nat\n"}

    def read(path: str) -> bytes:
        if path not in files:
            raise FileNotFoundError(2, "No such file or directory", path)
        return files[path]

    assert load("/nowhere/a.ullage", read).problems == ()
    del files["/nowhere/b.ullage"]
    assert told(load("/nowhere/a.ullage", read)) == [
        (1, "'b.ullage': the sheet cannot be read: No such file or directory")
    ]


def test_a_missing_sheet_is_a_problem_not_an_error(tmp_path: Path) -> None:
    loaded = load(str(tmp_path / "none.ullage"))
    assert loaded.sheet is None
    assert told(loaded) == [(1, "the sheet cannot be read: No such file or directory")]
    assert load(str(tmp_path)).sheet is None
    assert load("a\0b").sheet is None


def test_a_missing_used_sheet_is_one_problem_at_its_line(tmp_path: Path) -> None:
    write(tmp_path, top='sheet "t"\nuse "gone.ullage"\nroutine f()\nis\n spend 1 time\n g()\nend\n')
    loaded = load(str(tmp_path / "top.ullage"))
    assert [line for line, _ in told(loaded)] == [2]
    assert loaded.problems[0].source_line == 'use "gone.ullage"'


def test_mistakes_in_a_used_sheet_are_told_at_the_line_that_uses_it(tmp_path: Path) -> None:
    write(tmp_path, top='use "mid.ullage"\n', mid='use "base.ullage"\n', base="constant c: nat = d\nfoo\n")
    ((line, message),) = told(load(str(tmp_path / "top.ullage")))
    assert line == 1
    assert message.startswith("'mid.ullage': 1 mistake in it, first in line 1: 'base.ullage': 2 mistakes in it")


@pytest.mark.parametrize(("start", "line"), [("a", 2), ("b", 1), ("c", 3)])
def test_a_circle_of_uses_is_told_at_a_line_of_it(tmp_path: Path, start: str, line: int) -> None:
    write(tmp_path, a='\nuse "b.ullage"\n', b='use "c.ullage"\n', c='\n\nuse "a.ullage"\nconstant x: nat = y\n')
    ((where, message),) = told(load(str(tmp_path / f"{start}.ullage")))
    assert where == line
    assert "the sheet uses itself" in message
    assert "a.ullage" in message


def test_a_sheet_that_uses_itself_is_refused(tmp_path: Path) -> None:
    write(tmp_path, a='use "./a.ullage"\n', outer='use "a.ullage"\n')
    assert told(load(str(tmp_path / "a.ullage"))) == [(1, "the sheet uses itself")]
    assert told(load(str(tmp_path / "outer.ullage"))) == [
        (1, "'a.ullage': 1 mistake in it, first in line 1: the sheet uses itself")
    ]


# ------------------------------------------------------------------ the fence
def test_without_a_root_a_sheet_reaches_its_own_folder_only(tmp_path: Path) -> None:
    write(tmp_path, outer=TARIFF)
    write(tmp_path / "in", sheet='use "../outer.ullage"\n', inner=TARIFF)
    write(tmp_path / "in" / "deep", deep="constant c: nat\n")
    loaded = load(str(tmp_path / "in" / "sheet.ullage"))
    assert told(loaded) == [(1, "'../outer.ullage' lies outside of the library")]
    assert load_text(str(tmp_path / "in" / "sheet.ullage"), 'use "inner.ullage"\nuse "deep/deep.ullage"').problems == ()


@pytest.mark.parametrize("mark", [".ullage-root", ".git"])
def test_below_a_root_a_sheet_reaches_the_whole_library(tmp_path: Path, mark: str) -> None:
    root = tmp_path / "root"
    write(tmp_path, outer=TARIFF)
    write(root, base=TARIFF)
    write(root / "in", sheet='use "../base.ullage"\n')
    (root / mark).mkdir()
    path = str(root / "in" / "sheet.ullage")
    assert load(path).problems == ()
    above = "../../outer.ullage"
    assert told(load_text(path, f'use "{above}"')) == [(1, f"'{above}' lies outside of the library")]


def test_a_used_sheet_reaches_no_further_than_its_own_fence(tmp_path: Path) -> None:
    (tmp_path / ".ullage-root").touch()
    write(tmp_path, base=TARIFF, top='use "part/part.ullage"\n')
    write(tmp_path / "part", part='use "../base.ullage"\n')
    assert load(str(tmp_path / "top.ullage")).problems == ()
    (tmp_path / "part" / ".ullage-root").touch()
    assert "outside of the library" in load(str(tmp_path / "top.ullage")).problems[0].message


@pytest.mark.parametrize("named", ["/etc/hostname", "../../../../../../../../etc/hostname", "../in-2/a.ullage", "a\0b"])
def test_what_lies_outside_is_refused(tmp_path: Path, named: str) -> None:
    write(tmp_path / "in-2", a=TARIFF)
    write(tmp_path / "in", sheet="")
    assert resolve(str(tmp_path / "in" / "sheet.ullage"), named) is None


def test_links_are_followed_before_it_is_decided_what_lies_outside(tmp_path: Path) -> None:
    write(tmp_path / "other", secret=TARIFF)
    write(tmp_path / "in", sheet='use "link.ullage"\nuse "folder/secret.ullage"\nsource "folder/a.c"\n')
    (tmp_path / "in" / "link.ullage").symlink_to(tmp_path / "other" / "secret.ullage")
    (tmp_path / "in" / "folder").symlink_to(tmp_path / "other")
    loaded = load(str(tmp_path / "in" / "sheet.ullage"))
    assert [(line, "outside" in message) for line, message in told(loaded)] == [(1, True), (2, True), (3, True)]


def test_sources_need_not_exist_but_may_not_lie_outside(tmp_path: Path) -> None:
    stage = 'stage s\n source "../x.c"\n is\n end\n'
    text = f'source "none.c"\nroutine f()\n source "/etc/hostname"\nis\n{stage}end\n'
    loaded = load_text(str(tmp_path / "a.ullage"), text)
    assert [line for line, _ in told(loaded)] == [3, 6]


# ------------------------------------------------------------------ what is no ordinary file
def test_pipes_devices_and_folders_are_refused_at_once(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe.ullage")
    (tmp_path / "folder.ullage").mkdir()
    start = time.process_time()
    loaded = load_text(str(tmp_path / "a.ullage"), 'use "pipe.ullage"\nuse "folder.ullage"\nuse "."\n')
    assert time.process_time() - start < 1
    assert [line for line, _ in told(loaded)] == [1, 2, 3]
    assert "no regular file" in loaded.problems[0].message


def test_too_large_a_file_is_refused_without_reading_it_all(tmp_path: Path) -> None:
    with open(tmp_path / "large.ullage", "wb") as file:
        file.truncate(2**40)
    loaded = load(str(tmp_path / "large.ullage"))
    assert loaded.sheet is None
    assert f"{LARGEST_SHEET:,}" in loaded.problems[0].message


def test_a_sheet_uses_a_thousand_others_and_no_more(tmp_path: Path) -> None:
    asked = []

    def read(path: str) -> bytes:
        asked.append(path)
        number = int(Path(path).stem)
        return f'use "{number + 1}.ullage"\n'.encode()

    loaded = load(str(tmp_path / "0.ullage"), read)
    assert len(asked) == MOST_SHEETS + 1
    assert "1 mistake in it" in loaded.problems[0].message


def test_no_more_than_a_hundred_problems_are_told() -> None:
    assert len(load_text("/nowhere/a.ullage", 'use "/b"\n' * 300 + "constant c: nat = d\n" * 300).problems) == 100
