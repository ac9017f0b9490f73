"""Sheets from files: read, with all that they use, and checked. Proves nothing and runs nothing.

A sheet is data from anywhere. It opens no file but sheets that it uses, and those only below the library's root or
its own folder: the root is the nearest folder upwards that holds `.ullage-root` or `.git`, else the sheet's own folder.
"""

from __future__ import annotations

import os
import stat
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

from workbench.errors import Problem, Span
from workbench.proof.laws import built_in_laws
from workbench.sheet.checking import check_names
from workbench.sheet.cursor import line_of
from workbench.sheet.reader import Reading, decode_sheet, read_sheet
from workbench.sheet.scopes import Doubts
from workbench.sheet.tree import Routine, Sheet, Source, Use
from workbench.sheet.walks import headers_in
from workbench.sheet.words import LARGEST_SHEET, MOST_PROBLEMS, quoted, visible

ROOT_MARKS = (".ullage-root", ".git")
MOST_SHEETS = 1_000  # that one sheet may use in all: a codebase of a thousand routines has about as many
TOP = Span(0, 0, 1, 1)


@dataclass(frozen=True, slots=True)
class Loaded:
    """A sheet as far as it could be read. It is fit for use only where there are no problems.

    `text` is empty and `sheet` None where the file could not be read. `used` maps the real path of every sheet
    that it uses, directly or through others, to its tree; used ones stand first.
    """

    path: str
    text: str
    sheet: Sheet | None
    problems: tuple[Problem, ...]
    used: dict[str, Sheet]


def load(path: str, read: Callable[[str], bytes] | None = None) -> Loaded:
    """The sheet in a file. `read` gives a file's bytes, or raises OSError; the files of the disk if not given.

    Never raises: what is wrong, a missing file included, stands in the problems.
    """
    return _Library(read or read_file).load(path, None)


def load_text(path: str, text: str) -> Loaded:
    """As `load`, with this text in place of the file's; what it uses is read from the disk."""
    return _Library(read_file).load(path, text)


def read_file(path: str) -> bytes:
    """The bytes of a regular file, of too large a one only as many as show that. Raises OSError."""
    with open(path, "rb", opener=_open_at_once) as file:
        if not stat.S_ISREG(os.fstat(file.fileno()).st_mode):
            raise OSError(0, "no regular file", path)
        return file.read(LARGEST_SHEET + 1)


def _open_at_once(path: str, flags: int) -> int:
    """Opens without waiting, as a pipe would make it wait."""
    return os.open(path, flags | getattr(os, "O_NONBLOCK", 0))


def root_of(folder: str) -> str:
    """The library's root for sheets in that folder (a real path)."""
    at = folder
    while True:
        if any(os.path.exists(os.path.join(at, mark)) for mark in ROOT_MARKS):
            return at
        above = os.path.dirname(at)
        if above == at:
            return folder
        at = above


def resolve(path: str, named: str) -> str | None:
    """The real path of what a sheet names, or None where that lies outside of root and the sheet's own folder.

    `path` is the real path of the sheet. Symbolic links are followed before it is decided.
    """
    if os.path.isabs(named) or "\0" in named:
        return None
    folder = os.path.dirname(path)
    found = os.path.realpath(os.path.join(folder, named))
    return found if _below(found, folder) or _below(found, root_of(folder)) else None


def _below(path: str, folder: str) -> bool:
    return path.startswith(folder.rstrip(os.sep) + os.sep)


@dataclass(slots=True)
class _File:
    """One file while its library is being read. `uses` pairs `use` items with the real paths that they mean."""

    shown: str  # what messages call it
    text: str
    reading: Reading | None
    problems: list[Problem]
    uses: list[tuple[Use, str]] = field(default_factory=list)
    gaps: bool = False  # a used sheet is missing, so that any name may come from it


