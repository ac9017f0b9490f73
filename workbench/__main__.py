"""The way in: `ullage` and `python -m workbench`.

Reads the first word and hands the rest to one module, imported only then: start-up is felt on every call, most of
all over a slow link. So this module imports nothing but sys at first, and `--version` and `--help` import nothing
more. Every command module has `main(arguments: list[str]) -> int`; its result is the exit status.
"""

from __future__ import annotations

import sys

from workbench import __version__

COMMANDS = {
    "check": ("PATH… [--json] [--jobs N]", "prove everything below PATH; one line a claim"),
    "run": ("FILE ROUTINE NAME=VALUE…", "run a routine on values: spent, net, peak, area, mean"),
    "print": ("PATH… [--format FORMAT]", "the derivation of every claim, for a review document"),
    "find": ("FILE ROUTINE [ASPECT RESOURCE]", "find the formula of a cost, or the tightest bound"),
    "weigh": ("PATH… [--json]", "hold bounds against budgets and pools: the room left"),
    "list": ("[DIR] [--json]", "the library: bounds, seals, what is stale"),
}

HELP_BEFORE = """\
Proves what routines cost in time and space, for every input.

ullage [FILE or DIR]   opens the workbench: a sheet, a library, or the shipped demo sheets
ullage COMMAND …       one of these, each with a --help of its own:

"""
HELP_AFTER = """
Options
  --help        this text
  --version     name and version
  --plain       ASCII only, in the workbench and in what a command writes

Answers go to stdout, messages to stderr. Exit status: 0 all well, 1 something open or refuted,
2 something unreadable or wrongly used.
"""

OK, UNUSABLE, INTERRUPTED, PIPE_CLOSED = 0, 2, 130, 141  # as in workbench.exits, which would cost an import of enum


def main(argv: list[str] | None = None) -> int:
    """Carries out one call of the program; the exit status. `argv` is without the program's name."""
    arguments = sys.argv[1:] if argv is None else argv
    try:
        status = _carry_out(arguments)
        if sys.stdout is not None:
            sys.stdout.flush()
        return status
    except KeyboardInterrupt:
        _complain("interrupted")
        return INTERRUPTED
    except BrokenPipeError:
        _settle_output()
        return PIPE_CLOSED
    except OSError as error:  # a full disk under the answer, most likely: commands report what they read themselves
        _complain(f"{error.filename}: {error.strerror}" if error.filename else str(error.strerror or error))
        _settle_output()
        return UNUSABLE


def _carry_out(arguments: list[str]) -> int:
    first = arguments[0] if arguments else ""
    if first == "--version":
        print("ullage", __version__)
        return OK
    if first in ("--help", "-h") or arguments == ["help"]:
        print(_help(), end="")
        return OK
    return _call(arguments)


def _help() -> str:
    lines = []
    for name, (form, purpose) in COMMANDS.items():
        there = "" if _is_there(name) else " (not there yet)"
        lines.append(f"  {name + ' ' + form:38}{purpose}{there}\n")
    return HELP_BEFORE + "".join(lines) + HELP_AFTER


def _is_there(command: str) -> bool:
    import os

    return os.path.exists(os.path.join(os.path.dirname(__file__), "commands", command + ".py"))


def _call(arguments: list[str]) -> int:
    from workbench.errors import UllageError

    for stream in (sys.stdout, sys.stderr):
        # A name that the terminal's encoding lacks must come out somehow: an escape, never a traceback.
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="backslashreplace")
    try:
        if arguments[:1] == ["help"]:
            arguments = [*arguments[1:], "--help"]
        if arguments and arguments[0] in COMMANDS:
            return _load(f"commands.{arguments[0]}", f"ullage {arguments[0]}", arguments[1:])
        return _open(arguments)
    except UllageError as error:
        _complain(str(error))
        return UNUSABLE


def _open(arguments: list[str]) -> int:
    """The workbench on a file, a folder or nothing."""
    import os

    from workbench.errors import UsageError

    paths = [a for a in arguments if a != "--plain"]
    if paths and (paths[0].startswith("-") or not os.path.exists(paths[0])):
        raise UsageError(_unknown(paths[0]))
    if len(paths) > 1:
        raise UsageError("the workbench opens one file or folder")
    return _load("screens.app", "the workbench", paths[0] if paths else None, plain="--plain" in arguments)


def _unknown(word: str) -> str:
    from difflib import get_close_matches

    if word.startswith("-"):
        return f"there is no option {word!a}; see ullage --help"
    near = get_close_matches(word, COMMANDS, n=1)
    hint = f"; is {near[0]} meant?" if near else "; see ullage --help"
    return f"{word!a} is no command, and no file or folder of that name is here{hint}"


def _load(module: str, title: str, *arguments: object, **options: object) -> int:
    from importlib import import_module

    from workbench.errors import UsageError

    name = f"workbench.{module}"
    try:
        found = import_module(name)
    except ModuleNotFoundError as error:
        if error.name is None or not (name == error.name or name.startswith(error.name + ".")):
            raise  # one of its own imports is missing: that is another matter
        raise UsageError(f"{title} is not there yet in version {__version__}") from None
    return int(found.main(*arguments, **options))


def _complain(message: str) -> None:
    try:
        print(f"ullage: {message}", file=sys.stderr, flush=True)
    except OSError:
        pass  # nobody is left to be told


def _settle_output() -> None:
    """Writes out what is buffered, or where that fails drops it, so that the interpreter's own last flush is silent."""
    import os

    try:
        sys.stdout.flush()
    except OSError:
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, sys.stdout.fileno())
        os.close(nowhere)


if __name__ == "__main__":
    sys.exit(main())
