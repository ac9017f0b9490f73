"""The workbench: three panes over one session. Proofs run in a thread; the newest text wins."""

from __future__ import annotations

import os
import sys
from pathlib import Path
from typing import ClassVar

from rich.text import Text
from textual import events, work
from textual.app import App, ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Horizontal, Vertical
from textual.widgets import Input, Static
from textual.worker import get_current_worker

from workbench.errors import SheetError, UsageError
from workbench.exits import Exit
from workbench.printing.messages import visible
from workbench.proof.search import Stopped
from workbench.screens import content
from workbench.screens.actions import ACTIONS, key_line
from workbench.screens.dialogs import HelpDialog, Question, TextDialog
from workbench.screens.hangup import aside, put_text_aside, watch
from workbench.screens.looks import PLAIN, Looks, read_looks
from workbench.screens.rows import Rows
from workbench.screens.saving import ChangedOnDisk, NotSaved
from workbench.screens.session import ClaimPlace, Session
from workbench.sheet.reader import read_formula

# As wide as this, all three panes stand side by side; from MIDDLE on, two.
WIDE = 120
MIDDLE = 80
# How long a thread works before others get their turn, in seconds: keys come before proofs.
TURN = 0.001
PANES = ("specification", "refinement", "obligations")


class Workbench(App[int]):
    """One sheet on the screen."""

    ENABLE_COMMAND_PALETTE = False
    CSS = """
    Screen { layers: base; scrollbar-size: 0 0; }
    #panes { height: 1fr; }
    .pane { width: 1fr; height: 1fr; padding-right: 1; }
    .title { height: 1; }
    Rows { height: 1fr; scrollbar-size: 0 0; }
    #list { height: 2fr; }
    #derivation { height: 3fr; }
    #formula { height: 1; border: none; padding: 0; display: none; }
    #told { height: 1; display: none; }
    #status { height: 1; }
    #keys { height: 1; }
    """
    BINDINGS: ClassVar[list[BindingType]] = [
        # A screen of its own accord takes Tab for any widget that is shown; panes that are hidden must be reached too.
        Binding(",".join(a.keys), a.name, a.help, show=False, priority=a.name.endswith("_pane"))
        for a in ACTIONS
        if a.name != "edit_claim"
    ]

    def __init__(self, session: Session, looks: Looks) -> None:
        super().__init__(ansi_color=True)
        self.session = session
        self.looks = looks
        self.unfolded = False
        self.priced = False
        self.largest = False
        self.pane = "specification"
        self.editing: ClaimPlace | None = None

    # -------------------------------------------------------------- layout
    def compose(self) -> ComposeResult:
        with Horizontal(id="panes"):
            with Vertical(classes="pane", id="specification-pane"):
                yield Static("", classes="title", id="specification-title", markup=False)
                yield Rows(self.looks, id="specification")
                yield Input(id="formula", select_on_focus=False)
                yield Static("", id="told", markup=False)
            with Vertical(classes="pane", id="refinement-pane"):
                yield Static("", classes="title", id="refinement-title", markup=False)
                yield Rows(self.looks, id="refinement")
            with Vertical(classes="pane", id="obligations-pane"):
                yield Static("", classes="title", id="obligations-title", markup=False)
                yield Rows(self.looks, id="list")
                yield Rows(self.looks, id="derivation")
        yield Static("", id="status", markup=False)
        yield Static("", id="keys", markup=False)

    def on_mount(self) -> None:
        self.animation_level = "none"
        self.query_one("#formula", Input).cursor_blink = False
        self._arrange()
        self.query_one("#specification", Rows).focus()
        self.prove()
        self._offer_unsaved()

    def on_resize(self, event: events.Resize) -> None:
        self._arrange()

    def _shown_panes(self) -> tuple[str, ...]:
        width = self.size.width
        if self.largest or width < MIDDLE:
            return (self.pane,)
        if width < WIDE:
            return ("refinement", "obligations") if self.pane == "refinement" else ("specification", "obligations")
        return PANES

    def _arrange(self) -> None:
        shown = self._shown_panes()
        for name in PANES:
            self.query_one(f"#{name}-pane").display = name in shown
        self._keys()
        self.refill()

    def _keys(self) -> None:
        width = self.size.width
        hidden = [n for n in PANES if n not in self._shown_panes()]
        more = f"Tab: {', '.join(hidden)}" if hidden else ""
        line = key_line(width - len(more) - 2)
        self.query_one("#keys", Static).update(
            Text(f"{line}{more:>{max(0, width - len(line))}}", self.looks.style("line"))
        )

    # -------------------------------------------------------------- content
    def refill(self) -> None:
        """All panes say what the session knows now."""
        s = self.session
        specification = self.query_one("#specification", Rows)
        specification.fill(content.specification_rows(s, specification.size.width or 40, self.unfolded))
        self._fill_derivation(whole=True)
        self._titles()

    def _titles(self) -> None:
        s = self.session
        changed = " (not saved)" if s.changed else ""
        self._title("specification", f"Specification  {visible(os.path.basename(s.disk.path))}{changed}")
        self._title("refinement", "Refinement  priced program" if self.priced else "Refinement  text")
        self._title("obligations", f"Obligations  {self._count()}")

    def _fill_derivation(self, *, whole: bool = False) -> None:
        s = self.session
        every, derivation = self.query_one("#list", Rows), self.query_one("#derivation", Rows)
        refinement = self.query_one("#refinement", Rows)
        if whole:
            every.fill(content.obligation_rows(s, every.size.width or 40), s.selected)
        rows = content.derivation_rows(s, derivation.size.width or 40)
        derivation.fill(rows, s.shown)
        _, following = content.marked_lines(s)
        refinement.fill(content.refinement_rows(s, refinement.size.width or 40, self.priced), following or None)

    def _title(self, pane: str, words: str) -> None:
        mark = "* " if pane == self.pane else "  "
        self.query_one(f"#{pane}-title", Static).update(Text(mark + words, self.looks.style("title")))

    def _count(self) -> str:
        every = self.session.obligations()
        if not every:
            return "proving" if self.session.report_version != self.session.version else ""
        counts = {v: sum(1 for d in every if d.verdict == v) for v in ("proved", "refuted", "open")}
        return ", ".join(f"{n} {v}" for v, n in counts.items() if n)

    def say(self, words: str) -> None:
        """A line above the keys."""
        self.query_one("#status", Static).update(Text(visible(words)))

    # -------------------------------------------------------------- proving
    def prove(self) -> None:
        """Judges the present text in the background; a judgement of an older text is stopped."""
        if self.session.program is None:
            self.say("")
            self.refill()
            return
        self.say("proving")
        self._prove(self.session.version)

    @work(thread=True, exclusive=True, exit_on_error=False)
    def _prove(self, version: int) -> None:
        worker = get_current_worker()
        try:
            done, report = self.session.judge(version, lambda: worker.is_cancelled or version != self.session.version)
        except Stopped:
            return
        self.call_from_thread(self._proved, done, report)

    def _proved(self, version: int, report: object) -> None:
        if self.session.take_report(version, report):  # type: ignore[arg-type]
            self.say(f"{self.session.report.verdict}" if self.session.report is not None else "")
            self.refill()

    def _offer_unsaved(self) -> None:
        """A text that could not be saved when the terminal went away."""
        place = aside(self.session.disk.path)
        if not place.exists():
            return

        def answered(key: str | None) -> None:
            if key == "y":
                self.session.set_text(place.read_text(encoding="utf-8"))
                self._changed("the unsaved text; u brings the file's back")
            if key is not None:
                place.unlink(missing_ok=True)

        question = "The terminal went away with a text that was not saved."
        self.push_screen(Question(question, {"y": "take it up again", "d": "drop it"}), answered)

    # -------------------------------------------------------------- moving about
    def on_rows_resized(self, message: Rows.Resized) -> None:
        self.refill()

    def on_rows_moved(self, message: Rows.Moved) -> None:
        if message.pane.id == "list" and isinstance(message.key, int):
            self.session.select(message.key)
            self._fill_derivation()
        elif message.pane.id == "specification" and isinstance(message.key, ClaimPlace):
            self.session.select_claim(message.key)
            self._fill_derivation(whole=True)

    def on_descendant_focus(self, event: events.DescendantFocus) -> None:
        name = event.widget.id or ""
        pane = {"list": "obligations", "derivation": "obligations", "formula": "specification"}.get(name, name)
        if pane in PANES and pane != self.pane and pane in self._shown_panes():
            self.pane = pane
            self._titles()

    def action_next_pane(self) -> None:
        self._go(1)

    def action_previous_pane(self) -> None:
        self._go(-1)

    def _go(self, by: int) -> None:
        if len(self.screen_stack) > 1 or self.editing is not None:
            return
        order = ("specification", "refinement", "list", "derivation")
        here = self.focused.id if self.focused is not None and self.focused.id in order else order[0]
        name = order[(order.index(here) + by) % len(order)]
        pane = "obligations" if name in ("list", "derivation") else name
        # The pane must be there to be gone to, and gone to before the other one is hidden.
        self.query_one(f"#{pane}-pane").display = True
        self.screen.set_focus(self.query_one(f"#{name}", Rows))
        self.pane = pane
        self._arrange()

    # -------------------------------------------------------------- actions
    def action_step(self) -> None:
        self.session.step(1)
        self._fill_derivation()

    def action_all_steps(self) -> None:
        self.session.all_steps()
        self._fill_derivation()

    def action_step_back(self) -> None:
        self.session.step(-1)
        self._fill_derivation()

    def action_unfold(self) -> None:
        self.unfolded = not self.unfolded
        self.refill()

    def action_priced(self) -> None:
        self.priced = not self.priced
        self.refill()

    def action_largest(self) -> None:
        self.largest = not self.largest
        self._arrange()

    def action_help(self) -> None:
        self.push_screen(HelpDialog())

    def action_undo(self) -> None:
        self._changed("taken back" if self.session.undo() else "nothing to take back")

    def action_redo(self) -> None:
        self._changed("made again" if self.session.redo() else "nothing to make again")

    def _changed(self, words: str) -> None:
        self.refill()
        self.prove()
        if self.session.program is None or "nothing" in words:
            self.say(words)

    def action_edit_text(self) -> None:
        key = self.query_one("#refinement", Rows).key
        problems = self.session.loaded.problems
        line = problems[0].span.line if problems else key if isinstance(key, int) else 1

        def taken(text: str | None) -> None:
            if text is not None and text != self.session.text:
                self.session.set_text(text)
                self._changed("changed")

        self.push_screen(TextDialog(self.session.text, line), taken)

    # -------------------------------------------------------------- one formula
    def on_key(self, event: events.Key) -> None:
        if event.key == "enter" and self.focused is not None and self.focused.id == "specification":
            event.stop()
            self._edit_claim()
        elif event.key == "escape" and self.editing is not None:
            event.stop()
            self._leave_formula("left as it was")

    def _edit_claim(self) -> None:
        place = self.query_one("#specification", Rows).key
        if not isinstance(place, ClaimPlace):
            self.say("move to a claim first; e edits the whole text")
            return
        if place.claim.inferred:
            self.say("this claim was worked out by the tool; e edits the whole text")
            return
        self.editing = place
        formula = self.query_one("#formula", Input)
        formula.display = True
        self.query_one("#told", Static).display = True
        formula.value = self.session.formula_of(place)
        formula.cursor_position = len(formula.value)
        formula.focus()
        self.say(f"{place.routine}.{place.claim.label}: Enter proves it, Esc leaves it")

    def on_input_changed(self, event: Input.Changed) -> None:
        problem = formula_problem(event.value)
        self.query_one("#told", Static).update(Text(visible(problem or "it can be read")))

    def on_input_submitted(self, event: Input.Submitted) -> None:
        place = self.editing
        problem = formula_problem(event.value)
        if place is None or problem:
            self.say(problem or "")
            return
        before = self.session.text
        self.session.edit_claim(place, event.value)
        if self.session.loaded.problems:
            told = self.session.loaded.problems[0].message
            self.session.undo()
            self.query_one("#told", Static).update(Text(visible(told)))
            return
        self._leave_formula("")
        if self.session.text != before:
            self._changed("changed")

    def _leave_formula(self, words: str) -> None:
        self.editing = None
        self.query_one("#formula", Input).display = False
        self.query_one("#told", Static).display = False
        self.query_one("#specification", Rows).focus()
        self.say(words)

    # -------------------------------------------------------------- saving and leaving
    def action_save(self) -> None:
        self._save(leave=False, over=False)

    def _save(self, *, leave: bool, over: bool) -> None:
        try:
            self.session.save(over=over)
        except ChangedOnDisk as e:
            self._ask_over(str(e), leave)
            return
        except NotSaved as e:
            self.say(str(e))
            return
        self.refill()
        self.say(f"saved {self.session.disk.path}")
        if leave:
            self.exit(Exit.OK)

    def _ask_over(self, question: str, leave: bool) -> None:
        def answered(key: str | None) -> None:
            if key == "o":
                self._save(leave=leave, over=True)
            elif key == "t":
                theirs = Session.open(self.session.disk.path)
                self.session.disk = theirs.disk
                self.session.set_text(theirs.text)
                self._changed("theirs; u brings yours back")

        self.push_screen(
            Question(question, {"o": "write over it", "t": "take theirs (yours can be had back)"}), answered
        )

    def action_leave(self) -> None:
        if not self.session.changed:
            self.exit(Exit.OK)
            return

        def answered(key: str | None) -> None:
            if key == "s":
                self._save(leave=True, over=False)
            elif key == "d":
                self.exit(Exit.OK)

        answers = {"s": "save and leave", "d": "leave without saving"}
        self.push_screen(Question("The sheet is not saved.", answers), answered)


