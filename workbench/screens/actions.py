"""Every action of the workbench: its name, a help line, its keys. One table feeds keys, the line of keys, and the
help.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Action:
    """`short` is the word in the line of keys; empty: it stands in the help only."""

    name: str
    keys: tuple[str, ...]
    help: str
    short: str = ""


ACTIONS = (
    Action(
        "edit_claim",
        ("enter",),
        "Change the selected claim's formula; Enter again proves it, Escape leaves it",
        "change",
    ),
    Action("step", ("n",), "Show the next step of the derivation", "next step"),
    Action("all_steps", ("a",), "Show all steps", "all"),
    Action("step_back", ("b",), "Take the last step back", "back"),
    Action("next_pane", ("tab",), "Go to the next pane", "pane"),
    Action("previous_pane", ("shift+tab",), "Go to the pane before"),
    Action("unfold", ("f",), "Show short forms as full formulas, or short again", "full"),
    Action("priced", ("p",), "Show the priced program, or the text again", "priced"),
    Action("edit_text", ("e",), "Edit the whole text of the sheet", "edit"),
    Action("undo", ("u",), "Take the last change of the text back", "undo"),
    Action("redo", ("r",), "Make it again"),
    Action("save", ("s",), "Save the sheet", "save"),
    Action("largest", ("m",), "Give the pane the whole screen, or its share again"),
    Action("help", ("question_mark",), "What the keys do, and what the marks mean", "help"),
    Action("leave", ("q",), "Leave; asks where something is not saved", "leave"),
)
# How keys are written where people read them.
KEY_NAMES = {"question_mark": "?", "enter": "Enter", "tab": "Tab", "shift+tab": "Shift-Tab", "escape": "Esc"}


def key_name(key: str) -> str:
    return KEY_NAMES.get(key, key)


def key_line(width: int) -> str:
    """The line of keys, as many as fit."""
    line = ""
    for action in ACTIONS:
        if action.short:
            part = f"{key_name(action.keys[0])} {action.short}"
            longer = f"{line}  {part}" if line else part
            if len(longer) > width:
                break
            line = longer
    return line
