"""Random sheets as text: tariffs, routines of many shapes, and claims of which many are true and many are nearly so.

Claims are fitted to runs from zero and then bent: by one, in their relation, in what they take for granted of the
levels at the start. Everything comes from one seed.
"""

from __future__ import annotations

import random
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product

from workbench.errors import UllageError
from workbench.library.loading import load_text
from workbench.program.choosing import RandomChooser
from workbench.program.priced import Program
from workbench.program.pricing import price
from workbench.program.running import Machine

GAUGES = ("stack", "heap")
COUNTERS = ("time", "writes")
SIZES = range(6)
EVENTS = 4_000

# What formulas are fitted with: text, and value for (n, frame).
BASIS: tuple[tuple[str, Callable[[int, int], int]], ...] = (
    ("1", lambda n, f: 1),
    ("n", lambda n, f: n),
    ("frame", lambda n, f: f),
    ("n*frame", lambda n, f: n * f),
    ("n^2", lambda n, f: n * n),
    ("2^n", lambda n, f: 2**n),
    ("n^2*frame", lambda n, f: n * n * f),
    ("2^n*frame", lambda n, f: 2**n * f),
    ("n*2^n", lambda n, f: n * 2**n),
    ("n*2^n*frame", lambda n, f: n * 2**n * f),
    ("n^3", lambda n, f: n**3),
)


@dataclass(frozen=True)
class Sketch:
    """A sheet without claims: its head, and routines in parts, so that claims can be put in later."""

    head: str
    routines: tuple[tuple[str, str, str], ...]  # name, first line, rest from `is`

    def text(self, claims: dict[str, list[str]]) -> str:
        parts = [self.head]
        for name, first, rest in self.routines:
            lines = "".join(f"  claim c{i}: {c}\n" for i, c in enumerate(claims.get(name, ())))
            parts.append(f"{first}\n{lines}{rest}")
        return "\n".join(parts)


