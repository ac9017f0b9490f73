"""The sheets of a codebase: files below a folder."""

from __future__ import annotations

import os
from collections.abc import Sequence

from workbench.errors import UsageError

ENDING = ".ullage"


def sheets_below(paths: Sequence[str]) -> list[str]:
    """Every sheet once, in order; hidden folders are left out. Raises UsageError for what is not there."""
    found: dict[str, str] = {}
    for path in paths:
        if os.path.isdir(path):
            for folder, folders, files in os.walk(path):
                folders[:] = sorted(f for f in folders if not f.startswith("."))
                for name in sorted(files):
                    if name.endswith(ENDING):
                        place = os.path.join(folder, name)
                        found.setdefault(os.path.realpath(place), place)
        elif os.path.exists(path):
            found.setdefault(os.path.realpath(path), path)
        else:
            raise UsageError(f"there is no file or folder {path!a}")
    return list(found.values())
