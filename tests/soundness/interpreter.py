"""Runs a sheet straight from its syntax tree, as language.md §6 and §7 say; a second opinion on pricing and running.

Nothing of `workbench.program` is used. A run starts from any levels, peaks, areas and counters, decides `any` and
`either` by chance, stops at the first obligation that it breaks, and keeps every start and end of a specification.
"""

from __future__ import annotations

import random
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from fractions import Fraction

from tests.soundness.meaning import Lookup, Meaning, NoValue, TooMuch, Value, of_sort
from workbench.sheet import tree

EVENTS = 20_000
DEPTH = 50  # calls inside each other: each takes more than ten Python frames
KEPT = 2_000  # starts and ends that one run keeps
# What `any` is tried with, and what an uninitialised variable may hold.
WHOLE = (0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 12, 16, 17, 25, 40)
CHOICES: dict[str, tuple[Value, ...]] = {
    "nat": WHOLE,
    "int": (*WHOLE, -1, -2, -3, -5, -9),
    "real": (*WHOLE, -1, -2, -5, Fraction(1, 2), Fraction(-7, 3), Fraction(9, 4)),
    "bool": (False, True),
}
# Tried seldom: they make long runs.
FAR: dict[str, tuple[Value, ...]] = {"nat": (100, 1_000), "int": (-1_000, 1_000), "real": (-1_000, 1_000), "bool": ()}
FAR_SHARE = 0.06


class Fault(Exception):
    """The run breaks what the language makes an obligation."""


class Unlucky(Exception):
    """No value was found for an `any`: whether there is one is not known."""


@dataclass(frozen=True)
class Activation:
    """One start and end of a routine, a loop (from one of its heads) or a stage; `line` is where it begins."""

    line: int
    start: Mapping[str, Value]
    end: Mapping[str, Value]
    bound: Mapping[str, Value]  # what the routine's `with` names stand for


@dataclass
class Outcome:
    """What a run came to. `fault`: the obligation that it broke. `ended`: it came to its end."""

    start: dict[str, Value]
    end: dict[str, Value] = field(default_factory=dict)
    result: Value | None = None
    fault: str = ""
    ended: bool = False
    unlucky: bool = False
    too_much: bool = False
    chose: bool = False  # chance had a say
    activations: list[Activation] = field(default_factory=list)


class _Frame:
    """One call: scopes of variables, innermost last, `with` bindings, and the measure at its start."""

    def __init__(self, routine: tree.Routine, bindings: Mapping[str, Value]) -> None:
        self.routine = routine
        self.scopes: list[dict[str, Value]] = [{}]
        self.sorts: dict[str, str] = {}
        self.bindings = bindings
        self.measure: tuple[Value, ...] | None = None

    def find(self, name: str) -> dict[str, Value] | None:
        return next((s for s in reversed(self.scopes) if name in s), None)

    def visible(self) -> dict[str, Value]:
        return {n: v for s in self.scopes for n, v in s.items()}


class Interpreter:
    """One sheet with values for its open constants."""

    def __init__(self, sheet: tree.Sheet, constants: Mapping[str, Value]) -> None:
        self.meaning = Meaning(sheet, constants)
        self.routines = {i.name: i for i in sheet.items if isinstance(i, tree.Routine)}
        self.states = {i.name: i for i in sheet.items if isinstance(i, tree.State)}
        self.charges: dict[str, list[tree.Charge]] = {"call": [], "declare": [], "assign": [], "test": []}
        self.counters: list[str] = []
        self.gauges: dict[str, str | None] = {}
        for tariff in (i for i in sheet.items if isinstance(i, tree.Tariff)):
            for item in tariff.items:
                match item:
                    case tree.Counter(name):
                        self.counters.append(name)
                    case tree.Gauge(name, _, clock):
                        self.gauges[name] = clock
                    case tree.On(event, charges):
                        self.charges[event] += charges

    def run(
        self,
        routine: str,
        arguments: Mapping[str, Value],
        entry: Mapping[str, Value],
        seed: int,
        events: int = EVENTS,
    ) -> Outcome:
        """One run. `entry`: sheet state, counters, levels, peaks and areas; 0 where nothing is said of a resource."""
        return _Run(self, entry, seed, events).outcome(self.routines[routine], arguments)


