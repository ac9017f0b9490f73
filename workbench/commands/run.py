"""`ullage run FILE ROUTINE NAME=VALUE…`: the routine on values."""

from __future__ import annotations

import json
import sys
from dataclasses import dataclass, field
from difflib import get_close_matches
from fractions import Fraction
from typing import Any

from workbench.algebra.evaluate import TooLarge, Undefined, Value, is_of_sort
from workbench.algebra.formulas import show_number
from workbench.algebra.terms import Sort
from workbench.errors import UsageError
from workbench.exits import Exit
from workbench.library.loading import load
from workbench.printing.messages import format_problem, visible
from workbench.program.choosing import Chooser, RandomChooser, ScriptChooser
from workbench.program.priced import Program, Routine
from workbench.program.pricing import price
from workbench.program.running import EVENT_LIMIT, Machine, Run

HELP = """\
usage: ullage run FILE ROUTINE NAME=VALUE… [--json] [--curve] [--choose all|random --seed S] [--events N]

Runs the routine on values, from zero levels: what it spends, its net, peak, area and mean of every gauge.
NAME=VALUE sets a parameter, an open constant or a state variable: 12, -3, 7/2, 0.25, true, false.

  --json          one JSON document on stdout
  --curve         with the steps of every gauge over its clock
  --choose all    every way to choose at `either` and `any`, as far as they can be tried: least and greatest values
  --choose random one way, by chance; --seed S decides the same way again
  --events N      give up after that many events (default 1,000,000)
"""
# Ways to choose that `--choose all` tries; more take too long, and it says so.
WAYS_LIMIT = 1_000


@dataclass(slots=True)
class _Options:
    file: str = ""
    routine: str = ""
    values: dict[str, str] = field(default_factory=dict)
    json: bool = False
    curve: bool = False
    choose: str = ""
    seed: int = 0
    events: int = EVENT_LIMIT


def main(arguments: list[str]) -> int:
    """Runs the command; raises UsageError for arguments that it cannot use."""
    if "--help" in arguments or "-h" in arguments:
        sys.stdout.write(HELP)
        return Exit.OK
    options = _options(arguments)
    loaded = load(options.file)
    if loaded.sheet is None or loaded.problems:
        for problem in loaded.problems:
            print(format_problem(problem), file=sys.stderr)
        return Exit.UNUSABLE
    program = price(loaded.path, loaded.sheet, loaded.used)
    if options.routine not in program.routines:
        raise UsageError(_unknown("routine", options.routine, list(program.routines)))
    routine = program.routines[options.routine]
    values = _values(program, routine, options.values)
    machine = Machine(program)
    _must_hold(machine, program, routine, values)
    try:
        if options.choose == "all":
            return _all_ways(machine, routine, values, options)
        chooser: Chooser = RandomChooser(options.seed) if options.choose == "random" else ScriptChooser()
        made = machine.run(routine.name, values, chooser=chooser, event_limit=options.events)
    except TooLarge as e:
        raise UsageError(f"the values are too large to work with: {e}") from None
    for fault in made.faults[:10]:
        print(f"ullage: line {fault.span.line}: {visible(fault.message)}", file=sys.stderr)
    if options.json:
        print(json.dumps(_document(made, options.curve)))
    else:
        _print_text(program, routine, made, options.curve)
    return Exit.OK


def _options(arguments: list[str]) -> _Options:
    options = _Options()
    waiting = list(arguments)
    places: list[str] = []
    while waiting:
        word = waiting.pop(0)
        if word == "--json":
            options.json = True
        elif word == "--curve":
            options.curve = True
        elif word == "--plain":
            pass  # nothing here needs more than ASCII
        elif word in ("--choose", "--seed", "--events"):
            if not waiting:
                raise UsageError(f"{word} needs a value")
            _set(options, word, waiting.pop(0))
        elif word.startswith("--"):
            raise UsageError(_unknown("option", word, ["--json", "--curve", "--choose", "--seed", "--events"]))
        elif "=" in word and len(places) == 2:
            name, _, value = word.partition("=")
            options.values[name] = value
        else:
            places.append(word)
    if len(places) != 2:
        raise UsageError("run needs a file and a routine: ullage run FILE ROUTINE NAME=VALUE…")
    options.file, options.routine = places
    return options


def _set(options: _Options, option: str, value: str) -> None:
    if option == "--choose":
        if value not in ("all", "random"):
            raise UsageError(f"--choose takes all or random, not {value!a}")
        options.choose = value
        return
    if not value.isascii() or not value.isdigit() or len(value) > 18:
        raise UsageError(f"{option} takes a whole number, not {value!a}")
    if option == "--seed":
        options.seed = int(value)
    else:
        options.events = int(value)


def _unknown(kind: str, name: str, known: list[str]) -> str:
    near = get_close_matches(name, known, n=1)
    if near:
        return f"there is no {kind} {name!a}; is {near[0]} meant?"
    return f"there is no {kind} {name!a}; there is {', '.join(known) or 'none at all'}"


# ---------------------------------------------------------------- values
def _values(program: Program, routine: Routine, given: dict[str, str]) -> dict[str, Value]:
    wanted: dict[str, Sort] = {p.name: p.sort for p in routine.parameters}
    wanted |= {c.name: c.sort for c in program.constants.values() if c.value is None}
    wanted |= {s.name: s.sort for s in program.states.values()}
    for name in given:
        if name not in wanted:
            raise UsageError(_unknown("value to set", name, list(wanted)))
    needed = {p.name for p in routine.parameters} | set(wanted)
    missing = [n for n in wanted if n in needed and n not in given]
    if missing:
        raise UsageError("these need a value: " + ", ".join(f"{n}=… ({wanted[n]})" for n in missing))
    return {name: _value(name, text, wanted[name]) for name, text in given.items()}