class _Library:
    def __init__(self, read: Callable[[str], bytes]) -> None:
        self.read = read
        self.files: dict[str, _File] = {}
        self.laws = {law.name: len(law.parameters) for law in built_in_laws()}

    def load(self, path: str, text: str | None) -> Loaded:
        if "\0" in path:
            return Loaded(path, "", None, (Problem(path, TOP, "no path of a file holds the character U+0000"),), {})
        top = os.path.realpath(path)
        self.files[top] = self._file(top, path, text)
        self._read_used(top)
        order = self._in_order(top)
        for name in order:
            self._check(name)
        file = self.files[top]
        problems = sorted(file.problems, key=lambda p: (p.span.line, p.span.column))[:MOST_PROBLEMS]
        sheet = file.reading.sheet if file.reading is not None else None
        return Loaded(path, file.text, sheet, tuple(_with_line(p, file.text) for p in problems), self._used(order, top))

    def _used(self, order: list[str], top: str) -> dict[str, Sheet]:
        found = {}
        for name in order:
            reading = self.files[name].reading
            if name != top and reading is not None:
                found[name] = reading.sheet
        return found

    # -------------------------------------------------------------- reading
    def _file(self, real: str, shown: str, text: str | None) -> _File:
        if text is None:
            try:
                data = self.read(real)
            except (OSError, ValueError) as error:
                why = getattr(error, "strerror", None) or str(error)
                return _File(shown, "", None, [Problem(shown, TOP, f"the sheet cannot be read: {visible(why)}")])
            text, problems = decode_sheet(data, shown)
            if text is None:
                return _File(shown, "", None, list(problems))
        reading = read_sheet(text, shown)
        return _File(shown, text, reading, list(reading.problems))

    def _read_used(self, top: str) -> None:
        """Reads what the sheet uses, and what that uses, each once."""
        todo = [top]
        while todo:
            path = todo.pop()
            file = self.files[path]
            if file.reading is None:
                continue
            for use in [i for i in file.reading.sheet.items if isinstance(i, Use)]:
                found = self._resolved(file, path, use)
                if found is None:
                    file.gaps = True
                    continue
                file.uses.append((use, found))
                if found not in self.files:
                    self.files[found] = self._file(found, found, None)
                    todo.append(found)

    def _resolved(self, file: _File, path: str, use: Use) -> str | None:
        found = resolve(path, use.path)
        if found is None:
            file.problems.append(_outside(file.shown, use.span, use.path))
        elif found not in self.files and len(self.files) > MOST_SHEETS:
            file.problems.append(Problem(file.shown, use.span, f"more than {MOST_SHEETS:,} sheets are used"))
        else:
            return found
        return None

    # -------------------------------------------------------------- order and circles
    def _in_order(self, top: str) -> list[str]:
        """The sheets, used ones first. A circle is broken anywhere: it is told of elsewhere."""
        order: list[str] = []
        seen = {top}
        path = [(top, iter(self._targets(top)))]
        while path:
            name, rest = path[-1]
            following = next((n for n in rest if n not in seen), None)
            if following is None:
                order.append(name)
                path.pop()
            else:
                seen.add(following)
                path.append((following, iter(self._targets(following))))
        return order

    def _targets(self, path: str) -> list[str]:
        return [found for _, found in self.files[path].uses]

    def _chain(self, start: str, goal: str) -> list[str] | None:
        """The sheets from one to another along `use` lines, if it is used at all."""
        came_from: dict[str, str | None] = {start: None}
        todo = [start]
        for at in todo:
            if at == goal:
                chain: list[str] = []
                step: str | None = at
                while step is not None:
                    chain.append(step)
                    step = came_from[step]
                return chain[::-1]
            for n in self._targets(at):
                if n not in came_from:
                    came_from[n] = at
                    todo.append(n)
        return None

    # -------------------------------------------------------------- checking
    def _check(self, path: str) -> None:
        """Adds what is wrong with a sheet's uses, sources and names; those that it uses have been checked before."""
        file = self.files[path]
        if file.reading is None:
            return
        for use, found in file.uses:
            self._check_use(file, path, use, found)
        for source in _sources(file.reading.sheet):
            if resolve(path, source.path) is None:
                file.problems.append(_outside(file.shown, source.span, source.path))
        used = self._used(self._in_order(path), path)
        doubts = Doubts(everything=True) if file.gaps else file.reading.doubts
        file.problems += check_names(file.shown, file.reading.sheet, used, self.laws, doubts)

    def _check_use(self, file: _File, path: str, use: Use, found: str) -> None:
        other = self.files[found]
        chain = self._chain(found, path)
        if chain is not None:
            names = " → ".join(quoted(os.path.basename(p)) for p in chain)
            message = f"the sheet uses itself: {names}" if len(chain) > 1 else "the sheet uses itself"
            file.problems.append(Problem(file.shown, use.span, message, "let what both need stand in a third sheet"))
            file.gaps = True
        elif other.problems:
            first = min(other.problems, key=lambda p: (p.span.line, p.span.column))
            missing = other.reading is None and first.span == TOP
            count = len(other.problems)
            what = first.message if missing else (
                f"{count} mistake{'s' if count > 1 else ''} in it, first in line {first.span.line}: {first.message}")
            file.problems.append(Problem(file.shown, use.span, f"{quoted(use.path)}: {what}"))
            file.gaps = True


def _outside(path: str, span: Span, named: str) -> Problem:
    mend = "paths are relative to the sheet's folder and stay below the library's root (.ullage-root)"
    return Problem(path, span, f"{quoted(named)} lies outside of the library", mend)


def _sources(sheet: Sheet) -> Iterator[Source]:
    for item in sheet.items:
        if isinstance(item, Source):
            yield item
        elif isinstance(item, Routine):
            for header in headers_in(item):
                yield from (i for i in header.items if isinstance(i, Source))


def _with_line(problem: Problem, text: str) -> Problem:
    return problem if problem.source_line else replace(problem, source_line=line_of(text, problem.span))
