"""Claims tried on real runs, from small inputs and arbitrary entry levels: what a run breaks is refuted, proof or no
proof.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

from workbench.algebra.evaluate import Definition, TooLarge, Undefined, compile_term
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
# Events of all runs of a routine.
EVENT_BUDGET = 12_000

Key = tuple[str, str, str]  # routine, specification, claim label


@dataclass(frozen=True, slots=True)
class Broken:
    """A run that breaks a claim: values at the start of the specification, and at its end by primed names."""

    values: Values
    end: Values


def broken_claims(program: Program, owed: Owed, definitions: Mapping[str, Definition]) -> dict[Key, Broken]:
    """Claims of the routine, its loops and stages that some run breaks, with the smallest values found."""
    name = owed.routine.name
    tests: dict[str, list[tuple[Claim, Callable[[Mapping[str, Value]], Value]]]] = {
        label: [(c, compile_term(c.formula, definitions)) for c in spec.claims]
        for label, spec in owed.specifications.items()
    }
    found: dict[Key, tuple[Rational, Broken]] = {}
    for activation in _activations(program, owed, definitions):
        if activation.routine != name:
            continue
        for claim, holds in tests.get(activation.specification, ()):
            key = (name, activation.specification, claim.label)
            size = _size(activation.start)
            if key in found and found[key][0] <= size:
                continue
            if not _holds(holds, _environment(activation)):
                found[key] = (size, Broken(tidied(dict(activation.start)), tidied(dict(activation.end))))
    return {key: broken for key, (_, broken) in found.items()}


def _size(values: Mapping[str, Value]) -> Rational:
    """How far from nothing the values are: of all runs that break a claim the plainest one is shown."""
    return sum(abs(v) for v in values.values())


def _environment(activation: Activation) -> Values:
    values: Values = dict(activation.start)
    for name, value in activation.end.items():
        values[f"{name}'"] = value
    if not activation.specification and "result" in activation.end:
        values["result"] = activation.end["result"]
    return values


def _holds(formula: Callable[[Mapping[str, Value]], Value], values: Values) -> bool:
    try:
        return bool(formula(values))
    except (Undefined, TooLarge, KeyError):
        return True  # what has no value breaks nothing here: that it must have one is an obligation of its own


def _activations(program: Program, owed: Owed, definitions: Mapping[str, Definition]) -> Iterator[Activation]:
    routine = owed.routine
    names = [var(p.name, p.sort) for p in routine.parameters]
    names += [var(c.name, c.sort) for c in program.constants.values() if c.value is None]
    names += [var(s.name, s.sort) for s in program.states.values()]
    names += [var(c, "real") for c in program.counters]
    for gauge in program.gauges.values():
        names += [var(gauge.name, "real"), var(f"{gauge.name}.peak", "real")]
        if gauge.clock:
            names.append(var(f"{gauge.name}.area", "real"))
    entry_names = {n.name for n in names if n.name.partition(".")[0] in program.gauges or n.name in program.counters}
    budget = EVENT_BUDGET
    machine = Machine(program)
    for seed, values in enumerate(Sampler(list(owed.start), names, definitions).draw(RUNS)):
        entry = {n: v for n, v in values.items() if n in entry_names}
        try:
            made = machine.run(
                routine.name,
                values,
                entry=entry,
                chooser=RandomChooser(seed),
                event_limit=min(EVENT_LIMIT, budget),
                trace=True,
            )
        except UllageError:
            continue
        if not made.faults:
            yield from made.activations
        budget -= made.events
        if budget <= 0:
            return
