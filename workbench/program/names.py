"""Which names are visible where, and by which terms they go, while a routine is priced."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

from workbench.algebra.terms import Sort, Term, substitute, var
from workbench.program.priced import Gauge, Variable
from workbench.program.translate import Vocabulary, translate
from workbench.sheet import tree


@dataclass(slots=True)
class Globals:
    """Names of the whole sheet. `constants`: a constant with a value stands for it, an open one for itself."""

    vocabulary: Vocabulary
    constants: dict[str, Term]
    states: dict[str, Sort]
    counters: set[str]
    gauges: dict[str, Gauge]

    def resource_names(self) -> Iterator[str]:
        yield from self.counters
        for g in self.gauges.values():
            yield g.name
            yield f"{g.name}.peak"
            if g.clock:
                yield f"{g.name}.area"


@dataclass(slots=True)
class Locals:
    """Names of one routine. A scope shares nothing with its siblings: `inner` copies what is visible."""

    globals: Globals
    variables: dict[str, Sort] = field(default_factory=dict)
    bindings: Mapping[str, Term] = field(default_factory=dict)

    def inner(self) -> Locals:
        return Locals(self.globals, dict(self.variables), self.bindings)

    def lookup(self, name: str, primed: bool) -> Term:
        mark = "'" if primed else ""
        if name in self.variables:
            return var(name + mark, self.variables[name])
        if name in self.bindings:
            return self.bindings[name]
        if name in self.globals.states:
            return var(name + mark, self.globals.states[name])
        if name in self.globals.constants:
            return self.globals.constants[name]
        return var(name + mark, "real")

    def term(self, expr: tree.Expr) -> Term:
        return translate(expr, self.lookup, self.globals.vocabulary)

    def scope(self) -> tuple[Variable, ...]:
        return tuple(Variable(n, s) for n, s in self.variables.items())


def bound_names(
    bindings: tuple[tree.Binding, ...], parameters: Mapping[str, Sort], sheet: Globals, entry: Mapping[Term, Term]
) -> dict[str, Term]:
    """What the `with` names stand for: expressions over parameters' entry values, by the names that `entry` gives
    them.
    """
    local = Locals(sheet, dict(parameters))
    return {b.name: substitute(local.term(b.value), entry) for b in bindings}