class Generator:
    """Makes sheets; the same seed makes the same sheets."""

    def __init__(self, seed: int) -> None:
        self.rng = random.Random(seed)
        self.fresh = 0

    # -------------------------------------------------------------- programs
    def sketch(self) -> Sketch:
        r = self.rng
        head = ["constant frame: nat where frame >= 1", "constant step: nat = 3", "state level: nat where level <= 9"]
        head += ["tariff t", "  counter time", "  counter writes"]
        head += ["  gauge stack over time", f"  gauge heap{r.choice(['', ' over time', ' over writes'])}"]
        if r.random() < 0.6:
            head.append(
                "  on call: " + r.choice(["hold frame stack", "spend 1 time, hold frame stack", "spend 2 time"])
            )
        if r.random() < 0.3:
            head.append("  on declare: " + r.choice(["hold 4*size stack", "spend 1 time", "hold size heap"]))
        if r.random() < 0.3:
            head.append("  on assign: spend " + r.choice(["1 time", "step time", "2 writes"]))
        if r.random() < 0.3:
            head.append("  on test: spend " + r.choice(["1 time", "2 time"]))
        head.append("end")
        made = [self.routine(f"r{i}", [f"r{j}" for j in range(i)]) for i in range(r.choice((1, 1, 2, 3)))]
        return Sketch("\n".join(head) + "\n", tuple(made))

    def routine(self, name: str, others: Sequence[str]) -> tuple[str, str, str]:
        shape = self.rng.choice(
            ("plain", "linear", "linear", "double", "half", "for", "for", "while", "nested", "stage")
        )
        self.fresh = 0
        self.others = others
        body = getattr(self, f"_{shape}")(name)
        measure = "  measure n\n" if shape in ("linear", "double", "half") else ""
        return name, f"routine {name}(n: nat)", f"{measure}is\n{body}end\n"

    def _plain(self, name: str) -> str:
        return self.block(3, ["n"], "  ")

    def _linear(self, name: str) -> str:
        before, after = self.block(1, ["n"], "    "), self.block(1, ["n"], "    ")
        call = f"    {name}(n - 1)\n"
        if self.rng.random() < 0.3:
            call = f"    hold {self.amount(['n'])} {self.gauge()} do\n      {name}(n - 1)\n    end\n"
        last = f"  else\n{self.block(1, [], '    ')}" if self.rng.random() < 0.4 else ""
        return f"  if n > 0 then\n{before}{call}{after}{last}  end\n"

    def _double(self, name: str) -> str:
        middle = self.block(1, [], "    ")
        return f"  if n > 0 then\n    {name}(n - 1)\n{middle}    {name}(n - 1)\n  end\n"

    def _half(self, name: str) -> str:
        return f"  if n > 0 then\n{self.block(1, ['n'], '    ')}    {name}(n div 2)\n  end\n"

    def _for(self, name: str) -> str:
        low, word, high = self.rng.choice(
            (("0", "below", "n"), ("1", "to", "n"), ("0", "to", "n"), ("1", "below", "n"))
        )
        return f"  for i from {low} {word} {high} do\n{self.block(2, ['n', 'i'], '    ')}  end\n"

    def _nested(self, name: str) -> str:
        high = self.rng.choice(("i", "n"))
        inner = f"    for j from 1 to {high} do\n{self.block(1, ['i', 'j'], '      ')}    end\n"
        return f"  for i from 1 to n do\n{inner}{self.block(1, ['i'], '    ')}  end\n"

    def _while(self, name: str) -> str:
        r = self.rng
        cost = r.choice((1, 2, 5))
        claim = r.choice((f"spent time = {cost}*left", f"spent time <= {cost}*left + 1", f"spent time >= {cost}*left",
                          f"spent time = {cost + 1}*left", f"spent time <= {cost + 3}*left + 2"))  # fmt: skip
        extra = r.choice(("", "    claim net stack = 0\n", "    claim peak stack = 4\n", "    claim left' = 0\n"))
        down = r.choice(("left - 1", "left - 1", "left - 1", "left div 2", "left - 2"))
        inside = r.choice((f"    spend {cost} time\n", f"    hold 4 stack do spend {cost} time end\n"))
        return (
            f"  var left: nat := n\n  while left > 0\n    claim {claim}\n{extra}"
            f"    measure left\n  do\n    left := {down}\n{inside}  end\n"
        )

    def _stage(self, name: str) -> str:
        r = self.rng
        claims = r.sample(("spent time <= 7*n", "spent time = 2*n", "net stack = 0", "kept' <= n", "peak stack = 4"), 2)
        lines = "".join(f"    claim {c}\n" for c in claims)
        return (
            f"  stage s\n{lines}  is\n    var kept: nat\n    kept := any where kept <= n\n"
            f"{self.block(1, ['n'], '    ')}  end\n  spend kept time\n{self.block(1, ['n'], '  ')}"
        )

    def block(self, length: int, names: Sequence[str], indent: str) -> str:
        return "".join(self.statement(names, indent, 2) for _ in range(self.rng.randint(1, length)))

    def statement(self, names: Sequence[str], indent: str, depth: int) -> str:
        r = self.rng
        kind = r.choice(("spend", "spend", "hold", "acquire", "if", "either", "var", "any", "call", "state", "loop"))
        amount = self.amount(names)
        if kind == "hold" and depth:
            inside = self.statement(names, indent + "  ", depth - 1)
            return f"{indent}hold {amount} {self.gauge()} do\n{inside}{indent}end\n"
        if kind == "acquire":
            gauge = self.gauge()
            given_back = r.choice((amount, amount, self.amount(names)))
            return f"{indent}acquire {amount} {gauge}\n{indent}spend 1 time\n{indent}release {given_back} {gauge}\n"
        if kind == "if" and depth:
            test = r.choice(("n > 2", "n mod 2 = 0", "n = 0", "level > 4", "frame > n"))
            other = f"{indent}else\n{self.statement(names, indent + '  ', depth - 1)}" if r.random() < 0.6 else ""
            return f"{indent}if {test} then\n{self.statement(names, indent + '  ', depth - 1)}{other}{indent}end\n"
        if kind == "either" and depth:
            first, second = (self.statement(names, indent + "  ", depth - 1) for _ in range(2))
            return f"{indent}either\n{first}{indent}else\n{second}{indent}end\n"
        if kind == "var":
            name = self.name()
            return (
                f"{indent}var {name}: nat size {r.choice(('1', 'n', '3'))} := {amount}\n{indent}spend {name} writes\n"
            )
        if kind == "any":
            name = self.name()
            return (
                f"{indent}var {name}: nat\n{indent}{name} := any where {name} <= {amount}\n{indent}spend {name} time\n"
            )
        if kind == "call" and self.others:
            return f"{indent}{r.choice(self.others)}({r.choice(('n', 'n + 1', '2', 'n div 2'))})\n"
        if kind == "state":
            return f"{indent}level := {r.choice(('0', 'min(9, level + 1)', 'level div 2', '9 - level', 'level - 1'))}\n"
        if kind == "loop" and depth:
            name = self.name()
            high = r.choice(("n", "3", "frame"))
            return f"{indent}for {name} from 1 to {high} do\n{indent}  spend 1 time\n{indent}end\n"
        return f"{indent}spend {amount} {r.choice(COUNTERS)}\n"

    def amount(self, names: Sequence[str]) -> str:
        r = self.rng
        plain = ["1", "2", "5", "frame", "step", "7 div 2", "max(2, frame)"]
        for n in names:
            plain += [n, f"2*{n}", f"{n} + 1", f"{n}*frame", f"{n} div 2", f"max({n}, 3)", f"lg({n} + 1)"]
            plain += [f"{n} - 1"] if r.random() < 0.2 else []
        return r.choice(plain)

    def gauge(self) -> str:
        return self.rng.choice(GAUGES)

    def name(self) -> str:
        self.fresh += 1
        return f"x{self.fresh}"

    # -------------------------------------------------------------- claims
    def sheet(self) -> str:
        """A sheet with claims."""
        while True:
            sketch = self.sketch()
            text = sketch.text({})
            program = priced(text)
            if program is not None:
                return sketch.text({name: self.claims(program, name) for name, _, _ in sketch.routines})

    def claims(self, program: Program, routine: str) -> list[str]:
        machine = Machine(program)
        samples: dict[tuple[int, int], list[dict[str, Fraction]]] = {}
        for n, frame in product(SIZES, (1, 2, 5)):
            for seed in range(3):
                values = {"n": n, "frame": frame, "level": seed * 3}
                try:
                    run = machine.run(routine, values, chooser=RandomChooser(seed), event_limit=EVENTS)
                except UllageError:
                    continue
                if run.complete and not run.faults:
                    found = {f"{k} {x}": Fraction(v) for k in ("spent", "net", "peak", "area")
                             for x, v in getattr(run, k).items()}  # fmt: skip
                    samples.setdefault((n, frame), []).append(found)
        made: list[str] = []
        aspects = sorted({a for runs in samples.values() for run in runs for a in run})
        for aspect in aspects:
            made += self._claims_of(aspect, {key: [run[aspect] for run in runs] for key, runs in samples.items()})
        self.rng.shuffle(made)
        return made[:10]

    def _claims_of(self, aspect: str, values: dict[tuple[int, int], list[Fraction]]) -> list[str]:
        r = self.rng
        exact = {key: v[0] for key, v in values.items() if len(set(v)) == 1}
        formula = fitted(exact) if len(exact) == len(values) else None
        if formula is None:
            high = max(max(v) / (key[0] * key[1] + 1) for key, v in values.items())
            bound = f"{-(-high // 1)}*(n*frame + 1)"
            return [f"{aspect} <= {bound}", f"{aspect} >= 0", r.choice((f"{aspect} <= {bound} - 1", f"{aspect} >= 1"))]
        kind, name = aspect.split()
        claims = [f"{aspect} = {formula}"]
        claims.append(r.choice((f"{aspect} <= {formula}", f"{aspect} >= {formula}", f"{aspect} <= {formula} + n")))
        bent = [f"{aspect} = {formula} + 1", f"{aspect} <= {formula} - 1", f"{aspect} >= {formula} + 1",
                f"n > 0 implies {aspect} = {formula}", f"n > 3 implies {aspect} <= {formula} - n + 4"]  # fmt: skip
        target = {"spent": name, "net": name, "peak": f"{name}.peak", "area": f"{name}.area"}[kind]
        bent += [f"{target}' = {formula}", f"{target}' = {target} + ({formula})", f"{target}' >= {target}"]
        if kind == "area" and name == "stack":
            bent += ["mean stack <= n*frame + 7", "mean stack <= frame", "mean stack >= 0"]
        return [*claims, r.choice(bent), r.choice(bent)]