class _Run:
    def __init__(self, sheet: Interpreter, entry: Mapping[str, Value], seed: int, events: int) -> None:
        self.sheet = sheet
        self.meaning = sheet.meaning
        self.rng = random.Random(seed)
        self.left = events
        self.depth = 0
        self.world: dict[str, Value] = {n: entry[n] for n in sheet.states}
        self.world.update({c: entry.get(c, 0) for c in sheet.counters})
        for g, clock in sheet.gauges.items():
            self.world[g] = entry.get(g, 0)
            self.world[f"{g}.peak"] = entry.get(f"{g}.peak", self.world[g])
            if clock:
                self.world[f"{g}.area"] = entry.get(f"{g}.area", 0)
        self.out = Outcome({})

    def outcome(self, routine: tree.Routine, arguments: Mapping[str, Value]) -> Outcome:
        self.out.start = {**self.world, **arguments}
        try:
            self.out.result = self._enter(routine, [arguments[p.name] for p in routine.parameters], None)
            self.out.ended = True
        except Fault as fault:
            self.out.fault = str(fault)
        except NoValue as fault:
            self.out.fault = f"no value: {fault}"
        except Unlucky:
            self.out.unlucky = True
        except (TooMuch, RecursionError):
            self.out.too_much = True
        self.out.end = dict(self.world)
        return self.out

    # -------------------------------------------------------------- names
    def _look(self, frame: _Frame) -> Lookup:
        def lookup(name: str, primed: bool) -> Value:
            scope = frame.find(name)
            if scope is not None:
                return scope[name]
            if name in frame.bindings:
                return frame.bindings[name]
            return self.world[name] if name in self.world else self.meaning.constants[name]

        return lookup

    def _value(self, e: tree.Expr, frame: _Frame) -> Value:
        return self.meaning.value(e, self._look(frame))

    def _store(self, name: str, value: Value, frame: _Frame) -> None:
        scope = frame.find(name)
        sort = frame.sorts[name] if scope is not None else self.sheet.states[name].sort
        if not of_sort(value, sort):
            raise Fault(f"{name} is to be {value}, no {sort}")
        (scope if scope is not None else self.world)[name] = value

    def _declare(self, name: str, sort: str, value: Value, frame: _Frame) -> None:
        if not of_sort(value, sort):
            raise Fault(f"{name} is to be {value}, no {sort}")
        frame.scopes[-1][name] = value
        frame.sorts[name] = sort

    def _any(self, sort: str) -> Value:
        self.out.chose = True
        return self._pool(sort)[0]

    def _pool(self, sort: str) -> list[Value]:
        """Values of a sort in the order in which they are tried."""
        pool, far = list(CHOICES[sort]), list(FAR[sort])
        self.rng.shuffle(pool)
        self.rng.shuffle(far)
        return [*far, *pool] if self.rng.random() < FAR_SHARE else [*pool, *far]

    def _snapshot(self, frame: _Frame) -> dict[str, Value]:
        return {**self.world, **frame.visible()}

    def _ended(self, line: int, start: dict[str, Value], frame: _Frame) -> None:
        if len(self.out.activations) < KEPT:
            self.out.activations.append(Activation(line, start, self._snapshot(frame), frame.bindings))

    # -------------------------------------------------------------- basic events
    def _tick(self) -> None:
        self.left -= 1
        if self.left < 0:
            raise TooMuch("too many events")

    def _amount(self, value: Value, what: str) -> Value:
        if value < 0:
            raise Fault(f"{what} of {value}")
        return value

    def _spend(self, amount: Value, counter: str) -> None:
        self._tick()
        self._amount(amount, f"a spend on {counter}")
        for g, clock in self.sheet.gauges.items():
            if clock == counter:
                self.world[f"{g}.area"] += self.world[g] * amount
        self.world[counter] += amount

    def _acquire(self, amount: Value, gauge: str) -> None:
        self._tick()
        self.world[gauge] += self._amount(amount, f"an acquire of {gauge}")
        self.world[f"{gauge}.peak"] = max(self.world[f"{gauge}.peak"], self.world[gauge])

    def _release(self, amount: Value, gauge: str) -> None:
        self._tick()
        self.world[gauge] -= self._amount(amount, f"a release of {gauge}")

    def _charge(self, event: str, look: Lookup) -> list[tuple[Value, str]]:
        """Spends what the event costs; returns what it holds, already taken."""
        charges = self.sheet.charges[event]
        for c in charges:
            if c.verb == "spend":
                self._spend(self.meaning.value(c.amount, look), c.resource)
        held = []
        for c in charges:
            if c.verb == "hold":
                amount = self.meaning.value(c.amount, look)
                self._acquire(amount, c.resource)
                held.append((amount, c.resource))
        return held

    def _give_back(self, held: Sequence[tuple[Value, str]]) -> None:
        for amount, gauge in reversed(held):
            self._release(amount, gauge)

    def _outer(self, extra: Mapping[str, Value]) -> Lookup:
        """What a charge sees: `size` or the callee's bindings, then the sheet."""

        def lookup(name: str, primed: bool) -> Value:
            if name in extra:
                return extra[name]
            return self.world[name] if name in self.world else self.meaning.constants[name]

        return lookup

    # -------------------------------------------------------------- routines
    def _call(self, name: str, arguments: tuple[tree.Expr, ...], frame: _Frame) -> Value | None:
        self._tick()
        callee = self.sheet.routines[name]
        values = [self._value(a, frame) for a in arguments]
        for p, v in zip(callee.parameters, values, strict=True):
            if not of_sort(v, p.sort):
                raise Fault(f"{p.name} of {name} is to be {v}, no {p.sort}")
        held = self._charge("call", self._outer(self._bindings(callee, values)))
        self._owed_state("at a call")
        result = self._enter(callee, values, frame)
        self._give_back(held)
        return result

    def _bindings(self, routine: tree.Routine, values: Sequence[Value]) -> dict[str, Value]:
        look = self._outer({p.name: v for p, v in zip(routine.parameters, values, strict=True)})
        return {b.name: self.meaning.value(b.value, look) for b in routine.bindings}

    def _owed_state(self, when: str) -> None:
        for s in self.sheet.states.values():
            if s.condition is not None and not self.meaning.holds(s.condition, self._outer({})):
                raise Fault(f"what holds of {s.name}, {when}")

    def _enter(self, routine: tree.Routine, values: Sequence[Value], caller: _Frame | None) -> Value | None:
        frame = _Frame(routine, self._bindings(routine, values))
        for p, v in zip(routine.parameters, values, strict=True):
            self._declare(p.name, p.sort, v, frame)
        for given in routine.header.givens:
            if caller is not None and not self.meaning.holds(given.formula, self._look(frame)):
                raise Fault(f"given of {routine.name}")
        frame.measure = self._measure(routine.header, frame)
        if caller is not None and caller.routine is routine and frame.measure is not None:
            self._must_fall(caller.measure, frame.measure, f"the measure of {routine.name}")
        if routine.result is not None:
            self._declare("result", routine.result, self._any(routine.result), frame)
        start = self._snapshot(frame)
        frame.scopes.append({})
        self.depth += 1
        if self.depth > DEPTH:
            raise TooMuch("calls nest too deep")
        self._scope(routine.body, frame)
        self.depth -= 1
        self._owed_state(f"at the end of {routine.name}")
        self._ended(routine.span.line, start, frame)
        result = frame.find("result")
        return None if result is None else result["result"]

    def _measure(self, header: tree.Header, frame: _Frame) -> tuple[Value, ...] | None:
        if header.measure is None:
            return None
        return tuple(self._value(c, frame) for c in header.measure.components)

    @staticmethod
    def _must_fall(before: tuple[Value, ...] | None, after: tuple[Value, ...], what: str) -> None:
        if any(not of_sort(v, "nat") for v in after) or (before is not None and not after < before):
            raise Fault(f"{what} goes from {before} to {after}")

    # -------------------------------------------------------------- statements
    @contextmanager
    def _inner(self, frame: _Frame) -> Iterator[list[tuple[Value, str]]]:
        """A scope: what is declared in it, and held for that, ends with it."""
        frame.scopes.append({})
        held: list[tuple[Value, str]] = []
        yield held
        self._give_back(held)
        frame.scopes.pop()

    def _scope(self, block: tree.Block, frame: _Frame) -> None:
        with self._inner(frame) as held:
            self._block(block, frame, held)

    def _block(self, block: tree.Block, frame: _Frame, held: list[tuple[Value, str]]) -> None:
        for s in block:
            self._tick()
            self._statement(s, frame, held)

    def _statement(self, s: tree.Statement, frame: _Frame, held: list[tuple[Value, str]]) -> None:
        match s:
            case tree.Skip():
                pass
            case tree.Assign(target, value):
                self._store(target, self._given_value(value, target, self._sort(target, frame), frame), frame)
            case tree.CallStatement(routine, arguments):
                self._call(routine, arguments, frame)
            case tree.Note(name, value):
                frame.scopes[-1][name] = self._value(value, frame)
            case tree.If(branches, otherwise):
                self._if(branches, otherwise, frame)
            case tree.Either(branches):
                self.out.chose = True
                self._scope(self.rng.choice(branches), frame)
            case tree.While():
                self._while(s, frame)
            case tree.For():
                self._for(s, frame)
            case tree.Var():
                self._var(s, frame, held)
            case tree.ResourceStatement(verb, amount, resource):
                act = {"spend": self._spend, "acquire": self._acquire, "release": self._release}[verb]
                act(self._value(amount, frame), resource)
            case tree.HoldStatement(amount, gauge, body):
                taken = self._value(amount, frame)
                self._acquire(taken, gauge)
                self._scope(body, frame)
                self._release(taken, gauge)
            case tree.Stage():
                self._stage(s, frame, held)

    def _sort(self, name: str, frame: _Frame) -> str:
        return frame.sorts[name] if frame.find(name) is not None else self.sheet.states[name].sort

    def _given_value(self, value: tree.Value, target: str, sort: str, frame: _Frame) -> Value:
        """What is assigned, with the charge: before it, but after a call that yields it."""
        if isinstance(value, tree.Application) and value.name in self.sheet.routines:
            result = self._call(value.name, value.arguments, frame)
            assert result is not None
            self._charge("assign", self._outer({}))
            return result
        self._charge("assign", self._outer({}))
        if isinstance(value, tree.AnyValue):
            return self._chosen(value, target, sort, frame)
        return self._value(value, frame)

    def _chosen(self, value: tree.AnyValue, target: str, sort: str, frame: _Frame) -> Value:
        self.out.chose = True
        pool = self._pool(sort)
        if value.condition is None:
            return pool[0]
        look = self._look(frame)
        for candidate in pool:

            def inside(name: str, primed: bool, candidate: Value = candidate) -> Value:
                return candidate if name == target else look(name, primed)

            if self.meaning.holds(value.condition, inside):
                return candidate
        raise Unlucky

    def _var(self, s: tree.Var, frame: _Frame, held: list[tuple[Value, str]]) -> None:
        size = 1 if s.size is None else self._value(s.size, frame)
        held += self._charge("declare", self._outer({"size": size}))
        value = self._any(s.sort) if s.value is None else self._given_value(s.value, s.name, s.sort, frame)
        self._declare(s.name, s.sort, value, frame)

    def _if(
        self, branches: tuple[tuple[tree.Expr, tree.Block], ...], otherwise: tree.Block | None, frame: _Frame
    ) -> None:
        for condition, block in branches:
            self._charge("test", self._outer({}))
            if self._value(condition, frame):
                self._scope(block, frame)
                return
        if otherwise is not None:
            self._scope(otherwise, frame)

    def _entry(self, header: tree.Header, frame: _Frame, what: str) -> dict[str, Value]:
        for given in header.givens:
            if not self.meaning.holds(given.formula, self._look(frame)):
                raise Fault(f"given of {what}")
        return self._snapshot(frame)

    def _while(self, s: tree.While, frame: _Frame) -> None:
        starts, before = [], None
        what = f"the loop at line {s.span.line}"
        while True:
            self._tick()
            starts.append(self._entry(s.header, frame, what))
            self._charge("test", self._outer({}))
            if not self._value(s.condition, frame):
                break
            measure = self._measure(s.header, frame)
            if measure is not None:
                self._must_fall(before, measure, f"the measure of {what}")
            before = measure
            self._scope(s.body, frame)
            after = self._measure(s.header, frame)
            if before is not None and after is not None and not after < before:
                raise Fault(f"the measure of {what} goes from {before} to {after}")
        for start in starts:
            self._ended(s.span.line, start, frame)

    def _for(self, s: tree.For, frame: _Frame) -> None:
        low, high = self._value(s.low, frame), self._value(s.high, frame)
        with self._inner(frame) as held:
            held += self._charge("declare", self._outer({"size": 1}))
            self._charge("assign", self._outer({}))
            self._declare(s.variable, "int", low, frame)
            starts = []
            while True:
                self._tick()
                starts.append(self._entry(s.header, frame, f"the loop at line {s.span.line}"))
                self._charge("test", self._outer({}))
                i = frame.scopes[-1][s.variable]
                if not (i <= high if s.inclusive else i < high):
                    break
                self._scope(s.body, frame)
                self._charge("assign", self._outer({}))
                frame.scopes[-1][s.variable] = i + 1
            for start in starts:
                self._ended(s.span.line, {**start, f"{s.variable}.first": low, f"{s.variable}.last": high}, frame)

    def _stage(self, s: tree.Stage, frame: _Frame, held: list[tuple[Value, str]]) -> None:
        start = self._entry(s.header, frame, f"stage {s.name}")
        self._block(s.body, frame, held)
        self._ended(s.span.line, start, frame)
