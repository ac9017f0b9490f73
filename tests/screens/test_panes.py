"""The workbench driven by keys, at several sizes."""

from __future__ import annotations

import asyncio
from collections.abc import Awaitable, Callable
from pathlib import Path

import pytest
from textual.pilot import Pilot
from textual.widgets import Input

from workbench.screens.actions import ACTIONS, key_line
from workbench.screens.app import Workbench, formula_problem, looks
from workbench.screens.content import Row
from workbench.screens.looks import BadTheme, read_looks
from workbench.screens.rows import Rows
from workbench.screens.session import Session
from workbench.shipped import folder

SHEET = Path(folder("specs")) / "01-first-look.ullage"


def driven(path: Path, size: tuple[int, int], script: Callable[[Pilot[int], Workbench], Awaitable[None]]) -> None:
    """Runs the workbench without a terminal, and the script of keys on it once the sheet is judged."""

    async def run() -> None:
        app = Workbench(Session.open(str(path)), looks(plain=True))
        async with app.run_test(size=size) as pilot:
            await settled(pilot, app)
            await script(pilot, app)

    asyncio.run(run())


async def settled(pilot: Pilot[int], app: Workbench) -> None:
    for _ in range(200):
        await pilot.pause(0.02)
        if app.session.report_version == app.session.version or app.session.program is None:
            await pilot.pause()
            return
    raise AssertionError("the sheet was not judged")


def text_of(app: Workbench, pane: str) -> str:
    return "\n".join(r.text for r in app.query_one(f"#{pane}", Rows).rows)


@pytest.fixture
def sheet(tmp_path: Path) -> Path:
    path = tmp_path / "first.ullage"
    path.write_bytes(SHEET.read_bytes())
    return path


@pytest.mark.parametrize("size", [(80, 24), (160, 50), (60, 15), (20, 5)])
def test_panes_show_claims_program_and_obligations_at_every_size(sheet: Path, size: tuple[int, int]) -> None:
    async def script(pilot: Pilot[int], app: Workbench) -> None:
        assert "+ proved" in text_of(app, "specification")
        shown = [p for p in ("specification", "refinement", "obligations") if app.query_one(f"#{p}-pane").display]
        assert len(shown) == (3 if size[0] >= 120 else 2 if size[0] >= 80 else 1)
        seen = set()
        for _ in range(4):
            seen.add(app.focused.id if app.focused else "")
            await pilot.press("tab")
        assert seen == {"specification", "refinement", "list", "derivation"}

    driven(sheet, size, script)


def test_a_claim_is_broken_refuted_mended_and_saved_by_keys(sheet: Path) -> None:
    async def script(pilot: Pilot[int], app: Workbench) -> None:
        await pilot.press("enter")
        formula = app.query_one("#formula", Input)
        assert formula.display and formula.value == "spent time = 3*samples"
        await pilot.press("space", "plus", "space", "1", "enter")
        await settled(pilot, app)
        assert "! refuted" in text_of(app, "specification")
        assert "broken by samples = 0" in text_of(app, "specification").replace("time = 0, ", "")
        await pilot.press("u")
        await settled(pilot, app)
        assert "! refuted" not in text_of(app, "specification")
        await pilot.press("r")
        await settled(pilot, app)
        await pilot.press("s")
        await pilot.pause()
        assert "3*samples + 1" in sheet.read_text(encoding="utf-8")

    driven(sheet, (80, 24), script)


def test_escape_leaves_the_formula_as_it_was(sheet: Path) -> None:
    async def script(pilot: Pilot[int], app: Workbench) -> None:
        before = app.session.text
        await pilot.press("enter", "x", "escape")
        await pilot.pause()
        assert app.session.text == before and not app.query_one("#formula", Input).display

    driven(sheet, (80, 24), script)


def test_a_formula_that_cannot_be_read_stays_in_the_line(sheet: Path) -> None:
    async def script(pilot: Pilot[int], app: Workbench) -> None:
        before = app.session.text
        await pilot.press("enter", "plus", "enter")
        await pilot.pause()
        assert app.query_one("#formula", Input).display and app.session.text == before

    driven(sheet, (80, 24), script)


