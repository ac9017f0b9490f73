"""Files written whole: whatever happens in between, the file is the old one or the new one."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Iterable

NEW_MODE = 0o644  # of a file that was not there


def write_whole(path: str, parts: Iterable[bytes]) -> None:
    """Writes by way of a second file in the same folder, and keeps the mode. Raises OSError; nothing is left behind
    then.
    """
    target = os.path.realpath(path)
    mode = os.stat(target).st_mode & 0o7777 if os.path.exists(target) else NEW_MODE
    handle, name = tempfile.mkstemp(prefix=".ullage-", dir=os.path.dirname(target))
    try:
        with open(handle, "wb") as file:
            for part in parts:
                file.write(part)
            file.flush()
            os.fsync(file.fileno())
        os.chmod(name, mode)
        os.replace(name, target)
    except BaseException:
        os.unlink(name)
        raise
