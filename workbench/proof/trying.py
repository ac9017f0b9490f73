"""Claims tried on real runs, from small inputs and arbitrary entry levels: what a run breaks is refuted, proof or no
proof.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from workbench.algebra.evaluate import Compiled, Evaluator, TooLarge, Undefined
from workbench.algebra.terms import Rational, var
from workbench.errors import UllageError
from workbench.program.choosing import RandomChooser
from workbench.program.obligations import Owed
from workbench.program.priced import Claim, Program
from workbench.program.running import Activation, Machine
from workbench.proof.refuting import tidied
from workbench.proof.sampling import Sampler, Value, Values

# Runs of a routine; small inputs come first, so that most wrong claims fall at once.
RUNS = 30
# Events of one run: exponential routines are cut short, which loses nothing but late counterexamples.
EVENT_LIMIT = 1_500
# Events of all runs of a routine, and of those that make one counterexample plainer.
EVENT_BUDGET = 12_000
SHRINKING_BUDGET = 4_000

Key = tuple[str, str, str]  # routine, specification, claim label


@dataclass(frozen=True, slots=True)
class Broken:
    """A run that breaks a claim: values at the start of the specification, and at its end by primed names."""

    values: Values
    end: Values


def broken_claims(program: Program, owed: Owed, evaluator: Evaluator) -> dict[Key, Broken]:
    """Claims of the routine, its loops and stages that some run breaks, with small values that do."""
    return _Trials(program, owed, evaluator).broken()


class _Trials:
    """Runs of one routine and its claims as tests."""

    def __init__(self, program: Program, owed: Owed, evaluator: Evaluator) -> None:
        self.owed = owed
        self.name = owed.routine.name
        self.machine = Machine(program)
        self.tests: dict[str, list[tuple[Claim, Compiled]]] = {
            label: [(c, evaluator.compiled(c.formula)) for c in spec.claims]
            for label, spec in owed.specifications.items()
        }
        self.entry_names = set(program.counters)
        names = [var(p.name, p.sort) for p in owed.routine.parameters]
        names += [var(c.name, c.sort) for c in program.constants.values() if c.value is None]
        names += [var(s.name, s.sort) for s in program.states.values()]
        names += [var(c, "real") for c in program.counters]
        for gauge in program.gauges.values():
            parts = [gauge.name, f"{gauge.name}.peak"] + ([f"{gauge.name}.area"] if gauge.clock else [])
            self.entry_names.update(parts)
            names += [var(n, "real") for n in parts]
        self.sampler = Sampler(list(owed.start), names, evaluator)
        self.given = [evaluator.compiled(f) for f in owed.start]
        self.budget = EVENT_BUDGET

    def broken(self) -> dict[Key, Broken]:
        found: dict[Key, tuple[Rational, Broken]] = {}
        origins: dict[Key, tuple[int, Values]] = {}
        for seed, values in enumerate(self.sampler.draw(RUNS)):
            for key, broken in self._broken_in(values, seed):
                size = _size(broken.values)
                if key not in found or size < found[key][0]:
                    found[key] = (size, broken)
                    origins[key] = (seed, values)
            if self.budget <= 0:
                break
        result = {key: broken for key, (_, broken) in found.items()}
        for key, (seed, values) in origins.items():
            if not key[1]:
                result[key] = self._plainer(key, seed, values, result[key])
        return result

    def _plainer(self, key: Key, seed: int, values: Values, broken: Broken) -> Broken:
        """Each value made as small as the claim stays broken, one after the other."""
        self.budget = SHRINKING_BUDGET
        for name in sorted(values, key=lambda n: ("." in n, n)):
            for smaller in _smaller(values[name]):
                trial = {**values, name: smaller}
                again = dict(self._broken_in(trial, seed)).get(key) if self._allowed(trial) else None
                if again is not None:
                    values, broken = trial, again
                    break
        return broken

    def _allowed(self, values: Values) -> bool:
        try:
            return all(check(values) for check in self.given)
        except (Undefined, TooLarge):
            return False

    def _broken_in(self, values: Values, seed: int) -> Iterator[tuple[Key, Broken]]:
        """The claims that one run breaks, the smallest start of each first seen."""
        if self.budget <= 0:
            return
        entry = {n: v for n, v in values.items() if n in self.entry_names}
        try:
            made = self.machine.run(
                self.name,
                values,
                entry=entry,
                chooser=RandomChooser(seed),
                event_limit=min(EVENT_LIMIT, self.budget),
                trace=True,
            )
        except UllageError:
            return
        self.budget -= made.events
        if made.faults:
            return
        seen: set[Key] = set()
        for activation in sorted(made.activations, key=lambda a: _size(a.start)):
            if activation.routine != self.name:
                continue
            for claim, holds in self.tests.get(activation.specification, ()):
                key = (self.name, activation.specification, claim.label)
                if key not in seen and not _holds(holds, _environment(activation)):
                    seen.add(key)
                    yield key, Broken(tidied(dict(activation.start)), tidied(dict(activation.end)))


def _smaller(value: Value) -> Sequence[Value]:
    if isinstance(value, bool):
        return (False,) if value else ()
    return [v for v in (0, 1, 2, 3, 4) if v < value or v < -value]


def _size(values: Mapping[str, Value]) -> Rational:
    """How far from nothing the values are: the plainest of them are shown."""
    total: Rational = 0
    for v in values.values():
        total += v if v > 0 else -v
    return total


def _environment(activation: Activation) -> Values:
    values: Values = dict(activation.start)
    for name, value in activation.end.items():
        values[f"{name}'"] = value
    if not activation.specification and "result" in activation.end:
        values["result"] = activation.end["result"]
    return values


def _holds(formula: Compiled, values: Values) -> bool:
    try:
        return bool(formula(values))
    except (Undefined, TooLarge, KeyError):
        return True  # what has no value breaks nothing here: that it must have one is an obligation of its own
