"""What the names of a sheet stand for, and where each may be used."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass, replace
from typing import Literal, TypeAlias

from workbench.errors import Problem, Span
from workbench.sheet import tree
from workbench.sheet.words import MOST_PROBLEMS, nearest, quoted

Kind: TypeAlias = Literal[
    "constant", "state variable", "function", "law", "counter", "gauge", "routine",
    "parameter", "binding", "variable", "note", "loop variable", "bound variable",
]  # fmt: skip


class Enough(Exception):
    """As many problems as are told in one go. Never leaves the checker."""


@dataclass(frozen=True, slots=True)
class Symbol:
    """What a name stands for. `item` is where it was declared, `path` the used sheet that it comes from, if any."""

    kind: Kind
    name: str
    sort: tree.Sort | None
    span: Span
    item: object = None
    path: str | None = None


def kinds(*named: Kind) -> frozenset[Kind]:
    return frozenset(named)


STATE = kinds("state variable", "counter", "gauge")
VALUES = kinds("constant", "function", "parameter", "bound variable")  # mathematics: no state
AT_START = VALUES | STATE | kinds("binding")
IN_BODY = AT_START | kinds("variable", "note", "loop variable")


@dataclass(frozen=True, slots=True)
class Context:
    """What may stand in a formula at some place. `where` is how a message calls the place.

    `fresh`: variables declared inside a stage, which have an end value in its claims and no other.
    """

    where: str
    kinds: frozenset[Kind]
    result: bool = False
    primes: bool = False
    of_routine: bool = False
    fresh: frozenset[str] = frozenset()
    statement: bool = False  # a routine may be called here, as the whole of a value


STATEMENT = Context("a statement", IN_BODY, result=True, statement=True)


def symbols_of(sheet: tree.Sheet, path: str | None) -> Iterable[Symbol]:
    """What the items of a sheet declare, tariffs' names apart."""
    for item in sheet.items:
        match item:
            case tree.Constant():
                yield Symbol("constant", item.name, item.sort, item.span, item, path)
            case tree.State():
                yield Symbol("state variable", item.name, item.sort, item.span, item, path)
            case tree.Function():
                yield Symbol("function", item.name, item.sort, item.span, item, path)
            case tree.Law():
                yield Symbol("law", item.name, None, item.span, item, path)
            case tree.Routine() if item.name:
                yield Symbol("routine", item.name, item.result, item.name_span, item, path)
            case tree.Tariff():
                yield from _resources(item, path)


def _resources(tariff: tree.Tariff, path: str | None) -> Iterable[Symbol]:
    for line in tariff.items:
        if isinstance(line, tree.Counter):
            yield Symbol("counter", line.name, "real", line.span, line, path)
        elif isinstance(line, tree.Gauge):
            yield Symbol("gauge", line.name, "real", line.span, line, path)


@dataclass(frozen=True, slots=True)
class Doubts:
    """What may be declared where a sheet could not be read: some names, any name in the items that start at some
    offsets, or any name at all. Nothing is said of such names, so that one mistake is one message."""

    names: frozenset[str] = frozenset()
    items: frozenset[int] = frozenset()
    everything: bool = False


CERTAIN = Doubts()


