"""A pane of rows, drawn line by line: what moves is redrawn, and nothing else, since links may be slow."""

from __future__ import annotations

from rich.segment import Segment
from rich.style import Style
from textual import events
from textual.geometry import Region, Size
from textual.message import Message
from textual.scroll_view import ScrollView
from textual.strip import Strip

from workbench.screens.content import Row
from workbench.screens.looks import Looks


class Rows(ScrollView, can_focus=True):
    """Rows with a cursor on those that stand for something."""

    class Moved(Message):
        """The cursor stands on another row."""

        def __init__(self, pane: Rows, key: object) -> None:
            super().__init__()
            self.pane = pane
            self.key = key

    class Resized(Message):
        """The pane has another width: whoever fills it must wrap again."""

        def __init__(self, pane: Rows) -> None:
            super().__init__()
            self.pane = pane

    def __init__(self, looks: Looks, *, id: str) -> None:
        super().__init__(id=id)
        self.looks = looks
        self.rows: list[Row] = []
        self.cursor = 0

    # -------------------------------------------------------------- content
    def fill(self, rows: list[Row], key: object = None) -> None:
        """Other rows; the cursor goes to the key, or stays where it was as nearly as it can."""
        if rows == self.rows and key is None:
            return
        self.rows = rows
        if key is not None:
            self.cursor = next((i for i, r in enumerate(rows) if r.key == key), self.cursor)
        self.cursor = self._near(min(self.cursor, max(0, len(rows) - 1)))
        self.virtual_size = Size(self.size.width, len(rows))
        self._keep_in_sight()
        if key is not None:
            self._keep_rest_in_sight()
        self.refresh()

    def _keep_rest_in_sight(self) -> None:
        """What belongs to the cursor's row stands below it, up to the next one that the cursor can stand on."""
        after = (i for i in range(self.cursor + 1, len(self.rows)) if self.rows[i].key is not None)
        end = next(after, len(self.rows))
        height = max(1, self.size.height)
        top = min(self.cursor, end - height)
        if top > self.scroll_offset.y:
            self.scroll_to(y=top, animate=False, immediate=True)

    @property
    def key(self) -> object:
        """What the cursor stands on."""
        return self.rows[self.cursor].key if self.cursor < len(self.rows) else None

    def _near(self, index: int) -> int:
        """The nearest row that stands for something; the row itself where none does."""
        stops = [i for i, r in enumerate(self.rows) if r.key is not None]
        return min(stops, key=lambda i: (i < index, abs(i - index)), default=index)

    # -------------------------------------------------------------- drawing
    def render_line(self, y: int) -> Strip:
        """One line, as wide as the pane."""
        index = y + self.scroll_offset.y
        width = self.size.width
        if index >= len(self.rows):
            return Strip.blank(width, self.looks.style("text"))
        row = self.rows[index]
        style = self.looks.style(row.role)
        if index == self.cursor and row.key is not None:
            style = style + (Style(reverse=True) if self.has_focus else Style(underline=True))
        return Strip([Segment(row.text, style)]).adjust_cell_length(width, style).crop(0, width)

    def on_resize(self, event: events.Resize) -> None:
        self.post_message(self.Resized(self))

    def on_focus(self) -> None:
        self._redraw(self.cursor)

    def on_blur(self) -> None:
        self._redraw(self.cursor)

    def _redraw(self, index: int) -> None:
        y = index - self.scroll_offset.y
        if 0 <= y < self.size.height:
            self.refresh(Region(0, y, self.size.width, 1))

    # -------------------------------------------------------------- moving
    def on_key(self, event: events.Key) -> None:
        page = max(1, self.size.height - 1)
        steps = {"up": -1, "down": 1, "pageup": -page, "pagedown": page, "home": -len(self.rows), "end": len(self.rows)}
        if event.key in steps:
            event.stop()
            self.move(steps[event.key])

    def move(self, by: int) -> None:
        """The cursor goes to the next row that stands for something; where there is none, the pane scrolls."""
        target = self._stop_at(by)
        if target is None or target == self.cursor:
            self.scroll_to(y=self.scroll_offset.y + by, animate=False)
            return
        before, self.cursor = self.cursor, target
        scrolled = self._keep_in_sight()
        if scrolled:
            self.refresh()
        else:
            self._redraw(before)
            self._redraw(target)
        self.post_message(self.Moved(self, self.key))

    def _stop_at(self, by: int) -> int | None:
        stops = [i for i, r in enumerate(self.rows) if r.key is not None]
        if abs(by) > 1:
            wanted = max(0, min(self.cursor + by, len(self.rows) - 1))
            return min(stops, key=lambda i: abs(i - wanted), default=None)
        if by > 0:
            return next((i for i in stops if i > self.cursor), None)
        return next((i for i in reversed(stops) if i < self.cursor), None)

    def _keep_in_sight(self) -> bool:
        top, height = self.scroll_offset.y, max(1, self.size.height)
        if top <= self.cursor < top + height:
            return False
        goal = self.cursor - 1 if self.cursor < top else self.cursor - height + 2
        self.scroll_to(y=max(0, goal), animate=False, immediate=True)
        return True