def priced(text: str) -> Program | None:
    """The program of a sheet's text; None where it cannot be read."""
    loaded = load_text("random.ullage", text)
    if loaded.sheet is None or loaded.problems:
        return None
    return price(loaded.path, loaded.sheet, loaded.used)


def fitted(values: dict[tuple[int, int], Fraction]) -> str | None:
    """A combination of the basis that has exactly these values, with the fewest functions from its front."""
    if len(values) < 8:
        return None
    for size in (3, 6, 8, len(BASIS)):
        found = _solved(values, size)
        if found is not None:
            parts = [f"({c})*{text}" if c != 1 else text for c, (text, _) in zip(found, BASIS, strict=False) if c]
            return " + ".join(parts) or "0"
    return None


def _solved(values: dict[tuple[int, int], Fraction], size: int) -> list[Fraction] | None:
    """Gauss's elimination, exactly."""
    rows = [[Fraction(f(*key)) for _, f in BASIS[:size]] + [v] for key, v in values.items()]
    pivots: list[int] = []
    for column in range(size):
        at = next((i for i in range(len(pivots), len(rows)) if rows[i][column]), None)
        if at is None:
            continue
        place = len(pivots)
        rows[place], rows[at] = rows[at], rows[place]
        rows[place] = [x / rows[place][column] for x in rows[place]]
        for i in range(len(rows)):
            if i != place and rows[i][column]:
                rows[i] = [x - rows[i][column] * y for x, y in zip(rows[i], rows[place], strict=True)]
        pivots.append(column)
    if any(row[-1] for row in rows[len(pivots) :]):
        return None
    solution = [Fraction(0)] * size
    for i, column in enumerate(pivots):
        solution[column] = rows[i][-1]
    return solution