def _value(name: str, text: str, sort: Sort) -> Value:
    value: Value
    if sort == "bool":
        if text not in ("true", "false"):
            raise UsageError(f"{name} is true or false, not {text!a}")
        return text == "true"
    try:
        if len(text) > 400 or "e" in text.lower():
            raise ValueError
        exact = Fraction(text.replace("_", ""))
        value = exact.numerator if exact.denominator == 1 else exact
    except (ValueError, ZeroDivisionError):
        raise UsageError(f"{name} needs a number such as 12, -3, 7/2 or 0.25, not {text!a}") from None
    if not is_of_sort(value, sort):
        kind = {"nat": "a natural number", "int": "an integer"}[sort]
        raise UsageError(f"{name} is {kind}, not {text!a}")
    return value


def _must_hold(machine: Machine, program: Program, routine: Routine, values: dict[str, Value]) -> None:
    """What the caller of a routine must establish is established by whoever runs it."""
    conditions = [(c.condition, f"constant {c.name}") for c in program.constants.values()]
    conditions += [(s.condition, f"state {s.name}") for s in program.states.values()]
    conditions += [(g, f"given of {routine.name}") for g in routine.spec.givens]
    for condition, what in conditions:
        if condition is not None:
            try:
                holds = machine.compiled(condition)(values)
            except (Undefined, KeyError):
                continue  # it speaks of levels, or has no meaning: the proof looks into that
            if not holds:
                raise UsageError(f"the values do not satisfy what is said of {what}")


# ---------------------------------------------------------------- answers
def _document(made: Run, curve: bool) -> dict[str, Any]:
    document = {
        "schema": 1,
        "spent": {c: _json(v) for c, v in made.spent.items()},
        "net": {g: _json(v) for g, v in made.net.items()},
        "peak": {g: _json(v) for g, v in made.peak.items()},
        "area": {g: _json(v) for g, v in made.area.items()},
        "mean": {g: _json(v) for g, v in made.mean.items()},
        "result": _json(made.result),
        "complete": made.complete,
    }
    if curve:
        document["curve"] = {g: [[_json(t), _json(v)] for t, v in steps] for g, steps in made.curve.items()}
    return document


def _json(value: Value | None) -> int | str | bool | None:
    if isinstance(value, Fraction):
        return value.numerator if value.denominator == 1 else f"{value.numerator}/{value.denominator}"
    return value


def _said(value: Value | None) -> str:
    if value is None:
        return "-"
    if isinstance(value, bool):
        return str(value).lower()
    return show_number(value)


def _print_text(program: Program, routine: Routine, made: Run, curve: bool) -> None:
    for name, spent in made.spent.items():
        print(f"spent {name}: {_said(spent)}{_unit(program.counters[name].unit)}")
    for name in made.net:
        unit = _unit(program.gauges[name].unit)
        parts = [f"net {_said(made.net[name])}", f"peak {_said(made.peak[name])}"]
        if name in made.area:
            parts += [f"area {_said(made.area[name])}", f"mean {_said(made.mean[name])}"]
        print(f"{name}: {', '.join(parts)}{unit}")
    if routine.result is not None:
        print(f"result: {_said(made.result)}")
    if not made.complete:
        print(f"not complete: given up after {made.events} events")
    if curve:
        for name, steps in made.curve.items():
            clock = program.gauges[name].clock
            print(f"{name} over {clock}:")
            for at, level in steps:
                print(f"  {_said(at):>12}  {_said(level)}")


def _unit(unit: str | None) -> str:
    return f" ({visible(unit)})" if unit else ""


def _all_ways(machine: Machine, routine: Routine, values: dict[str, Value], options: _Options) -> int:
    """Least and greatest of everything over all ways to choose, as far as they can be tried."""
    script: tuple[int, ...] | None = ()
    runs: list[Run] = []
    events = 0
    while script is not None and len(runs) < WAYS_LIMIT and events < options.events:
        chooser = ScriptChooser(script)
        runs.append(machine.run(routine.name, values, chooser=chooser, event_limit=options.events - events))
        events += runs[-1].events
        script = chooser.next_script()
    whole = script is None and all(r.complete for r in runs)
    ranges = {
        kind: {name: _range([getattr(r, kind)[name] for r in runs]) for name in getattr(runs[0], kind)}
        for kind in ("spent", "net", "peak", "area", "mean")
    }
    if options.json:
        print(json.dumps({"schema": 1, "ways": len(runs), **ranges, "complete": whole}))
        return Exit.OK
    print(f"{len(runs)} ways to choose" + ("" if whole else ", not all of them"))
    for kind, by_name in ranges.items():
        for name, found in by_name.items():
            if found is not None:
                least, greatest = found["least"], found["greatest"]
                print(f"{kind} {name}: {least}" + ("" if least == greatest else f" to {greatest}"))
    return Exit.OK


def _range(values: list[Any]) -> dict[str, Any] | None:
    known = [v for v in values if v is not None]
    return {"least": _json(min(known)), "greatest": _json(max(known))} if known else None
