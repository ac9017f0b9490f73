"""Names and types of a sheet: everything that can be said of it without knowing what it means.

`check_names` is the entrance. What it lets pass can be priced, run and turned into obligations without looking at names
again; whether divisors are zero or numbers negative is not its affair.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from workbench.errors import Problem, Span
from workbench.sheet import tree
from workbench.sheet.bodies import BodyChecking
from workbench.sheet.scopes import AT_START, CERTAIN, STATE, VALUES, Context, Doubts, Enough, Symbol, kinds
from workbench.sheet.types import class_of
from workbench.sheet.walks import calls_in, names_in
from workbench.sheet.words import nearest, quoted

NO_LAWS: Mapping[str, int] = MappingProxyType({})


def check_names(path: str, sheet: tree.Sheet, used: Mapping[str, tree.Sheet], laws: Mapping[str, int] = NO_LAWS,
                doubts: Doubts = CERTAIN) -> list[Problem]:  # fmt: skip
    """Every mistake in names and types of one sheet, in the order of its text.

    `used` holds the sheets that it uses, directly or through others, used ones first. `laws` are the built-in laws that
    a hint may name, with the number of their parameters. `doubts` come from the reading of a sheet with mistakes.
    The problems carry no source line: the text is not here.
    """
    checker = _SheetChecker(path, sheet, used, doubts)
    checker.laws = laws
    try:
        checker.check()
    except Enough:
        pass  # the first of them are told
    return sorted(checker.problems, key=lambda p: p.span.start)


ALL = AT_START | kinds("routine", "law")  # of the whole sheet: a free name of a budget means none of them


class _SheetChecker(BodyChecking):
    def check(self) -> None:
        self.gather()
        for item in self.sheet.items:
            self.begin(item)
            match item:
                case tree.Source():
                    self.check_source(item)
                case tree.Constant():
                    self._constant(item)
                case tree.State():
                    if item.condition is not None:
                        where = Context("the condition of a state variable", VALUES | kinds("state variable"))
                        self.require(item.condition, "formula", where)
                case tree.Function():
                    self._function(item)
                case tree.Law():
                    self._law(item)
                case tree.Tariff():
                    self._tariff(item)
                case tree.Routine():
                    self.check_routine(item)
                case tree.Budget():
                    self._budget(item)
                case tree.Pool():
                    self._pool(item)
        self.begin(None)
        self._constants_in_a_circle()
        self._charges_of_calls()

    # -------------------------------------------------------------- mathematics
    def _constant(self, item: tree.Constant) -> None:
        if item.value is not None:
            self.require(item.value, class_of(item.sort), Context("the value of a constant", VALUES))
        if item.condition is not None:
            self.require(item.condition, "formula", Context("the condition of a constant", VALUES))

    def _constants_in_a_circle(self) -> None:
        """A constant's value may not need itself."""
        needs = {i.name: [n for n in names_in(i.value) if n != "result"]
                 for i in self.sheet.items if isinstance(i, tree.Constant) and i.value is not None}  # fmt: skip
        done: set[str] = set()
        for start, first in needs.items():
            path, on_path = [start], {start}
            rest = {start: iter(first)}
            while path:
                following = next((n for n in rest[path[-1]] if n in needs and n not in done), None)
                if following is None:
                    on_path.discard(path[-1])
                    done.add(path.pop())
                elif following in on_path:
                    span = self.globals[following].span
                    self.complain(span, f"the value of the constant {quoted(following)} needs itself")
                    done.update(path)
                    break
                else:
                    path.append(following)
                    on_path.add(following)
                    rest[following] = iter(needs[following])

    def _parameters(self, parameters: tuple[tree.Parameter, ...], hidden: bool) -> None:
        for p in parameters:
            self.declare(Symbol("parameter", p.name, p.sort, p.span), STATE if hidden else ())

    def _function(self, item: tree.Function) -> None:
        mark = self.mark()
        self._parameters(item.parameters, hidden=True)
        where = Context("a function", VALUES)
        if item.measure is not None:
            self.require(item.measure, "number", where)
        self.require(item.body, class_of(item.sort), where)
        if item.given is not None:
            self.require(item.given, "formula", where)
        self.forget(mark)

    def _law(self, item: tree.Law) -> None:
        mark = self.mark()
        self._parameters(item.parameters, hidden=True)
        for formula in (item.given, item.formula):
            if formula is not None:
                self.require(formula, "formula", Context("a law", VALUES))
        self.forget(mark)
        if item.induction_on is None:
            return
        parameter = next((p for p in item.parameters if p.name == item.induction_on), None)
        if parameter is None:
            listed = ", ".join(quoted(p.name) for p in item.parameters[:5])
            self.complain(item.span, f"the induction is on {quoted(item.induction_on)}, no parameter of the law",
                          f"its parameters are {listed}" if listed else None)  # fmt: skip
        elif parameter.sort not in ("nat", "int"):
            self.complain(item.span, f"the induction is on {quoted(parameter.name)}, a {parameter.sort}",
                          "induction goes from one whole number to the next: nat or int")  # fmt: skip

    # -------------------------------------------------------------- tariffs
    def _tariff(self, item: tree.Tariff) -> None:
        for line in item.items:
            if isinstance(line, tree.Gauge) and line.clock is not None:
                self.resource(line.clock, "counter", line.span, "over")
            elif isinstance(line, tree.On):
                for charge in line.charges:
                    self._charge(line.event, charge)

    def _charge(self, event: tree.Event, charge: tree.Charge) -> None:
        if charge.verb == "hold" and event in ("assign", "test"):
            self.complain(charge.span, f"'hold' cannot be the price of '{event}', which is over at once",
                          "only 'spend' may stand here")  # fmt: skip
        self.charged(charge)
        mark = self.mark()
        if event == "call":
            # Whether the routines that are called do have the names is looked at where all calls are known.
            for name in names_in(charge.amount):
                if name not in self.globals or self.globals[name].kind not in ("constant", "function"):
                    self.declare(Symbol("binding", name, "real", charge.span), hidden=ALL)
        elif event == "declare":
            self.declare(Symbol("constant", "size", "real", charge.span))
        self.require(charge.amount, "number", Context("a price", VALUES | kinds("binding")))
        self.forget(mark)

    def _charges_of_calls(self) -> None:
        """Names in the price of a call: bindings of every routine that is called, or constants.

        Where nothing is called it is enough that some routine has the name; a sheet of prices alone leaves it open.
        """
        calls: dict[str, Span | None] = {}
        for sheet in (self.sheet, *self.used.values()):
            for callee, span in calls_in(sheet):
                calls.setdefault(callee, span if sheet is self.sheet else None)
        for sheet in (*self.used.values(), self.sheet):
            for charge in (c for t in sheet.items if isinstance(t, tree.Tariff) for o in t.items
                           if isinstance(o, tree.On) and o.event == "call" for c in o.charges):  # fmt: skip
                for name in names_in(charge.amount):
                    self._charged(name, charge.span if sheet is self.sheet else None, calls)

    def _charged(self, name: str, charge: Span | None, calls: Mapping[str, Span | None]) -> None:
        symbol = self.globals.get(name)
        if not name or (symbol is not None and symbol.kind == "constant"):
            return
        routines = [s for s in self.globals.values() if isinstance(s.item, tree.Routine)]
        if not calls and routines and charge is not None:
            calls = {r.name: None for r in routines[:1] if not any(name in _bound(s.item) for s in routines)}
        for callee, call in calls.items():
            routine = self.globals.get(callee)
            span = charge or call
            if routine is None or not isinstance(routine.item, tree.Routine) or span is None:
                continue
            bound = _bound(routine.item)
            if name not in bound and not self.is_doubtful(name) and not self.is_doubtful(callee):
                self._charge_names_nothing(name, callee, bound, span)
                return

    def _charge_names_nothing(self, name: str, callee: str, bound: list[str], span: Span) -> None:
        constants = [s.name for s in self.globals.values() if s.kind == "constant"]
        near = nearest(name, [*bound, *constants])
        message = f"a call of {quoted(callee)} has the price {quoted(name)}: no binding of that routine, nor a constant"
        mend = f"is {quoted(near)} meant?" if near else f"routine {callee[:20]}(…) with {name[:20]} = …"
        self.complain(span, message, mend)

    # -------------------------------------------------------------- budgets and pools
    def _budget(self, item: tree.Budget) -> None:
        self._held_against(item)
        self.check_aspect(item.aspect, item.resource, item.span)
        self._closed(item, item.limit)

    def _pool(self, item: tree.Pool) -> None:
        self._held_against(item)
        self.resource(item.gauge, "gauge", item.span, "within")
        self._closed(item, item.room)
        if item.count < 1:
            self.complain(item.span, f"a pool of {item.count} has nobody in it")
        if item.overflow_below is not None and not 0 < item.overflow_below < 1:
            self.complain(item.span, "the probability of an overflow lies between 0 and 1", "such as 1e-6")

    def _held_against(self, item: tree.Budget | tree.Pool) -> None:
        """The routine, its arguments and what is given of the names in them."""
        symbol = self.globals.get(item.routine)
        free = [n for a in item.arguments for n in names_in(a) if self._is_free(n)]
        mark = self.mark()
        for name in dict.fromkeys(free):
            self.declare(Symbol("parameter", name, None, item.span), hidden=ALL)
        context = Context("the arguments of a budget or pool", VALUES)
        if symbol is not None and isinstance(symbol.item, tree.Routine):
            self.check_arguments(item.routine, item.span, symbol.item.parameters, item.arguments, context)
        elif symbol is not None:
            self.complain(item.span, f"{quoted(item.routine)} is a {symbol.kind}, no routine")
        else:
            self.unknown(item.span, item.routine, "routine", ("routine",))
        self.forget(mark)
        self._given(item, free)

    def _given(self, item: tree.Budget | tree.Pool, free: list[str]) -> None:
        """Each binding is of a constant, or of a free name in the arguments."""
        symbol = self.globals.get(item.routine)
        parameters = symbol.item.parameters if symbol is not None and isinstance(symbol.item, tree.Routine) else ()
        sorts = {a.name: p.sort for a, p in zip(item.arguments, parameters, strict=False) if isinstance(a, tree.Name)}
        seen: set[str] = set()
        for b in item.bindings:
            bound = self.globals.get(b.name)
            if b.name in seen:
                self.complain(b.span, f"{quoted(b.name)} is given twice")
            elif b.name not in free and (bound is None or bound.kind != "constant"):
                listed = ", ".join(map(quoted, dict.fromkeys(free)))
                self.complain(b.span, f"{quoted(b.name)} is neither a constant nor a name in the arguments",
                              f"the names in the arguments are {listed}" if listed else None)  # fmt: skip
            seen.add(b.name)
            sort = bound.sort if bound is not None and bound.kind == "constant" else sorts.get(b.name, "real")
            self.require(b.value, class_of(sort), Context("a binding", VALUES))

    def _is_free(self, name: str) -> bool:
        symbol = self.globals.get(name)
        return bool(name) and (symbol is None or symbol.kind not in ("constant", "function"))

    def _closed(self, item: tree.Budget | tree.Pool, limit: tree.Expr) -> None:
        """The limit may use constants, and names in the arguments."""
        mark = self.mark()
        for name in dict.fromkeys(n for a in item.arguments for n in names_in(a) if self._is_free(n)):
            self.declare(Symbol("parameter", name, None, item.span), hidden=ALL)
        self.require(limit, "number", Context("a limit", VALUES))
        self.forget(mark)


def _bound(routine: object) -> list[str]:
    return [b.name for b in routine.bindings] if isinstance(routine, tree.Routine) else []
