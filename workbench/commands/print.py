"""`ullage print PATH…`: derivations, for a review document."""

from __future__ import annotations

import sys
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from workbench.errors import UsageError
from workbench.exits import Exit
from workbench.library.checking import check_loaded
from workbench.library.folders import sheets_below
from workbench.library.loading import load
from workbench.library.writing import write_whole
from workbench.printing.messages import format_problem
from workbench.printing.plain import ending, sheet_text

HELP = """\
usage: ullage print PATH… [--format text] [--output FILE]

Writes the derivation of every claim below the paths: the program from its last statement to its first, what is
known, and each step of the proof with its reason; for claims that are not proved what breaks them, or what is left.

  --format text  plain text; other formats are not there yet
  --output FILE  into a file, which is replaced only once all is written
"""
FORMATS = ("text",)


@dataclass(slots=True)
class _Options:
    paths: list[str] = field(default_factory=list)
    output: str | None = None


def main(arguments: list[str]) -> int:
    """Runs the command; raises UsageError for arguments that it cannot use."""
    if "--help" in arguments or "-h" in arguments:
        sys.stdout.write(HELP)
        return Exit.OK
    options = _read(arguments)
    sheets = sheets_below(options.paths)
    worst = [Exit.OK]
    lines = _document(sheets, worst)
    try:
        if options.output is None:
            for line in lines:
                print(line)
        else:
            _replace(options.output, lines)
    except KeyboardInterrupt:
        print("ullage: stopped", file=sys.stderr)
        return Exit.INTERRUPTED
    return max(worst)


def _document(sheets: Sequence[str], worst: list[Exit]) -> Iterator[str]:
    for number, path in enumerate(sheets):
        loaded = load(path)
        report = check_loaded(loaded)
        for problem in report.problems:
            print(format_problem(problem), file=sys.stderr)
        if report.verdict == "unreadable" or loaded.sheet is None:
            worst.append(Exit.UNUSABLE)
            continue
        if report.verdict != "verified":
            worst.append(Exit.UNPROVED)
        if number:
            yield ""
            yield ""
        yield from sheet_text(report, loaded.sheet.title)
    yield from ending()


def _read(arguments: Sequence[str]) -> _Options:
    options = _Options()
    waiting = list(arguments)
    while waiting:
        word = waiting.pop(0)
        name, equals, value = word.partition("=")
        if name in ("--format", "--output"):
            if not equals:
                if not waiting:
                    raise UsageError(f"{name} needs a value")
                value = waiting.pop(0)
            if name == "--output":
                options.output = value
            elif value not in FORMATS:
                raise UsageError(f"there is no format {value!a} yet; there is {', '.join(FORMATS)}")
        elif word == "--plain":
            pass  # plain text is all there is
        elif word.startswith("-"):
            raise UsageError(f"print has no option {word!a}; see ullage print --help")
        else:
            options.paths.append(word)
    if not options.paths:
        raise UsageError("print needs a sheet, or a folder of sheets: ullage print PATH…")
    return options


def _replace(output: str, lines: Iterator[str]) -> None:
    try:
        write_whole(output, (f"{line}\n".encode() for line in lines))
    except OSError as e:
        raise UsageError(f"{output!a} cannot be written: {e.strerror}") from None
