"""Where the folders that travel with the program are: the demo sheets and the themes.

In a checkout (an editable install included) they stand beside the package, in an installed wheel inside it;
pyproject.toml puts them there. No importlib.resources: it costs more than the rest of start-up.
"""

from __future__ import annotations

from pathlib import Path
from typing import Literal

from workbench.errors import UllageError


class NotShipped(UllageError):
    """A folder that belongs to the program is missing from its installation."""


def folder(name: Literal["specs", "themes"], package: Path | None = None) -> Path:
    """The shipped folder of that name. `package` is the package's own folder, for tests.

    Raises NotShipped where the installation lacks it.
    """
    package = package or Path(__file__).resolve().parent
    for place in (package / f"shipped_{name}", package.parent / name):
        if place.is_dir():
            return place
    raise NotShipped(f"the installation in {package} lacks its folder of {name}: install the program again")