def test_steps_mark_the_statement_that_the_next_substitution_uses(sheet: Path) -> None:
    async def script(pilot: Pilot[int], app: Workbench) -> None:
        first = len(app.query_one("#derivation", Rows).rows)
        marked = [r.text for r in app.query_one("#refinement", Rows).rows if r.role == "next"]
        await pilot.press("n")
        assert len(app.query_one("#derivation", Rows).rows) > first
        again = [r.text for r in app.query_one("#refinement", Rows).rows if r.role == "next"]
        assert marked and marked != again
        await pilot.press("a")
        assert "that is all of it" in text_of(app, "derivation")
        await pilot.press("b")
        assert "1 more" in text_of(app, "derivation")

    driven(sheet, (160, 50), script)


def test_hostile_text_is_shown_and_not_obeyed(tmp_path: Path) -> None:
    path = tmp_path / "hostile.ullage"
    path.write_text(SHEET.read_text(encoding="utf-8") + "\n# [red]\x1b[31m[/nope] 漢字\n", encoding="utf-8")

    async def script(pilot: Pilot[int], app: Workbench) -> None:
        assert "[red]\\x1b[31m[/nope] 漢字" in text_of(app, "refinement")
        assert "\x1b" not in text_of(app, "refinement")

    driven(path, (160, 50), script)


def test_an_unreadable_sheet_says_what_to_mend_and_where(tmp_path: Path) -> None:
    path = tmp_path / "bad.ullage"
    path.write_text("routine wake(n: nat)\nis\n  spend 1 tme\n", encoding="utf-8")

    async def script(pilot: Pilot[int], app: Workbench) -> None:
        assert "line 3" in text_of(app, "specification") or "line 4" in text_of(app, "specification")
        await pilot.press("e")
        await pilot.pause()
        await pilot.press("escape")
        await pilot.pause()
        assert app.session.text == path.read_text(encoding="utf-8")

    driven(path, (80, 24), script)


def test_leaving_asks_while_something_is_not_saved(sheet: Path) -> None:
    async def script(pilot: Pilot[int], app: Workbench) -> None:
        await pilot.press("enter", "space", "plus", "space", "1", "enter")
        await settled(pilot, app)
        await pilot.press("q")
        await pilot.pause()
        assert len(app.screen_stack) == 2
        await pilot.press("escape")
        await pilot.pause()
        assert len(app.screen_stack) == 1 and app.session.changed

    driven(sheet, (80, 24), script)


def test_every_action_is_there_and_no_key_means_two() -> None:
    keys = [k for a in ACTIONS for k in a.keys]
    assert len(keys) == len(set(keys))
    taken = {"ctrl+s", "ctrl+q", "ctrl+z", "ctrl+b", "ctrl+a"}
    assert not taken & set(keys)
    for action in ACTIONS:
        assert action.name == "edit_claim" or hasattr(Workbench, f"action_{action.name}"), action.name


def test_the_line_of_keys_fits_its_width() -> None:
    assert all(len(key_line(w)) <= w for w in range(200))


def test_formulas_are_read_while_they_are_typed() -> None:
    assert formula_problem("spent time = 3*n") is None
    assert formula_problem("spent time = ") is not None


def test_shipped_themes_can_be_read_and_bad_ones_say_why(tmp_path: Path) -> None:
    for path in Path(folder("themes")).glob("*.toml"):
        read_looks(path)
    bad = tmp_path / "bad.toml"
    bad.write_text('[roles]\ntitel = "bold"\n', encoding="utf-8")
    with pytest.raises(BadTheme, match="titel"):
        read_looks(bad)
    bad.write_text('[roles]\ntitle = "no such colour"\n', encoding="utf-8")
    with pytest.raises(BadTheme, match="no such colour"):
        read_looks(bad)


def test_rows_keep_their_texts() -> None:
    assert Row("a", "text", 1).key == 1
