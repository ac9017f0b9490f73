"""The priced program on concrete values: what it spends, holds and leaves, exactly.

One machine serves many runs of a program: its expressions are compiled once. Runs are iterative, so deep recursion
of a routine costs memory, not Python's stack, and every run is bounded by an event limit.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from workbench.algebra.evaluate import (
    Compiled,
    Evaluator,
    TooLarge,
    Undefined,
    Value,
    is_of_sort,
)
from workbench.algebra.terms import Rational, Sort, Term, var
from workbench.errors import Span, UllageError
from workbench.program.choices import candidates
from workbench.program.choosing import Chooser, ScriptChooser, possible_values
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
    Program,
    Release,
    Routine,
    Spend,
    Stage,
)

# Events of one run, unless the caller says otherwise: about two seconds.
EVENT_LIMIT = 1_000_000
# Iterations of one loop that a trace keeps; more say nothing new.
TRACED_ITERATIONS = 40


@dataclass(frozen=True, slots=True)
class Fault:
    """Something in a run that an obligation forbids: a negative amount, a value that is not of its type, a given
    unmet.
    """

    message: str
    span: Span


@dataclass(frozen=True, slots=True)
class Activation:
    """One start and end of a specification in a run: of a routine (`specification` ""), of a loop from one of its
    heads, of a stage. State by name.
    """

    routine: str
    specification: str
    start: Mapping[str, Value]
    end: Mapping[str, Value]


@dataclass(frozen=True, slots=True)
class Run:
    """What a run came to. `peak` is relative to the entry level, `area` is without the entry level's rectangle;
    `mean` is None where no time passed. `curve`: for every gauge with a clock the steps (clock, level). `complete`:
    it came to its end.
    """

    spent: dict[str, Rational]
    net: dict[str, Rational]
    peak: dict[str, Rational]
    area: dict[str, Rational]
    mean: dict[str, Rational | None]
    result: Value | None
    complete: bool
    curve: dict[str, list[tuple[Rational, Rational]]]
    faults: tuple[Fault, ...]
    activations: tuple[Activation, ...]
    events: int
    end: Mapping[str, Value] = field(default_factory=dict)


class _Frame(dict[str, Value]):
    """A routine's own names; all others are looked up among the shared ones."""

    __slots__ = ("routine", "shared")

    def __init__(self, shared: dict[str, Value], routine: str) -> None:
        super().__init__()
        self.shared = shared
        self.routine = routine

    def __missing__(self, name: str) -> Value:
        return self.shared[name]


def run(
    program: Program,
    routine: str,
    values: Mapping[str, Value],
    *,
    entry: Mapping[str, Value] | None = None,
    chooser: Chooser | None = None,
    event_limit: int = EVENT_LIMIT,
    trace: bool = False,
) -> Run:
    """One run of the routine. `values`: its parameters, open constants and sheet state; `entry`: levels, peaks,
    areas and counters at the start, zero where nothing is said.
    """
    return Machine(program).run(routine, values, entry=entry, chooser=chooser, event_limit=event_limit, trace=trace)


class Machine:
    """Runs of one program."""

    def __init__(self, program: Program) -> None:
        self.program = program
        self.evaluator = Evaluator(program.definitions())
        self._ends: dict[tuple[str, Sort, Term], list[Compiled]] = {}

    def compiled(self, term: Term) -> Compiled:
        """The term as a function of names' values, made once."""
        return self.evaluator.compiled(term)

    def ends(self, s: Choose) -> list[Compiled]:
        """Values worth trying for a choice."""
        key = (s.target, s.sort, s.condition)
        if key not in self._ends:
            self._ends[key] = [self.compiled(c) for c in candidates(var(s.target, s.sort), s.condition)]
        return self._ends[key]

    def run(
        self,
        routine: str,
        values: Mapping[str, Value],
        *,
        entry: Mapping[str, Value] | None = None,
        chooser: Chooser | None = None,
        event_limit: int = EVENT_LIMIT,
        trace: bool = False,
    ) -> Run:
        """As the function `run`."""
        return _Running(self, routine, values, entry or {}, chooser or ScriptChooser(), event_limit, trace).run()


@dataclass(slots=True)
class _Then:
    """Something to be done after the statements above it on the stack."""

    what: str  # release, return, head, again, loop, stage
    data: Any
    frame: _Frame


