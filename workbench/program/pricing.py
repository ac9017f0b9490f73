"""From a checked sheet and all that it uses to the priced program."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from workbench.algebra.terms import Sort, Term, var
from workbench.program.bodies import Body
from workbench.program.changes import callees, changed_by
from workbench.program.names import Globals, Locals, bound_names
from workbench.program.priced import (
    Block,
    Constant,
    Counter,
    Either,
    Function,
    Gauge,
    Hold,
    If,
    Law,
    Loop,
    Program,
    Routine,
    Stage,
    Statement,
    StateVariable,
    Variable,
)
from workbench.program.specifications import specification
from workbench.program.tariffs import Tariffs
from workbench.program.translate import Vocabulary, translate
from workbench.sheet import tree


def price(path: str, sheet: tree.Sheet, used: Mapping[str, tree.Sheet]) -> Program:
    """The program of the sheet at `path` and of the sheets that it uses, dependencies first."""
    return _Pricing(path, sheet, used).program()


class _Pricing:
    def __init__(self, path: str, sheet: tree.Sheet, used: Mapping[str, tree.Sheet]) -> None:
        self.path = path
        self.items = [(item, origin) for origin, s in used.items() for item in s.items]
        self.items += [(item, path) for item in sheet.items]
        self.counters: dict[str, Counter] = {}
        self.gauges: dict[str, Gauge] = {}
        self.tariffs = Tariffs()
        for item, _ in self.items:
            if isinstance(item, tree.Tariff):
                self._tariff(item)
        functions: dict[str, Sort] = {i.name: i.sort for i, _ in self.items if isinstance(i, tree.Function)}
        clocks = {g.name: g.clock for g in self.gauges.values()}
        states: dict[str, Sort] = {i.name: i.sort for i, _ in self.items if isinstance(i, tree.State)}
        self.globals = Globals(Vocabulary(functions, clocks), {}, states, set(self.counters), self.gauges)
        self.constants = {i.name: i for i, _ in self.items if isinstance(i, tree.Constant)}
        for name in self.constants:
            self._constant_value(name, frozenset())

    def _tariff(self, tariff: tree.Tariff) -> None:
        for item in tariff.items:
            match item:
                case tree.Counter(name, unit):
                    self.counters[name] = Counter(name, unit)
                case tree.Gauge(name, unit, clock):
                    self.gauges[name] = Gauge(name, clock, unit)
                case tree.On():
                    self.tariffs.add(item)

    def _constant_value(self, name: str, waiting: frozenset[str]) -> Term:
        """A constant with a value stands for it, whatever the order in the text."""
        known = self.globals.constants
        if name not in known:
            item = self.constants[name]
            if item.value is None or name in waiting:
                known[name] = var(name, item.sort)
            else:

                def lookup(other: str, primed: bool) -> Term:
                    return self._constant_value(other, waiting | {name})

                known[name] = translate(item.value, lookup, self.globals.vocabulary)
        return known[name]

    # -------------------------------------------------------------- items
    def program(self) -> Program:
        program = Program(self.path, {}, {}, self.counters, self.gauges, {}, {}, {})
        top = Locals(self.globals)
        for item, origin in self.items:
            match item:
                case tree.Constant(name, sort, value, condition):
                    priced = None if value is None else self.globals.constants[name]
                    where = None if condition is None else top.term(condition)
                    program.constants[name] = Constant(name, sort, priced, where, item.span, origin)
                case tree.State(name, sort, condition):
                    where = None if condition is None else top.term(condition)
                    program.states[name] = StateVariable(name, sort, where, item.span, origin)
                case tree.Function():
                    program.functions[item.name] = self._function(item, origin)
                case tree.Law():
                    program.laws[item.name] = self._law(item, origin)
                case tree.Routine():
                    program.routines[item.name] = self._routine(item, origin)
        return replace(program, routines=_settled(program))

    def _with_parameters(self, parameters: tuple[tree.Parameter, ...]) -> Locals:
        return Locals(self.globals, {p.name: p.sort for p in parameters})

    def _function(self, item: tree.Function, origin: str) -> Function:
        local = self._with_parameters(item.parameters)
        return Function(
            item.name,
            _variables(item.parameters),
            item.sort,
            None if item.measure is None else local.term(item.measure),
            local.term(item.body),
            None if item.given is None else local.term(item.given),
            item.span,
            origin,
        )

    def _law(self, item: tree.Law, origin: str) -> Law:
        local = self._with_parameters(item.parameters)
        return Law(
            item.name,
            _variables(item.parameters),
            None if item.given is None else local.term(item.given),
            local.term(item.formula),
            item.induction_on,
            item.induction_from or 0,
            item.span,
            origin,
        )

    def _routine(self, item: tree.Routine, origin: str) -> Routine:
        routines = {i.name: i for i, _ in self.items if isinstance(i, tree.Routine)}
        header = self._with_parameters(item.parameters)
        if item.result is not None:
            header.variables["result"] = item.result
        parameters = {p.name: p.sort for p in item.parameters}
        header.bindings = bound_names(item.bindings, parameters, self.globals, {})
        body = Body(item, header, routines, self.tariffs)
        return Routine(
            item.name,
            _variables(item.parameters),
            item.result,
            specification("", item.header, header, item.span),
            body.block(),
            frozenset(),
            frozenset(),
            origin,
            item.span,
        )


def _variables(parameters: tuple[tree.Parameter, ...]) -> tuple[Variable, ...]:
    return tuple(Variable(p.name, p.sort) for p in parameters)


# ---------------------------------------------------------------- what changes, once all bodies are known
def _settled(program: Program) -> dict[str, Routine]:
    """What each routine changes, through calls too: the least sets that hold each other up; then the same of loops
    and stages.
    """
    shared = set(program.states) | set(program.counters)
    for g in program.gauges.values():
        shared |= {g.name, f"{g.name}.peak", f"{g.name}.area"}
    changed: dict[str, frozenset[str]] = dict.fromkeys(program.routines, frozenset())
    while True:
        now = {
            n: changed_by(r.body, program.gauges, changed.__getitem__) & shared for n, r in program.routines.items()
        }
        if now == changed:
            break
        changed = now
    settle = _Settling(program, changed)
    return {
        n: replace(r, body=settle.block(r.body), changed=changed[n], calls=callees(r.body))
        for n, r in program.routines.items()
    }


class _Settling:
    """Fills in what loops and stages change."""

    def __init__(self, program: Program, changed: Mapping[str, frozenset[str]]) -> None:
        self.program = program
        self.changed = changed

    def block(self, block: Block) -> Block:
        return tuple(map(self.statement, block))

    def statement(self, s: Statement) -> Statement:
        match s:
            case Hold():
                return replace(s, body=self.block(s.body))
            case If():
                return replace(s, then=self.block(s.then), otherwise=self.block(s.otherwise))
            case Either():
                return replace(s, branches=tuple(map(self.block, s.branches)))
            case Loop():
                body = self.block(s.body)
                return replace(s, body=body, changed=self._in_sight((*s.test, *body), s.scope))
            case Stage():
                body = self.block(s.body)
                return replace(s, body=body, changed=self._in_sight(body, s.scope))
        return s

    def _in_sight(self, block: Block, scope: tuple[Variable, ...]) -> frozenset[str]:
        names = changed_by(block, self.program.gauges, lambda c: self.changed[c])
        local = {v.name for v in scope}
        shared = set(self.program.states) | set(self.program.counters)
        roots = set(self.program.gauges)
        return frozenset(n for n in names if n in local or n in shared or n.partition(".")[0] in roots)
