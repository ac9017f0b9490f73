"""A terminal that goes away: what is not saved is put aside, and the program ends instead of spinning on a dead
line.
"""

from __future__ import annotations

import os
import select
import threading
from collections.abc import Callable
from pathlib import Path

from platformdirs import user_state_dir

# Seconds between two looks at the terminal.
PATIENCE = 0.5
HANGUP = 129  # 128 + SIGHUP, as shells report it


def watch(put_aside: Callable[[], object], fd: int = 0) -> None:
    """Starts a thread that ends the program once the terminal on `fd` is gone, after `put_aside`."""
    threading.Thread(target=_watch, args=(put_aside, fd), daemon=True).start()


def _watch(put_aside: Callable[[], object], fd: int) -> None:
    poller = select.poll()
    poller.register(fd, 0)  # asks for nothing: a hang-up is told all the same
    while True:
        if any(event & (select.POLLHUP | select.POLLERR | select.POLLNVAL) for _, event in poller.poll(PATIENCE *
        1000)):
            put_aside()
            os._exit(HANGUP)


def put_text_aside(path: str, text: str) -> Path:
    """Writes the text where the next opening of the sheet finds it."""
    place = aside(path)
    place.parent.mkdir(parents=True, exist_ok=True)
    temporary = place.with_suffix(".part")
    temporary.write_text(text, encoding="utf-8")
    os.replace(temporary, place)
    return place


def aside(path: str) -> Path:
    """Where the unsaved text of a sheet is put."""
    name = os.path.realpath(path).replace(os.sep, "%")
    return Path(user_state_dir("ullage")) / "unsaved" / name[-200:]
