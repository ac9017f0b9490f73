"""Long formulas on several lines: broken at operators, continued under where they began, never cut."""

from __future__ import annotations

import re
from collections.abc import Iterator

# Places where a formula may be broken: before an operator with spaces round it, or before a word that begins a part.
_BREAK = re.compile(r" (?=(?:implies|and|or|then|else|[-+]|<=|>=|!=|=|<|>|div|mod) )")


def wrapped(text: str, width: int, indent: int = 0, hanging: int = 4) -> Iterator[str]:
    """Lines of at most `width` characters where the formula allows it; later ones stand `hanging` further in."""
    room = max(width - indent, 20)
    lead, line = " " * indent, ""
    for part in _BREAK.split(text):
        longer = f"{line} {part}" if line else part
        if line and len(longer) > room:
            yield lead + line
            lead, room, line = " " * (indent + hanging), max(width - indent - hanging, 20), part
        else:
            line = longer
    yield lead + line
