"""`ullage check PATH…`: proves everything below the paths."""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from workbench import __version__
from workbench.errors import UsageError
from workbench.exits import Exit
from workbench.library.checking import check_sheet
from workbench.library.folders import sheets_below
from workbench.printing.cautions import CAUTIONS
from workbench.printing.documents import SCHEMA, sheet_document
from workbench.printing.messages import format_problem, visible
from workbench.printing.verdicts import sheet_lines

HELP = """\
usage: ullage check PATH… [--json] [--jobs N] [--seconds S] [--plain]

Proves every claim of every sheet below the paths: one line a claim, with the values that break it, or what is missing.

  --json       one JSON document on stdout, and nothing else there
  --jobs N     work on N sheets at a time
  --seconds S  give up an obligation after that long, in seconds of the processor (default 2)
  --plain      ASCII only, no progress bar

Exit status: 0 all verified, 1 something open or refuted, 2 something unreadable or wrongly used.
"""
BAR_WIDTH = 30


@dataclass(slots=True)
class Options:
    """What was asked for."""

    paths: list[str] = field(default_factory=list)
    json: bool = False
    jobs: int = 1
    seconds: float = 2.0
    plain: bool = False


@dataclass(frozen=True, slots=True)
class Examined:
    """What is kept of a sheet: its lines or its part of the document, and its verdict."""

    path: str
    verdict: str
    claims: int
    lines: tuple[str, ...]
    messages: tuple[str, ...]
    document: str


def main(arguments: list[str]) -> int:
    """Runs the command; raises UsageError for arguments that it cannot use."""
    if "--help" in arguments or "-h" in arguments:
        sys.stdout.write(HELP)
        return Exit.OK
    options = read_options(arguments)
    sheets = sheets_below(options.paths)
    bar = _Bar(len(sheets), shown=sys.stderr.isatty() and not options.plain)
    verdicts: dict[str, int] = {}
    claims = 0
    if options.json:
        sys.stdout.write(f'{{"schema": {SCHEMA}, "version": {json.dumps(__version__)}, "sheets": [')
    try:
        for number, found in enumerate(_examined(sheets, options, bar)):
            bar.clear()
            verdicts[found.verdict] = verdicts.get(found.verdict, 0) + 1
            claims += found.claims
            for message in found.messages:
                print(message, file=sys.stderr)
            if options.json:
                sys.stdout.write((",\n" if number else "\n") + found.document)
            else:
                for line in found.lines:
                    print(line)
            bar.show(number + 1, found.path)
    except KeyboardInterrupt:
        bar.clear()
        done = sum(verdicts.values())
        print(f"ullage: stopped; {done} of {len(sheets)} sheets were done", file=sys.stderr)
        if options.json:
            sys.stdout.write("\n]}\n")
        return Exit.INTERRUPTED
    bar.clear()
    if options.json:
        sys.stdout.write("\n]}\n")
    else:
        said = ", ".join(f"{verdicts[v]} {v}" for v in ("verified", "open", "refuted", "unreadable") if v in verdicts)
        print(
            f"\n{len(sheets)} {'sheet' if len(sheets) == 1 else 'sheets'}, {claims} claims: {said or 'nothing to do'}\n"
        )
        sys.stdout.write(CAUTIONS)
    if "unreadable" in verdicts:
        return Exit.UNUSABLE
    return Exit.UNPROVED if "open" in verdicts or "refuted" in verdicts else Exit.OK


# ---------------------------------------------------------------- what to do
def read_options(arguments: Sequence[str]) -> Options:
    """The options; raises UsageError naming what is wrong."""
    options = Options()
    waiting = list(arguments)
    while waiting:
        word = waiting.pop(0)
        name, _, value = word.partition("=")
        if word == "--json":
            options.json = True
        elif word == "--plain":
            options.plain = True
        elif name in ("--jobs", "--seconds"):
            if not value:
                if not waiting:
                    raise UsageError(f"{name} needs a number")
                value = waiting.pop(0)
            _set(options, name, value)
        elif word.startswith("-"):
            raise UsageError(f"check has no option {word!a}; see ullage check --help")
        else:
            options.paths.append(word)
    if not options.paths:
        raise UsageError("check needs a sheet, or a folder of sheets: ullage check PATH…")
    return options


def _set(options: Options, name: str, value: str) -> None:
    try:
        number = float(value)
    except ValueError:
        number = -1.0
    if name == "--jobs":
        if not (value.isascii() and value.isdigit() and 1 <= int(value) <= 256):
            raise UsageError(f"--jobs takes a whole number from 1 to 256, not {value!a}")
        options.jobs = int(value)
    elif not 0 < number <= 86_400:
        raise UsageError(f"--seconds takes a positive number of seconds, not {value!a}")
    else:
        options.seconds = number


# ---------------------------------------------------------------- the work
def _examined(sheets: Sequence[str], options: Options, bar: _Bar) -> Iterator[Examined]:
    """The sheets' results in order, one after the other or several at a time."""
    if options.jobs == 1 or len(sheets) < 2:
        for number, path in enumerate(sheets):
            bar.show(number, path)
            yield examine(path, options.seconds, options.json, bar)
        return
    from functools import partial
    from multiprocessing import Pool

    with Pool(min(options.jobs, len(sheets)), _ignore_interrupts) as pool:  # leaving it ends the children
        yield from pool.imap(partial(examine, seconds=options.seconds, as_document=options.json), sheets)


def _ignore_interrupts() -> None:
    """Ctrl-C reaches the whole group; only the parent answers it."""
    import signal

    signal.signal(signal.SIGINT, signal.SIG_IGN)


def examine(path: str, seconds: float, as_document: bool, bar: _Bar | None = None) -> Examined:
    """One sheet; only what is printed of it is kept, so that memory stays flat."""
    report = check_sheet(path, seconds=seconds, progress=None if bar is None else bar.inside)
    messages = tuple(format_problem(p) for p in report.problems)
    document = json.dumps(sheet_document(report)) if as_document else ""
    lines = () if as_document else tuple(sheet_lines(report))
    claims = sum(len(r.claims) for r in report.routines)
    return Examined(path, report.verdict, claims, lines, messages, document)


class _Bar:
    """A line on stderr that says how far the work is; nothing where stderr is no terminal."""

    def __init__(self, total: int, *, shown: bool) -> None:
        self.total = total
        self.shown = shown
        self.done = 0
        self.path = ""

    def show(self, done: int, path: str) -> None:
        """That many sheets are done, and this one is next."""
        self.done, self.path = done, path
        self._draw(0.0)

    def inside(self, done: int, total: int) -> None:
        """How far the sheet itself is."""
        self._draw(done / total if total else 0.0)

    def clear(self) -> None:
        if self.shown:
            sys.stderr.write("\r\x1b[K")
            sys.stderr.flush()

    def _draw(self, part: float) -> None:
        if not self.shown:
            return
        filled = int(BAR_WIDTH * min((self.done + part) / max(self.total, 1), 1.0))
        name = visible(os.path.basename(self.path))[:30]
        sys.stderr.write(f"\r\x1b[K[{'#' * filled}{'.' * (BAR_WIDTH - filled)}] {self.done}/{self.total} {name}")
        sys.stderr.flush()
