"""Random sheets as text: programs with claims, of which many are true and many nearly so. Everything from one seed.

Claims are fitted to runs of the program without them, and then bent: by one, in their relation, in their condition, in
what they take for granted of levels at the start.
"""

from __future__ import annotations

import random
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from tests.soundness.fitting import Basis, Sample, fitted
from tests.soundness.interpreter import Interpreter
from tests.soundness.meaning import Meaning, NoValue, TooMuch, Value, fixed, of_sort
from tests.soundness.programs import Place, Programs, Skeleton
from workbench.library.loading import load_text
from workbench.sheet import tree
from workbench.sheet.reader import read_formula

RUNS = 45  # that formulas are fitted to
EVENTS = 2_500
LEVELS: tuple[Value, ...] = (0, 1, -1, 7, Fraction(1, 2), Fraction(-9, 4), 100, -30)
MOST_SAMPLES = 400
MOST_CLAIMS = 7


def sheet_text(seed: int) -> str:
    """A sheet with claims."""
    rng = random.Random(seed)
    while True:
        skeleton = Programs(rng).skeleton()
        sheet = readable(skeleton.text())
        if sheet is not None:
            return _Claims(rng, skeleton, sheet).text()


def readable(text: str) -> tree.Sheet | None:
    """The tree of a sheet's text; None where something is wrong with it."""
    loaded = load_text("random.ullage", text)
    return None if loaded.problems else loaded.sheet


def open_constants(sheet: tree.Sheet) -> list[tree.Constant]:
    """Constants that a run must be given values for."""
    return [i for i in sheet.items if isinstance(i, tree.Constant) and i.value is None]


def random_constants(sheet: tree.Sheet, rng: random.Random) -> dict[str, Value]:
    """Values for the open constants that are of their types and meet their conditions."""
    values: dict[str, Value] = {}
    for item in open_constants(sheet):
        for _ in range(50):
            value = random_value(item.sort, rng)
            meaning = Meaning(tree.Sheet(None, ()), {**values, item.name: value})
            if item.condition is None or meaning.holds(item.condition, fixed(meaning.constants)):
                values[item.name] = value
                break
    return values


def random_value(sort: str, rng: random.Random) -> Value:
    """Small, with edges."""
    if sort == "bool":
        return rng.random() < 0.5
    value = rng.choice((0, 0, 1, 1, 2, 2, 3, 4, 5, 6, 7, 8))
    if sort == "nat":
        return value
    signed = value if rng.random() < 0.75 else -value
    return signed if sort == "int" or rng.random() < 0.6 else signed + Fraction(rng.choice((1, -1)), rng.choice((2, 3)))


def random_entry(interpreter: Interpreter, rng: random.Random, from_zero: bool) -> dict[str, Value] | None:
    """State variables as they must be, and counters, levels, peaks and areas: zero, or anything with peak >= level."""
    entry: dict[str, Value] = {}
    for _ in range(30):
        entry = {s.name: random_value(s.sort, rng) for s in interpreter.states.values()}
        look = fixed({**interpreter.meaning.constants, **entry})
        conditions = [s.condition for s in interpreter.states.values() if s.condition is not None]
        if all(interpreter.meaning.holds(c, look) for c in conditions):
            break
    else:
        return None
    if from_zero:
        return entry
    entry.update({c: rng.choice(LEVELS) for c in interpreter.counters})
    for gauge, clock in interpreter.gauges.items():
        level = rng.choice(LEVELS)
        entry[gauge] = level
        entry[f"{gauge}.peak"] = level + rng.choice((0, 0, 1, 12, 500))
        if clock:
            entry[f"{gauge}.area"] = rng.choice(LEVELS)
    return entry


def may_start(interpreter: Interpreter, routine: tree.Routine, start: Mapping[str, Value]) -> bool:
    """Whether the routine's givens hold there; `with` names mean what they mean in it."""
    table = {**interpreter.meaning.constants, **start}
    try:
        bound = {b.name: interpreter.meaning.value(b.value, fixed(table)) for b in routine.bindings}
        return all(interpreter.meaning.holds(g.formula, fixed({**table, **bound})) for g in routine.header.givens)
    except (NoValue, TooMuch):
        return False


