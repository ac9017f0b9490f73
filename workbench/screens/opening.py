"""Which sheet to open: the one named, or one chosen from a folder, from the library, or from the demo sheets."""

from __future__ import annotations

import os
import shutil
from pathlib import Path
from typing import ClassVar

from rich.text import Text
from textual import events
from textual.app import App, ComposeResult
from textual.binding import Binding, BindingType
from textual.widgets import Static

from workbench.errors import UsageError
from workbench.library.folders import sheets_below
from workbench.printing.messages import visible
from workbench.screens.content import Row
from workbench.screens.looks import PLAIN
from workbench.screens.rows import Rows
from workbench.shipped import folder

LIBRARY = "specs"


def choose_sheet(path: str | None) -> str | None:
    """The path of a sheet; None where the user chose none. Raises UsageError for a folder without sheets."""
    if path is not None and not os.path.isdir(path):
        return path
    place, words = (path, f"Sheets in {path}") if path is not None else library()
    sheets = sheets_below([place])
    if not sheets:
        raise UsageError(f"there is no sheet (NAME.ullage) in {place!a}")
    return Chooser(sheets, place, words).run(mouse=False)


def library() -> tuple[str, str]:
    """The library of this folder; where there is none, the demo sheets, copied to the user's own data folder."""
    if os.path.isdir(LIBRARY) and sheets_below([LIBRARY]):
        return LIBRARY, f"The library of this folder, {LIBRARY}/"
    from platformdirs import user_data_dir

    own = Path(user_data_dir("ullage")) / "demo"
    if not own.exists():
        own.parent.mkdir(parents=True, exist_ok=True)
        shutil.copytree(folder("specs"), own)
    return str(own), f"Demo sheets, your own copies in {own}"


class Chooser(App[str]):
    """A list of sheets to open one of."""

    ENABLE_COMMAND_PALETTE = False
    CSS = "Static { height: 1; } Rows { height: 1fr; scrollbar-size: 0 0; }"
    BINDINGS: ClassVar[list[BindingType]] = [Binding("q,escape", "leave", "leave", priority=True)]

    def __init__(self, sheets: list[str], place: str, words: str) -> None:
        super().__init__(ansi_color=True)
        self._rows = [Row("  " + visible(os.path.relpath(s, place)), "text", s) for s in sheets]
        self._words = words

    def compose(self) -> ComposeResult:
        yield Static(Text(visible(self._words), PLAIN.style("title")), markup=False)
        yield Rows(PLAIN, id="sheets")
        yield Static(Text("arrows move   Enter opens the sheet   q leaves", PLAIN.style("line")), markup=False)

    def on_mount(self) -> None:
        rows = self.query_one(Rows)
        rows.fill(self._rows)
        rows.focus()

    def on_key(self, event: events.Key) -> None:
        key = self.query_one(Rows).key
        if event.key == "enter" and isinstance(key, str):
            self.exit(key)

    def action_leave(self) -> None:
        self.exit(None)
