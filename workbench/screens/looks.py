"""How roles look: read from a theme, a plain file of roles and styles."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from pathlib import Path

from rich.errors import StyleSyntaxError
from rich.style import Style

from workbench.errors import UllageError

ROLES = ("text", "dim", "title", "proved", "refuted", "open", "proving", "path", "next", "step", "line")


class BadTheme(UllageError):
    """A theme's file cannot be used; says which line of it and why."""


class Looks:
    """A style for each role."""

    def __init__(self, styles: Mapping[str, Style]) -> None:
        self._styles = styles

    def style(self, role: str) -> Style:
        return self._styles.get(role, Style())


PLAIN = Looks({"title": Style(bold=True), "line": Style(reverse=True), "next": Style(bold=True)})


def read_looks(path: Path) -> Looks:
    """The theme in a file. Raises BadTheme."""
    try:
        data = tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, tomllib.TOMLDecodeError, UnicodeDecodeError) as e:
        raise BadTheme(f"{path}: {e}") from None
    styles = {}
    for role, text in data.get("roles", {}).items():
        if role not in ROLES:
            raise BadTheme(f"{path}: there is no role {role!a}; there is {', '.join(ROLES)}")
        try:
            styles[role] = Style.parse(str(text))
        except StyleSyntaxError:
            raise BadTheme(f"{path}: {role} = {text!a} is no style; write colours and bold, dim, reverse") from None
    return Looks(styles)