class Scope:
    """Names and problems of one sheet that is being checked. Problems carry no source line: the text is not here."""

    def __init__(self, path: str, sheet: tree.Sheet, used: Mapping[str, tree.Sheet], doubts: Doubts) -> None:
        self.path = path
        self.sheet = sheet
        self.used = used
        self.doubts = doubts
        self.item_start = -1  # of the item that is being checked
        self._told: set[str] = set()  # names that are unknown in this item
        self.problems: list[Problem] = []
        self.globals: dict[str, Symbol] = {}
        self.locals: dict[str, Symbol] = {}
        self._order: list[str] = []
        self._covered: list[Symbol | None] = []

    # -------------------------------------------------------------- complaining
    def complain(self, span: Span, message: str, mend: str | None = None) -> None:
        if len(self.problems) >= MOST_PROBLEMS:
            raise Enough
        self.problems.append(Problem(self.path, span, message, mend))

    # -------------------------------------------------------------- names of the sheet
    def gather(self) -> None:
        """All names that the sheet and those that it uses declare; a name twice is a mistake."""
        uses = [i for i in self.sheet.items if isinstance(i, tree.Use)]
        tariffs: dict[str, Symbol] = {}
        for path, sheet in [*self.used.items(), (None, self.sheet)]:
            for item in sheet.items:
                if isinstance(item, tree.Tariff):
                    self._add(tariffs, Symbol("constant", item.name, None, item.span, item, path), uses, "tariff")
            for symbol in symbols_of(sheet, path):
                self._add(self.globals, symbol, uses, symbol.kind)

    def _add(self, names: dict[str, Symbol], symbol: Symbol, uses: list[tree.Use], kind: str) -> None:
        first = names.setdefault(symbol.name, symbol)
        if first is symbol:
            return
        where = f"in line {first.span.line}" if first.path is None else f"in {quoted_path(first.path)}"
        message = f"the {kind} {quoted(symbol.name)} is defined twice, first {where}"
        if symbol.path is None:
            self.complain(symbol.span, message, "give one of the two another name")
        elif uses:
            ending = [u for u in uses if symbol.path.endswith(u.path.rpartition("/")[2])]
            self.complain((ending or uses)[-1].span, f"{message}, then in {quoted_path(symbol.path)}",
                          "sheets that are used together need names of their own")  # fmt: skip

    # -------------------------------------------------------------- names inside an item
    def find(self, name: str) -> Symbol | None:
        return self.locals.get(name) or self.globals.get(name)

    def declare(self, symbol: Symbol, hidden: Collection[Kind] = (), over: Collection[Kind] = ()) -> None:
        """Makes a name visible until `forget`. What is visible is not shadowed, kinds `over` and `hidden` apart."""
        name = symbol.name
        seen = self.find(name)
        if seen is not None and seen.kind not in hidden and seen.kind not in over:
            where = f"in line {seen.span.line}" if seen.path is None else f"in {quoted_path(seen.path)}"
            self.complain(symbol.span, f"the {symbol.kind} {quoted(name)} would hide the {seen.kind} declared {where}",
                          "nothing may hide what is visible: choose another name")  # fmt: skip
            if name in self.locals:
                return
        self._order.append(name)
        self._covered.append(self.locals.get(name))
        self.locals[name] = symbol

    def mark(self) -> int:
        return len(self._order)

    def since(self, mark: int) -> frozenset[str]:
        return frozenset(self._order[mark:])

    def forget(self, mark: int) -> None:
        """Ends the scope that began at the mark."""
        while len(self._order) > mark:
            name, covered = self._order.pop(), self._covered.pop()
            if covered is None:
                del self.locals[name]
            else:
                self.locals[name] = covered

    # -------------------------------------------------------------- names that are not found
    def unknown(self, span: Span, name: str, what: str, kinds: Collection[str]) -> None:
        """Says that nothing has this name, and what is nearest. Of doubtful names nothing is said."""
        if not name or self.is_doubtful(name) or name in self._told:
            return
        self._told.add(name)
        near = nearest(name, (s.name for s in self._all() if s.kind in kinds))
        self.complain(span, f"there is no {what} {quoted(name)}", f"is {quoted(near)} meant?" if near else None)

    def begin(self, item: tree.Item | None) -> None:
        """Another item is checked from here on, or None alone."""
        self.item_start = item.span.start if item is not None else -1
        self._told.clear()

    def is_doubtful(self, name: str) -> bool:
        return self.doubts.everything or name in self.doubts.names or self.item_start in self.doubts.items

    def _all(self) -> Iterable[Symbol]:
        yield from self.locals.values()
        yield from self.globals.values()

    def listed(self, kind: Kind) -> str:
        """The names of one kind, for a message; at most five."""
        names = [s.name for s in self.globals.values() if s.kind == kind]
        return ", ".join(quoted(n) for n in names[:5]) + (", …" if len(names) > 5 else "")


def quoted_path(path: str) -> str:
    """The last part of a path, as a message quotes it."""
    return quoted(path.rpartition("/")[2])


def with_kinds(context: Context, *without: Kind, where: str | None = None) -> Context:
    """The context without some kinds of names."""
    return replace(context, kinds=context.kinds - set(without), where=where or context.where)