@dataclass(frozen=True)
class _Aspect:
    """Something to be claimed: its short form or name, and its value on a sample, None where that cannot be told."""

    words: str
    target: str
    before: str
    kind: str

    def value(self, both: Mapping[str, Value]) -> Value | None:
        end = both[f"{self.target}'"]
        if self.kind == "name":
            return end
        if self.kind == "peak":
            if end > both[self.target] or both[self.target] == both[self.before]:
                return end - both[self.before]
            return None
        if self.kind == "area":
            time = both[f"{self.words}'"] - both[self.words]
            return end - both[self.target] - both[self.before] * time
        return end - both[self.before]


class _Claims:
    """Puts claims into a skeleton."""

    def __init__(self, rng: random.Random, skeleton: Skeleton, sheet: tree.Sheet) -> None:
        self.rng = rng
        self.skeleton = skeleton
        self.sheet = sheet
        self.samples: dict[int, list[Sample]] = {p.line: [] for p in skeleton.places}
        self.routines = [i for i in sheet.items if isinstance(i, tree.Routine)]
        self.gauges: dict[str, str | None] = {}
        self.meaning = Meaning(tree.Sheet(None, tuple(i for i in sheet.items if not isinstance(i, tree.Constant))), {})

    def text(self) -> str:
        for routine in self.routines:
            for _ in range(RUNS):
                self._sample(routine)
        for _ in range(4):
            text = self.skeleton.text([self._header(p) for p in self.skeleton.places])
            if readable(text) is not None:
                return text
        return self.skeleton.text()

    def _sample(self, routine: tree.Routine) -> None:
        constants = random_constants(self.sheet, self.rng)
        try:
            interpreter = Interpreter(self.sheet, constants)
        except (NoValue, KeyError):
            return
        self.gauges = interpreter.gauges
        entry = random_entry(interpreter, self.rng, from_zero=True)
        arguments = {p.name: random_value(p.sort, self.rng) for p in routine.parameters}
        if entry is None or not may_start(interpreter, routine, {**entry, **arguments, "stack": 0}):
            return
        run = interpreter.run(routine.name, arguments, entry, self.rng.randrange(10**6), EVENTS)
        for a in run.activations if run.ended else ():
            both = {**interpreter.meaning.constants, **a.start, **{f"{k}'": v for k, v in a.end.items()}}
            if a.line in self.samples and len(self.samples[a.line]) < MOST_SAMPLES:
                self.samples[a.line].append(Sample({**interpreter.meaning.constants, **a.start}, both))

    # -------------------------------------------------------------- headers
    def _header(self, place: Place) -> list[str]:
        samples = list(self.samples[place.line])
        self.rng.shuffle(samples)
        inner = place.kind != "routine"
        lines: list[str] = []
        if inner and self.rng.random() < 0.5:
            lines += [f"given {g}" for g in self._givens(place, samples)]
        claims: list[str] = []
        for aspect in self._aspects(place, samples):
            if inner and self.rng.random() < 0.2:
                continue
            claims += self._claims_of(aspect, place, samples)
        if not inner:
            self.rng.shuffle(claims)
            claims = claims[:MOST_CLAIMS]
        for c in claims:
            lines.append(f"claim {c}")
            lines += self._hints(place)
        return [f"    {x}" for x in lines]

    def _hints(self, place: Place) -> list[str]:
        if self.rng.random() > 0.08:
            return []
        numbers = [n.name for n in place.names if n.sort == "nat"] or ["0"]
        a = self.rng.choice(numbers)
        laws = [f"using {law}({a})" for law, _ in self.skeleton.laws]
        return [f"  {self.rng.choice([*laws, *laws, f'cases {a} = 0', f'cases {a} mod 2 = 0', f'cases lg({a}) > 1'])}"]

    def _givens(self, place: Place, samples: Sequence[Sample]) -> list[str]:
        """What held at every start, and now and then something that did not."""
        numbers = [n.name for n in place.names if n.sort != "bool"]
        options = [f"{v} >= {k}" for v in numbers for k in (0, 1)]
        options += [f"{v} <= {w}" for v in numbers for w in numbers if v != w]
        true = [g for g in options if self._held(g, samples)]
        chosen = self.rng.sample(true, min(len(true), self.rng.choice((1, 2, 3))))
        if options and self.rng.random() < 0.12:
            chosen.append(self.rng.choice(options))
        return chosen

    def _held(self, formula: str, samples: Sequence[Sample]) -> bool:
        read = read_formula(formula)
        try:
            return all(self.meaning.holds(read, fixed(s.start)) for s in samples)
        except (NoValue, TooMuch, KeyError):
            return False

    def _aspects(self, place: Place, samples: Sequence[Sample]) -> list[_Aspect]:
        found = [_Aspect("spent time", "time", "time", "rise"), _Aspect("spent writes", "writes", "writes", "rise")]
        for g, clock in self.gauges.items():
            found += [_Aspect(f"net {g}", g, g, "rise"), _Aspect(f"peak {g}", f"{g}.peak", g, "peak")]
            if clock:
                found.append(_Aspect(clock, f"{g}.area", g, "area"))
        inner = place.kind != "routine"
        states = [i.name for i in self.sheet.items if isinstance(i, tree.State)]
        found += [_Aspect(f"{n.name}'", n.name, n.name, "name") for n in place.names
                  if ((inner and not n.fixed) or n.name in states) and n.name != "result"]  # fmt: skip
        found += [_Aspect(f"{s}'", s, s, "name") for s in states if s not in [n.name for n in place.names]]
        if place.result:
            found.append(_Aspect("result", "result", "result", "name"))
        # What nothing changed need not be claimed.
        return [a for a in found if not samples or any(s.both.get(f"{a.target}'") != s.both.get(a.target)
                for s in samples) or self.rng.random() < 0.1]  # fmt: skip

    # -------------------------------------------------------------- claims
    def _claims_of(self, aspect: _Aspect, place: Place, samples: Sequence[Sample]) -> list[str]:
        known = []
        for s in samples:
            value = aspect.value(s.both) if f"{aspect.target}'" in s.both else None
            if value is not None:
                known.append((s.start, value))
        words = f"area {aspect.before}" if aspect.kind == "area" else aspect.words
        if not known:
            return [f"{words} = 0"] if aspect.kind != "name" else []
        if all(isinstance(v, bool) for _, v in known):
            return [f"{words} = {self.rng.choice(('true', 'false', 'not ' + aspect.target))}"]
        basis = self._basis(place, known)
        formula = fitted(known, basis, self.meaning)
        made = self._exact(words, formula, aspect, place) if formula is not None else self._bounds(words, known, basis)
        if formula is None:
            made += self._partial(words, known, basis, place)
        return made

    def _basis(self, place: Place, known: Sequence[tuple[Mapping[str, Value], Value]]) -> Basis:
        numbers = [n.name for n in place.names if n.sort in ("nat", "int", "real") and n.name in known[0][0]]
        numbers = numbers if len(numbers) <= 4 else self.rng.sample(numbers, 4)
        powers = [v for v in numbers if all(of_sort(s[v], "nat") and s[v] <= 12 for s, _ in known)][:2]
        flags = [n.name for n in place.names if n.sort == "bool"][:1]
        constants = [c.name for c in open_constants(self.sheet)]
        return Basis.over(numbers, flags, constants, powers)

    def _exact(self, words: str, formula: str, aspect: _Aspect, place: Place) -> list[str]:
        r = self.rng
        inner = place.kind != "routine"
        claims = [f"{words} = {formula}"]
        if r.random() < 0.4:
            claims.append(r.choice((f"{words} <= {formula}", f"{words} >= {formula}", f"{words} <= {formula} + 1")))
        if inner and r.random() < 0.8:
            return claims[:1]
        bent = self._bent(words, formula, aspect, place)
        chosen = r.sample(bent, 2)
        return [r.choice(chosen)] if inner and r.random() < 0.5 else [*claims, *chosen]

    def _bent(self, words: str, formula: str, aspect: _Aspect, place: Place) -> list[str]:
        numbers = [n.name for n in place.names if n.sort in ("nat", "int")] or ["0"]
        v, w = self.rng.choice(numbers), self.rng.choice(numbers)
        end, start, g = f"{aspect.target}'", aspect.target, aspect.before
        swapped = " ".join({v: w, w: v}.get(x, x) for x in formula.replace("*", " * ").replace("^", " ^ ").split())
        stepped = re.sub(rf"\b{v}\b", f"({v} + 1)", formula)
        bent = [
            f"{words} = {formula} + 1", f"{words} <= {formula} - 1", f"{words} >= {formula} + 1",
            f"{words} >= {formula} - 1", f"{words} = {swapped}", f"{words} = {stepped}", f"{words} <= {stepped}",
            f"{v} > 0 implies {words} = {formula}", f"{v} > 3 implies {words} <= {formula} - {v} + 4",
            f"{v} = 0 implies {words} = 0", f"{words} = if {v} > 1 then {formula} else 0",
            f"{words} = {formula} or {words} = {formula} + {v}", f"not {words} = {formula} + 1",
            f"{words} <= max({formula}, {v})", f"{words} >= min({formula}, {v})", f"{words} <= abs({formula})",
            f"{end} = {formula}", f"{end} >= {start}", f"{end} = {start} + ({formula})", f"{end} <= {formula} + 2",
            f"({formula})*({formula} - 1) >= 0", f"lg({formula}) >= 0", f"{words} = ({formula})*{v}/{v}",
            f"{v} != 0 implies {words} = ({formula})*{v}/{v}", f"{words} = ({formula})*2 div 2",
            f"{words} = floor({formula})", f"stack.peak' <= heap.peak' + ({formula})",
            f"stack.peak' - stack.peak <= {formula}", "heap' <= heap.peak'", f"stack' = stack.peak' - ({formula})",
            f"{words} = {formula} and {end} >= {start}", f"{v} + 1 > 0 implies {words} >= sum(1 for q from 1 to {v})",
        ]  # fmt: skip
        if aspect.kind == "peak":
            bent += [f"{end} = max({start}, {g} + ({formula}))", f"{end} <= {start} + ({formula})"]
        if aspect.kind == "area":
            bent += [f"mean {g} <= {formula}", f"mean {g} = {formula}", f"mean {g} >= 0", f"mean {g} <= frame*{v}"]
            bent += [f"{end} = {start} + ({formula})"] * 2
        return bent

    def _bounds(self, words: str, known: Sequence[tuple[Mapping[str, Value], Value]], basis: Basis) -> list[str]:
        """Bounds by the samples: a whole number times something that grows."""
        r = self.rng
        texts = [t for t, _ in basis.parts[: basis.sizes[1]]]
        shape = f"({r.choice(texts)} + {r.choice(texts)} + 1)"
        read = read_formula(shape)
        factors = []
        for start, value in known:
            try:
                size = self.meaning.value(read, fixed({**self.meaning.constants, **start}))
            except (NoValue, TooMuch, KeyError):
                continue
            if size > 0:
                factors.append(Fraction(value) / size)
        if not factors:
            return []
        high, low = -int(-max(factors) // 1), int(min(factors) // 1)
        claims = [f"{words} <= ({high})*{shape}", f"{words} >= ({low})*{shape}"]
        bent = (f"{words} <= ({high})*{shape} - 1", f"{words} >= ({low})*{shape} + 1", f"{words} >= 0")
        claims.append(r.choice(bent))
        return claims

    def _partial(
        self, words: str, known: Sequence[tuple[Mapping[str, Value], Value]], basis: Basis, place: Place
    ) -> list[str]:
        """Formulas for a part of the values at the start."""
        numbers = [n.name for n in place.names if n.sort in ("nat", "int")]
        tests = [f"{v} > 0" for v in numbers] + [f"{v} = 0" for v in numbers] + [f"{v} > 2" for v in numbers]
        tests += [n.name for n in place.names if n.sort == "bool"] + [f"{v} mod 2 = 0" for v in numbers]
        claims = []
        for test in self.rng.sample(tests, min(3, len(tests))):
            read = read_formula(test)
            part = [(s, v) for s, v in known if self.meaning.holds(read, fixed(s))]
            formula = fitted(part, basis, self.meaning)
            if formula is not None:
                extra = self.rng.choice(("", "", "", " + 1", " - 1"))
                claims.append(f"{test} implies {words} = {formula}{extra}")
        return claims