class _Running:
    """One run: a stack of what is still to be done."""

    def __init__(
        self, machine: Machine, routine: str, values: Mapping[str, Value], entry: Mapping[str, Value],
        chooser: Chooser, event_limit: int, trace: bool,
    ) -> None:  # fmt: skip
        self.machine = machine
        self.program = machine.program
        self.routine = self.program.routines[routine]
        self.chooser = chooser
        self.event_limit = event_limit
        self.trace = trace
        self.events = 0
        self.faults: list[Fault] = []
        self.activations: list[Activation] = []
        self.shared: dict[str, Value] = {}
        self._start(values, entry)
        self.frame = _Frame(self.shared, routine)
        for p in self.routine.parameters:
            self.frame[p.name] = values[p.name]
        if self.routine.result is not None:
            self.frame["result"] = self._any_value(self.routine.result)
        self.entry = dict(self.shared)
        self.highest = {g: self.entry[g] for g in self.program.gauges}
        self.curve: dict[str, list[tuple[Rational, Rational]]] = {
            g.name: [(self.entry[g.clock], self.entry[g.name])] for g in self.program.gauges.values() if g.clock
        }
        self.stack: list[tuple[Any, _Frame] | _Then] = []

    def _start(self, values: Mapping[str, Value], entry: Mapping[str, Value]) -> None:
        program = self.program
        for c in program.constants.values():
            if c.value is None:
                self.shared[c.name] = values[c.name]
        for s in program.states.values():
            self.shared[s.name] = values[s.name]
        for counter in program.counters:
            self.shared[counter] = entry.get(counter, 0)
        for g in program.gauges.values():
            level = entry.get(g.name, 0)
            self.shared[g.name] = level
            self.shared[f"{g.name}.peak"] = entry.get(f"{g.name}.peak", level)
            if g.clock:
                self.shared[f"{g.name}.area"] = entry.get(f"{g.name}.area", 0)

    def _any_value(self, sort: Sort) -> Value:
        """What is not initialised holds any value."""
        pool = possible_values(sort, (), None, "", {})
        return pool[self.chooser.pick(len(pool))]

    # -------------------------------------------------------------- the run
    def run(self) -> Run:
        complete = True
        self._enter(self.routine, self.frame, None)
        try:
            while self.stack:
                if self.events >= self.event_limit:
                    complete = False
                    break
                self._next()
        except Undefined as e:
            self.faults.append(Fault(str(e), self._span))
            complete = False
        except TooLarge as e:
            raise UllageError(f"the run was given up: {e}") from None
        return self._result(complete)

    def _next(self) -> None:
        top = self.stack.pop()
        if isinstance(top, _Then):
            self._finish(top)
            return
        statement, frame = top
        self.events += 1
        self._span = statement.span
        _DO[type(statement)](self, statement, frame)

    def _push(self, block: Block, frame: _Frame) -> None:
        self.stack.extend((s, frame) for s in reversed(block))

    def _value(self, term: Term, frame: _Frame) -> Any:
        return self.machine.compiled(term)(frame)

    # -------------------------------------------------------------- statements
    def _assign(self, s: Assign, frame: _Frame) -> None:
        self._store(s.target, s.sort, self._value(s.value, frame), frame, s.span)

    def _store(self, target: str, sort: Sort, value: Value, frame: _Frame, span: Span) -> None:
        if not is_of_sort(value, sort):
            self.faults.append(Fault(f"{target} is to be {value}, which is no {sort}", span))
        if target in self.program.states:
            self.shared[target] = value
        else:
            frame[target] = value

    def _choose(self, s: Choose, frame: _Frame) -> None:
        condition = None if s.condition.op == "true" else self.machine.compiled(s.condition)
        shared = s.target in self.program.states
        trial = frame if not shared else _copy(frame)
        pool = possible_values(s.sort, self.machine.ends(s), condition, s.target, trial)
        if not pool:
            raise Undefined(f"no value was found for {s.target}")
        self._store(s.target, s.sort, pool[self.chooser.pick(len(pool))], frame, s.span)

    def _spend(self, s: Spend, frame: _Frame) -> None:
        amount = self._amount(s.amount, frame, s.span)
        for g in self.program.clocked(s.counter):
            self.shared[f"{g.name}.area"] += self.shared[g.name] * amount
        self.shared[s.counter] += amount

    def _amount(self, term: Term, frame: _Frame, span: Span) -> Any:
        amount = self._value(term, frame)
        if amount < 0:
            self.faults.append(Fault(f"an amount of {amount}, which is negative", span))
        return amount

    def _acquire(self, s: Acquire, frame: _Frame) -> None:
        self._raise_level(s.gauge, self._amount(s.amount, frame, s.span))

    def _release(self, s: Release, frame: _Frame) -> None:
        self._lower_level(s.gauge, self._amount(s.amount, frame, s.span))

    def _raise_level(self, gauge: str, amount: Any) -> None:
        level = self.shared[gauge] + amount
        self.shared[gauge] = level
        self.shared[f"{gauge}.peak"] = max(self.shared[f"{gauge}.peak"], level)
        self.highest[gauge] = max(self.highest[gauge], level)
        self._step(gauge)

    def _lower_level(self, gauge: str, amount: Any) -> None:
        self.shared[gauge] -= amount
        self._step(gauge)

    def _step(self, gauge: str) -> None:
        clock = self.program.gauges[gauge].clock
        if clock:
            self.curve[gauge].append((self.shared[clock], self.shared[gauge]))

    def _hold(self, s: Hold, frame: _Frame) -> None:
        amount = self._amount(s.amount, frame, s.span)
        self._raise_level(s.gauge, amount)
        self.stack.append(_Then("release", (s.gauge, amount), frame))
        self._push(s.body, frame)

    def _if(self, s: If, frame: _Frame) -> None:
        self._push(s.then if self._value(s.condition, frame) else s.otherwise, frame)

    def _either(self, s: Either, frame: _Frame) -> None:
        self._push(s.branches[self.chooser.pick(len(s.branches))], frame)

    def _call(self, s: Call, frame: _Frame) -> None:
        callee = self.program.routines[s.routine]
        inner = _Frame(self.shared, s.routine)
        for p, argument in zip(callee.parameters, s.arguments, strict=True):
            value = self._value(argument, frame)
            if not is_of_sort(value, p.sort):
                self.faults.append(Fault(f"{p.name} of {callee.name} is to be {value}, which is no {p.sort}", s.span))
            inner[p.name] = value
        for given in callee.spec.givens:
            if not self._value(given, inner):
                self.faults.append(Fault(f"a call of {callee.name} does not meet its given", s.span))
        for state in self.program.states.values():
            if state.condition is not None and not self._value(state.condition, inner):
                self.faults.append(Fault(f"{state.name} is not as it must be at every call", s.span))
        if callee.result is not None:
            inner["result"] = self._any_value(callee.result)
        self._enter(callee, inner, (s, frame))

    def _enter(self, callee: Routine, frame: _Frame, caller: tuple[Call, _Frame] | None) -> None:
        start = self._snapshot(frame) if self.trace else None
        self.stack.append(_Then("return", (callee, start, caller), frame))
        self._push(callee.body, frame)

    def _loop(self, s: Loop, frame: _Frame) -> None:
        self.stack.append(_Then("head", (s, []), frame))

    def _stage(self, s: Stage, frame: _Frame) -> None:
        start = self._snapshot(frame) if self.trace else None
        self.stack.append(_Then("stage", (s, start), frame))
        self._push(s.body, frame)

    # -------------------------------------------------------------- what follows
    def _finish(self, then: _Then) -> None:
        match then.what:
            case "release":
                self._lower_level(*then.data)
            case "return":
                self._return(then.frame, *then.data)
            case "head":
                s, starts = then.data
                self.events += 1
                if self.trace and len(starts) < TRACED_ITERATIONS:
                    starts.append(self._snapshot(then.frame))
                self.stack.append(_Then("test", (s, starts), then.frame))
                self._push(s.test, then.frame)
            case "test":
                s, starts = then.data
                if self._value(s.condition, then.frame):
                    self.stack.append(_Then("head", (s, starts), then.frame))
                    self._push(s.body, then.frame)
                else:
                    self._ended(s.spec.label, starts, then.frame)
            case "stage":
                s, start = then.data
                self._ended(s.spec.label, [start] if start is not None else [], then.frame)

    def _ended(self, label: str, starts: Sequence[Mapping[str, Value]], frame: _Frame) -> None:
        if starts:
            end = self._snapshot(frame)
            self.activations += [Activation(frame.routine, label, start, end) for start in starts]

    def _return(
        self, frame: _Frame, callee: Routine, start: Mapping[str, Value] | None, caller: tuple[Call, _Frame] | None
    ) -> None:
        if start is not None:
            self.activations.append(Activation(callee.name, "", start, self._snapshot(frame)))
        if caller is not None:
            s, outer = caller
            if s.target is not None and s.target_sort is not None:
                self._store(s.target, s.target_sort, frame["result"], outer, s.span)

    def _snapshot(self, frame: _Frame) -> dict[str, Value]:
        return {**self.shared, **frame}

    # -------------------------------------------------------------- what it came to
    def _result(self, complete: bool) -> Run:
        program, now, was = self.program, self.shared, self.entry
        spent = {c: _tidy(now[c] - was[c]) for c in program.counters}
        net = {g: _tidy(now[g] - was[g]) for g in program.gauges}
        peak = {g: _tidy(self.highest[g] - was[g]) for g in program.gauges}
        area, mean = {}, {}
        for g in program.gauges.values():
            if g.clock:
                own = now[f"{g.name}.area"] - was[f"{g.name}.area"] - was[g.name] * spent[g.clock]
                area[g.name] = _tidy(own)
                mean[g.name] = _tidy(Fraction(own) / spent[g.clock]) if spent[g.clock] else None
                self.curve[g.name].append((now[g.clock], now[g.name]))
        result = self.frame.get("result") if complete else None
        return Run(
            spent, net, peak, area, mean, result, complete, self.curve, tuple(self.faults), tuple(self.activations),
            self.events, self._snapshot(self.frame),
        )  # fmt: skip


def _copy(frame: _Frame) -> _Frame:
    made = _Frame(frame.shared, frame.routine)
    made.update(frame)
    return made


def _tidy(value: Any) -> Any:
    return value.numerator if isinstance(value, Fraction) and value.denominator == 1 else value


_DO: dict[type, Any] = {
    Assign: _Running._assign,
    Choose: _Running._choose,
    Spend: _Running._spend,
    Acquire: _Running._acquire,
    Release: _Running._release,
    Hold: _Running._hold,
    If: _Running._if,
    Either: _Running._either,
    Call: _Running._call,
    Loop: _Running._loop,
    Stage: _Running._stage,
}
