"""Statements priced: every event of the program turned into spends, acquires, releases and holds."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from workbench.algebra.terms import ONE, Sort, Term, add, app, sub, var, variables
from workbench.errors import Span
from workbench.program.domains import declared_sort, is_integer
from workbench.program.names import Locals, bound_names
from workbench.program.priced import (
    Acquire,
    Assign,
    Block,
    Call,
    Choose,
    Either,
    Hold,
    If,
    Loop,
    Release,
    Spend,
    Stage,
    Statement,
)
from workbench.program.specifications import specification
from workbench.program.tariffs import Tariffs
from workbench.sheet import tree


class Body:
    """The priced body of one routine.

    Names that no author can write hold a dot: `i.last` is the last value of a loop's variable, `n.entry` a
    parameter's value at the start, `window.room` what a declaration holds.
    """

    def __init__(
        self, routine: tree.Routine, header: Locals, routines: Mapping[str, tree.Routine], tariffs: Tariffs
    ) -> None:
        self.routine = routine
        self.header = header
        self.routines = routines
        self.tariffs = tariffs
        self.assigned = _assigned(routine.body)
        self._labels: set[str] = set()

    def block(self) -> Block:
        """The whole body. `with` names keep the parameters' entry values, also where a parameter is assigned."""
        names = self.header.inner()
        used = {v.name for t in self.header.bindings.values() for v in variables(t)}
        kept: list[Statement] = []
        entry: dict[Term, Term] = {}
        for p in self.routine.parameters:
            if p.name in used and p.name in self.assigned:
                note = f"{p.name}.entry"
                names.variables[note] = p.sort
                entry[var(p.name, p.sort)] = var(note, p.sort)
                kept.append(Assign(note, p.sort, var(p.name, p.sort), p.span, is_note=True))
        parameters = {p.name: p.sort for p in self.routine.parameters}
        names.bindings = bound_names(self.routine.bindings, parameters, names.globals, entry)
        return (*kept, *self._scope(self.routine.body, names))

    # -------------------------------------------------------------- blocks
    def _scope(self, block: tree.Block, names: Locals) -> Block:
        """A block that is a scope: what its declarations hold ends with it."""
        opened: list[Statement] = []
        body = self._statements(block, names.inner(), opened)
        return (*body, *reversed(opened))

    def _statements(self, block: tree.Block, names: Locals, opened: list[Statement]) -> Block:
        """The statements in turn. What is still held at the end, and must be released there, is put into `opened`."""
        done: list[Statement] = []
        for i, s in enumerate(block):
            holds = self._declaration_holds(s.size, names) if isinstance(s, tree.Var) else []
            if isinstance(s, tree.Var) and holds:
                # The rest of the block stands inside the hold.
                done += self._declaration_spends(s.size, names, s.span)
                inside = [*self._declared(s, names), *self._statements(block[i + 1 :], names, opened)]
                return (*done, *_held(holds, tuple(inside), s.span))
            done += self._statement(s, names, opened)
        return tuple(done)

    def _statement(self, s: tree.Statement, names: Locals, opened: list[Statement]) -> Sequence[Statement]:
        match s:
            case tree.Skip():
                return ()
            case tree.Assign():
                sort = names.variables["result"] if s.target == "result" else self._sort(s.target, names)
                return self._assignment(s.target, sort, s.value, names, s.span)
            case tree.CallStatement():
                return self._call(s.routine, s.arguments, None, None, names, s.span)
            case tree.Note():
                value = names.term(s.value)
                sort = declared_sort(value)
                names.variables[s.name] = sort
                return (Assign(s.name, sort, value, s.span, is_note=True),)
            case tree.If():
                return self._if(s.branches, s.otherwise, names, s.span)
            case tree.Either():
                return (Either(tuple(self._scope(b, names) for b in s.branches), s.span),)
            case tree.While():
                return self._while(s, names)
            case tree.For():
                return self._for(s, names)
            case tree.Var():
                return (*self._declaration_spends(s.size, names, s.span), *self._declared(s, names))
            case tree.ResourceStatement("spend", amount, resource):
                return (Spend(resource, names.term(amount), s.span),)
            case tree.ResourceStatement("acquire", amount, resource):
                return (Acquire(resource, names.term(amount), s.span),)
            case tree.ResourceStatement(_, amount, resource):
                return (Release(resource, names.term(amount), s.span),)
            case tree.HoldStatement(amount, gauge, body):
                return (Hold(gauge, names.term(amount), self._scope(body, names), s.span),)
            case tree.Stage():
                return (self._stage(s, names, opened),)

    def _sort(self, name: str, names: Locals) -> Sort:
        return names.variables[name] if name in names.variables else names.globals.states[name]

    # -------------------------------------------------------------- values
    def _assignment(self, target: str, sort: Sort, value: tree.Value, names: Locals, span: Span) -> Sequence[Statement]:
        charge = self._spends("assign", names, span)
        if isinstance(value, tree.AnyValue):
            return (*charge, self._choice(target, sort, value, names, span))
        if isinstance(value, tree.Application) and value.name in self.routines:
            return (*self._call(value.name, value.arguments, target, sort, names, span), *charge)
        return (*charge, Assign(target, sort, names.term(value), span))

    def _choice(self, target: str, sort: Sort, value: tree.AnyValue, names: Locals, span: Span) -> Choose:
        condition = app("true") if value.condition is None else names.term(value.condition)
        return Choose(target, sort, condition, span)

    def _declared(self, s: tree.Var, names: Locals) -> Sequence[Statement]:
        names.variables[s.name] = s.sort
        if s.value is None:
            return (Choose(s.name, s.sort, app("true"), s.span, is_declaration=True),)
        return self._assignment(s.name, s.sort, s.value, names, s.span)

    def _call(
        self, routine: str, arguments: tuple[tree.Expr, ...], target: str | None, sort: Sort | None,
        names: Locals, span: Span,
    ) -> Sequence[Statement]:  # fmt: skip
        """The charges of a call belong to the caller; its holds last until the callee returns."""
        callee = self.routines[routine]
        terms = tuple(map(names.term, arguments))
        parameters = {p.name: p.sort for p in callee.parameters}
        at_call = {var(p.name, p.sort): t for p, t in zip(callee.parameters, terms, strict=True)}
        priced = Locals(names.globals, {}, bound_names(callee.bindings, parameters, names.globals, at_call))
        inner: Block = (Call(routine, terms, target, sort, span),)
        holds = [(c.resource, priced.term(c.amount)) for c in self.tariffs.holds("call")]
        spends = [Spend(c.resource, priced.term(c.amount), span, True) for c in self.tariffs.spends("call")]
        return (*spends, *_held(holds, inner, span))

    # -------------------------------------------------------------- charges
    def _spends(self, event: tree.Event, names: Locals, span: Span) -> list[Statement]:
        outer = Locals(names.globals)
        return [Spend(c.resource, outer.term(c.amount), span, True) for c in self.tariffs.spends(event)]

    def _sized(self, size: tree.Expr | None, names: Locals) -> Locals:
        """Names of a declaration's charge: `size` is what the declaration says, 1 if it says nothing."""
        return Locals(names.globals, {}, {"size": ONE if size is None else names.term(size)})

    def _declaration_spends(self, size: tree.Expr | None, names: Locals, span: Span) -> list[Statement]:
        sized = self._sized(size, names)
        return [Spend(c.resource, sized.term(c.amount), span, True) for c in self.tariffs.spends("declare")]

    def _declaration_holds(self, size: tree.Expr | None, names: Locals) -> list[tuple[str, Term]]:
        sized = self._sized(size, names)
        return [(c.resource, sized.term(c.amount)) for c in self.tariffs.holds("declare")]

    # -------------------------------------------------------------- branches and loops
    def _if(
        self, branches: tuple[tuple[tree.Expr, tree.Block], ...], otherwise: tree.Block | None, names: Locals, span:
        Span
    ) -> Sequence[Statement]:
        """Each test is charged where it is reached."""
        rest: Block = () if otherwise is None else self._scope(otherwise, names)
        for condition, block in reversed(branches):
            chosen = If(names.term(condition), self._scope(block, names), rest, span)
            rest = (*self._spends("test", names, span), chosen)
        return rest

    def _while(self, s: tree.While, names: Locals) -> Sequence[Statement]:
        label = self._label("while", s.span)
        spec = specification(label, s.header, names, s.span)
        test = tuple(self._spends("test", names, s.span))
        body = self._scope(s.body, names)
        return (Loop(spec, test, names.term(s.condition), body, names.scope(), frozenset(), s.span),)

    def _for(self, s: tree.For, names: Locals) -> Sequence[Statement]:
        """The bounds are evaluated once. The loop's variable is declared, assigned, tested and stepped at the
        tariff's prices.
        """
        outside, names = names, names.inner()
        low, high = outside.term(s.low), outside.term(s.high)
        before: list[Statement] = []
        if not self._constant(low):
            low = self._noted(f"{s.variable}.first", low, names, before, s.span)
        if not self._constant(high):
            high = self._noted(f"{s.variable}.last", high, names, before, s.span)
        me = var(s.variable, "int")
        names.variables[s.variable] = "int"
        label = self._label(f"for {s.variable}", s.span)
        spec = specification(label, s.header, names, s.span)
        step = (*self._spends("assign", names, s.span), Assign(s.variable, "int", add(me, ONE), s.span))
        loop = Loop(
            spec,
            tuple(self._spends("test", names, s.span)),
            app("<=" if s.inclusive else "<", me, high),
            (*self._scope(s.body, names), *step),
            names.scope(),
            frozenset(),
            s.span,
            s.variable,
            low,
            _last_value(high, s.inclusive),
        )
        inside = (*self._spends("assign", names, s.span), Assign(s.variable, "int", low, s.span), loop)
        spends = self._declaration_spends(None, outside, s.span)
        return (*before, *spends, *_held(self._declaration_holds(None, outside), inside, s.span))

    def _constant(self, term: Term) -> bool:
        """Whether the term keeps its value through the whole routine."""
        changing = self.assigned | set(self.header.globals.states) | set(self.header.globals.resource_names())
        return not any(v.name in changing for v in variables(term))

    def _noted(self, name: str, value: Term, names: Locals, before: list[Statement], span: Span) -> Term:
        sort = declared_sort(value)
        names.variables[name] = sort
        before.append(Assign(name, sort, value, span, is_note=True))
        return var(name, sort)

    def _label(self, words: str, span: Span) -> str:
        label = words if words not in self._labels and words != "while" else f"{words} at line {span.line}"
        if label in self._labels:
            label = next(f"{label} ({i})" for i in range(2, 1_000_000) if f"{label} ({i})" not in self._labels)
        self._labels.add(label)
        return label

    def _stage(self, s: tree.Stage, names: Locals, opened: list[Statement]) -> Stage:
        """A stage's block is no scope: what it declares, and the room for it, outlives it."""
        scope = names.scope()
        label = self._label(s.name, s.span)
        done: list[Statement] = []
        for statement in s.body:
            if isinstance(statement, tree.Var):
                done += self._declaration_spends(statement.size, names, statement.span)
                for gauge, amount in self._declaration_holds(statement.size, names):
                    if not self._constant(amount):
                        amount = self._noted(f"{statement.name}.room", amount, names, done, statement.span)
                    done.append(Acquire(gauge, amount, statement.span))
                    opened.append(Release(gauge, amount, statement.span))
                done += self._declared(statement, names)
            else:
                done += self._statement(statement, names, opened)
        known = {v.name for v in scope}
        declared = tuple(v for v in names.scope() if v.name not in known)
        spec = specification(label, s.header, names, s.span)
        return Stage(spec, tuple(done), scope, declared, frozenset(), s.span)


def _held(holds: Sequence[tuple[str, Term]], body: Block, span: Span) -> Block:
    """The body inside all the holds, the first one outermost."""
    for gauge, amount in reversed(holds):
        body = (Hold(gauge, amount, body, span, True),)
    return body


def _last_value(high: Term, inclusive: bool) -> Term:
    """The last integer that passes the test."""
    if inclusive:
        return high if is_integer(high, declared=True) else app("floor", high)
    return sub(high, ONE) if is_integer(high, declared=True) else sub(app("ceil", high), ONE)


def _assigned(block: tree.Block) -> frozenset[str]:
    """Names assigned anywhere in a block, loops' variables among them; a declaration counts, since it may stand in a
    loop.
    """
    found: set[str] = set()
    work = list(block)
    while work:
        s = work.pop()
        match s:
            case tree.Assign():
                found.add(s.target)
            case tree.Var() | tree.Note():
                found.add(s.name)
            case tree.If():
                work += [t for _, b in s.branches for t in b] + list(s.otherwise or ())
            case tree.Either():
                work += [t for b in s.branches for t in b]
            case tree.For():
                found.add(s.variable)
                work += s.body
            case tree.While() | tree.HoldStatement() | tree.Stage():
                work += s.body
    return frozenset(found)

