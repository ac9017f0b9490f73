"""What events cost: the `on` lines of all tariffs, in their order."""

from __future__ import annotations

from dataclasses import dataclass, field

from workbench.sheet import tree


@dataclass(slots=True)
class Tariffs:
    """Charges by event. Spends come before holds, whatever the order in which they are written."""

    charges: dict[tree.Event, list[tree.Charge]] = field(default_factory=dict)

    def add(self, line: tree.On) -> None:
        self.charges.setdefault(line.event, []).extend(line.charges)

    def spends(self, event: tree.Event) -> list[tree.Charge]:
        return [c for c in self.charges.get(event, ()) if c.verb == "spend"]

    def holds(self, event: tree.Event) -> list[tree.Charge]:
        return [c for c in self.charges.get(event, ()) if c.verb == "hold"]