def formula_problem(text: str) -> str | None:
    """What is wrong with a formula as it is typed; None where it can be read."""
    try:
        read_formula(text)
    except SheetError as e:
        return e.problems[0].message
    return None


def main(path: str | None, *, plain: bool = False) -> int:
    """Opens the workbench on a sheet, or a folder's sheets to choose from; with nothing, on this folder's library or
    the demo.
    """
    if os.environ.get("TERM", "") in ("", "dumb"):
        raise UsageError("this terminal cannot show the workbench (TERM says so); use ullage check, run and print")
    if not (sys.stdin.isatty() and sys.stdout.isatty()):
        raise UsageError("the workbench needs a terminal; use ullage check, run and print")
    from workbench.screens.opening import choose_sheet

    chosen = choose_sheet(path)
    if chosen is None:
        return Exit.OK
    try:
        session = Session.open(chosen)
    except OSError as e:
        raise UsageError(f"{chosen!a} cannot be read: {e.strerror}") from None
    sys.setswitchinterval(TURN)
    app = Workbench(session, looks(plain=plain))
    watch(lambda: put_text_aside(session.disk.path, session.text) if session.changed else None)
    return int(app.run(mouse=False) or Exit.OK)


def looks(*, plain: bool) -> Looks:
    """The theme: none where colour is not wanted."""
    from workbench.shipped import folder

    if plain or os.environ.get("NO_COLOR"):
        return PLAIN
    return read_looks(Path(folder("themes")) / "dusk.toml")
