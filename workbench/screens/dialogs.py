"""Dialogs: the whole text, help, and questions before something would be lost."""

from __future__ import annotations

from typing import ClassVar

from rich.text import Text
from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.screen import ModalScreen
from textual.widgets import Static, TextArea

from workbench.printing.messages import visible
from workbench.screens.actions import ACTIONS, key_name
from workbench.sheet.reader import read_sheet


class TextDialog(ModalScreen[str | None]):
    """The sheet's whole text; the reader's first message stands below while it is typed."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape", "keep", "take the text over", priority=True),
        Binding("ctrl+g", "drop", "leave it as it was", priority=True),
    ]
    CSS = "TextDialog { align: center middle; } #text { height: 1fr; border: none; } .told { height: 1; }"

    def __init__(self, text: str, line: int) -> None:
        super().__init__()
        self._text = text
        self._line = line

    def compose(self) -> ComposeResult:
        area = TextArea(self._text, id="text", show_line_numbers=True, soft_wrap=False, highlight_cursor_line=False)
        area.cursor_blink = False
        yield area
        yield Static("", id="told", classes="told", markup=False)
        yield Static(
            "Esc takes the text over and proves it   Ctrl-G leaves the sheet as it was", classes="told", markup=False
        )

    def on_mount(self) -> None:
        area = self.query_one(TextArea)
        area.move_cursor((max(0, self._line - 1), 0), center=True)
        area.focus()
        self._tell()

    def on_text_area_changed(self) -> None:
        self._tell()

    def _tell(self) -> None:
        problems = read_sheet(self.query_one(TextArea).text, "").problems
        told = "it can be read"
        if problems:
            p = problems[0]
            more = f"   ({len(problems) - 1} more)" if len(problems) > 1 else ""
            told = f"line {p.span.line}, column {p.span.column}: {p.message}{more}"
        self.query_one("#told", Static).update(Text(visible(told)))

    def action_keep(self) -> None:
        self.dismiss(self.query_one(TextArea).text)

    def action_drop(self) -> None:
        self.dismiss(None)


class HelpDialog(ModalScreen[None]):
    """What the keys do, and what the marks mean."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape", "app.pop_screen", "back", priority=True),
        Binding("question_mark", "app.pop_screen", "back"),
        Binding("q", "app.pop_screen", "back"),
    ]

    def compose(self) -> ComposeResult:
        lines = [f"{', '.join(map(key_name, a.keys)):12} {a.help}" for a in ACTIONS]
        lines += ["arrows       Move; PageUp, PageDown, Home and End too", ""]
        lines += ["+ proved     the kernel has checked a proof for every input",
                  "! refuted    the values shown break it",
                  "? open       neither; what is missing is said below it",
                  "| path       a statement on the selected obligation's path",
                  "> next       the statement that the next substitution uses", ""]  # fmt: skip
        lines.append("Esc goes back")
        yield Static(Text("\n".join(lines)), markup=False)


class Question(ModalScreen[str | None]):
    """A question with an answer a key; Escape answers nothing."""

    BINDINGS: ClassVar[list[BindingType]] = [Binding("escape", "nothing", "back", priority=True)]
    CSS = "Question { align: left bottom; } Question Static { height: auto; }"

    def __init__(self, question: str, answers: dict[str, str]) -> None:
        super().__init__()
        self._question = question
        self._answers = answers

    def compose(self) -> ComposeResult:
        answers = "   ".join(f"{key} {words}" for key, words in self._answers.items())
        yield Static(Text(f"{visible(self._question)}\n{answers}   Esc goes back"), markup=False)

    def on_key(self, event: object) -> None:
        key = getattr(event, "key", "")
        if key in self._answers:
            self.dismiss(key)

    def action_nothing(self) -> None:
        self.dismiss(None)
