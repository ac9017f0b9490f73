"""Exit statuses of the program. Scripts rely on them: a change is a change of the interface."""

from __future__ import annotations

from enum import IntEnum


class Exit(IntEnum):
    """What a call ended in."""

    OK = 0  # all verified, or done
    UNPROVED = 1  # something is open or refuted, or does not fit
    UNUSABLE = 2  # something is unreadable, wrongly used, or not there
    INTERRUPTED = 130  # 128 + SIGINT, as shells report it
    PIPE_CLOSED = 141  # 128 + SIGPIPE: whoever read the answer went away
