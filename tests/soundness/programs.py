"""Random programs as text: what a sheet says beside its claims. Every header leaves a place where claims can go."""

from __future__ import annotations

import random
from collections.abc import Sequence
from dataclasses import dataclass, field

# Where a header's claims go: a comment until they are known.
PLACE = "#claims"


@dataclass(frozen=True)
class Name:
    """A variable in sight. `fixed`: it cannot be assigned."""

    name: str
    sort: str
    fixed: bool = False


@dataclass(frozen=True)
class Place:
    """A header without claims: `line` is where its statement begins, `names` what is in sight there."""

    line: int
    kind: str  # routine, while, for, stage
    names: tuple[Name, ...]
    result: str | None = None


@dataclass
class Skeleton:
    """A sheet without claims. The comment `#claims` stands in the line after each place's, in the same order."""

    lines: list[str] = field(default_factory=list)
    places: list[Place] = field(default_factory=list)
    laws: list[tuple[str, int]] = field(default_factory=list)

    def text(self, claims: Sequence[Sequence[str]] | None = None) -> str:
        """The sheet, with a block of header lines for each place."""
        given = iter(claims or [()] * len(self.places))
        return "\n".join("\n".join(next(given)) if x == PLACE else x for x in self.lines) + "\n"


FUNCTIONS = {
    "tri": "function tri(a: nat): nat = if a = 0 then 0 else a + tri(a - 1)",
    "twice": "function twice(a: nat): nat = if a = 0 then 1 else 2*twice(a - 1)",
    "half": "function half(a: nat): real = a/2",
    "even": "function even(a: nat): bool = if a = 0 then true else not even(a - 1)",
    "less": "function less(a: nat): nat = a - 3",
    "loops": "function loops(a: nat): nat = loops(a) + 1",
    "up": "function up(a: nat): nat measure 9 - a = if a < 9 then up(a + 1) else a",
    "down": "function down(a: int): int = a - 1 given a > 0",
    "ping": "function ping(a: nat): nat = if a = 0 then 0 else 1 + pong(a - 1)\n"
    "function pong(a: nat): nat = if a = 0 then 0 else ping(a - 1)",
    "part": "function part(a: nat, b: nat): nat = if b = 0 then 0 else a div b",
    "wrong": "function wrong(a: nat): int = if a < 3 then a else wrong(a + 1)",
}
USES = {"tri": "tri({})", "twice": "twice({})", "half": "half({})", "less": "less({})", "loops": "loops({})",
        "up": "up({})", "down": "down({})", "ping": "ping({})", "part": "part({}, 2)",
        "wrong": "wrong({})"}  # fmt: skip
LAWS = {
    "tri": ("law sums(a: nat): 2*tri(a) = a*(a + 1) by induction on a", "sums"),
    "twice": ("law power(a: nat): twice(a) = 2^a by induction on a", "power"),
    "even": ("law parity(a: nat): even(a) implies a mod 2 = 0 by induction on a", "parity"),
    "ping": ("law small(a: nat): ping(a) <= a by induction on a", "small"),
    "up": ("law high(a: nat): up(a) >= 9", "high"),
}
FALSE_LAWS = (
    "law bent(a: nat): a*a <= 2*a + 1",
    "law bent(a: nat): 2^a >= a*a by induction on a",
    "law bent(a: nat) given a >= 2: a*a >= 2*a + 1",
    "law bent(a: nat): 2^a >= a*a by induction on a from 4",
    "law bent(a: nat): a mod 2 = 0 implies a div 2 >= 1",
    "law bent(a: int): a >= 0 by induction on a",
    "law bent(a: nat): lg(a + 1) <= a - 1 by induction on a from 1",
    "law bent(a: nat): 10 div a <= 10",
)


class Programs:
    """Writes programs; the same generator of random numbers writes the same ones."""

    def __init__(self, rng: random.Random) -> None:
        self.rng = rng
        self.out = Skeleton()
        self.constants = ["frame"]
        self.states: list[Name] = []
        self.functions: list[str] = []
        self.routines: list[tuple[str, tuple[Name, ...], str | None]] = []
        self.indent = 0
        self.count = 0
        self.loops = 0

    def skeleton(self) -> Skeleton:
        """One sheet."""
        self._head()
        for i in range(self.rng.choice((1, 1, 2, 2, 3))):
            self._routine(f"r{i}")
        return self.out

    def line(self, text: str) -> None:
        self.out.lines += ("  " * self.indent + text).split("\n")

    def chance(self, probability: float) -> bool:
        return self.rng.random() < probability

    def fresh(self, letter: str) -> str:
        """Mostly a new name; now and then one that a sibling scope may have used."""
        self.count += 1
        return f"{letter}{self.count if self.chance(0.8) else self.rng.randint(1, 3)}"

    # -------------------------------------------------------------- the sheet
    def _head(self) -> None:
        r = self.rng
        self.line(r.choice(("constant frame: nat where frame >= 1", "constant frame: nat", "constant frame: nat = 4")))
        if self.chance(0.4):
            self.constants.append("rate")
            self.line(r.choice(("constant rate: real where rate > 0", "constant rate: real = 3/2",
                                "constant rate: real where 0 <= rate <= 4", "constant rate: int")))  # fmt: skip
        if self.chance(0.4):
            self.states.append(Name("level", "nat"))
            self.line(r.choice(("state level: nat where level <= 9", "state level: nat", "state level: int")))
        if self.chance(0.15):
            self.states.append(Name("lit", "bool"))
            self.line("state lit: bool")
        if self.chance(0.35):
            self.functions = r.sample(list(FUNCTIONS), r.choice((1, 1, 2)))
            for f in self.functions:
                self.line(FUNCTIONS[f])
                if f in LAWS and self.chance(0.7):
                    self.line(LAWS[f][0])
                    self.out.laws.append((LAWS[f][1], 1))
        if self.chance(0.15):
            self.line(r.choice(FALSE_LAWS))
            self.out.laws.append(("bent", 1))
        self._tariff()

    def _tariff(self) -> None:
        r = self.rng
        clock = r.choice((" over time", " over time", "", " over writes"))
        for x in ("tariff t", "  counter time", "  counter writes", "  gauge stack over time", f"  gauge heap{clock}"):
            self.line(x)
        if self.chance(0.5):
            self.line("  on call: " + r.choice(("hold frame stack", "spend 1 time, hold frame stack", "spend 2 time",
                                               "hold frame stack, spend frame writes, hold 2 heap")))  # fmt: skip
        if self.chance(0.25):
            self.line("  on declare: " + r.choice(("hold 4*size stack", "spend 1 time",
                                                  "hold size heap, spend size time")))  # fmt: skip
        if self.chance(0.25):
            self.line("  on assign: spend " + r.choice(("1 time", "frame time", "2 writes")))
        if self.chance(0.25):
            self.line("  on test: spend " + r.choice(("1 time", "2 time")))
        self.line("end")

    def _routine(self, name: str) -> None:
        r = self.rng
        self.count = self.loops = 0
        sorts = ["nat", *r.choices(("nat", "nat", "bool", "int", "real"), k=r.choice((0, 0, 1, 1, 2)))]
        letters = {"nat": "nm", "bool": "b", "int": "k", "real": "x"}
        parameters: list[Name] = []
        for sort in sorts:
            free = [x for x in letters[sort] if x not in [p.name for p in parameters]]
            parameters += [Name(free[0], sort)] if free else []
        result = r.choice((None, None, None, "nat", "int", "real", "bool"))
        arrow = f" -> {result}" if result else ""
        binding = r.choice(("", "", "", " with frame = 2", " with frame = 8 + n", " with frame = 2*n"))
        listed = ", ".join(f"{p.name}: {p.sort}" for p in parameters)
        self.place("routine", f"routine {name}({listed}){arrow}{binding}", parameters, result)
        if self.chance(0.15):
            self.line("  given " + self._given(parameters))
        self.own = (name, tuple(parameters), result)
        shape = r.choice(("plain", "plain", "for", "while", "linear", "linear", "double", "half", "pair"))
        body = getattr(self, f"_{shape}")
        if shape not in ("plain", "for", "while") and self.chance(0.75):
            self.line("  measure " + r.choices(("n", "n + 1", "2*n", "n - 1", "frame", "n, n"), (12, 1, 1, 1, 1, 1))[0])
        self.line("is")
        self.indent = 1
        scope = [*parameters, *self.states]
        if result:
            scope.append(Name("result", result))
            self._set("result", result, [*parameters, *self.states])
        body(scope)
        self.indent = 0
        self.line("end")
        self.routines.append(self.own)

    def place(self, kind: str, line: str, names: Sequence[Name], result: str | None = None) -> None:
        """A statement's first line, with room for claims after it."""
        self.line(line)
        self.out.places.append(Place(len(self.out.lines), kind, tuple(names), result))
        self.out.lines.append(PLACE)

    def _given(self, names: Sequence[Name]) -> str:
        r = self.rng
        options = ["n >= 1", "n <= 5", "n mod 2 = 0", "n > 3 or frame = 1", "n < 3 and n > 5", "stack >= 0"]
        options += [f"{v.name} >= {r.choice((0, 1, 2))}" for v in names if v.sort != "bool"]
        options += [f"{v.name} <= n" for v in names if v.sort in ("nat", "int", "real")]
        options += ["level <= n", "level >= 1"] if any(s.name == "level" for s in self.states) else []
        return r.choice(options)

    # -------------------------------------------------------------- shapes of routines
    def _plain(self, scope: list[Name]) -> None:
        self.block(scope, 4, 2)

    def _for(self, scope: list[Name]) -> None:
        self._for_loop(scope, 2)
        if self.chance(0.3):
            self.statement(scope, 1)

    def _while(self, scope: list[Name]) -> None:
        self._while_loop(scope, 2)
        if self.chance(0.3):
            self.statement(scope, 1)

    def _recursion(self, scope: list[Name], calls: int, argument: str) -> None:
        test = self.rng.choices(("n > 0", "n >= 1", "n != 0", "n > 1", "not n = 0"), (8, 1, 1, 2, 1))[0]
        self.line(f"if {test} then")
        self.indent += 1
        inner = list(scope)
        self.block(inner, 1, 1, least=0)
        for i in range(calls):
            held = self.chance(0.2)
            if held:
                self.line(f"hold {self.amount(inner)} {self.gauge()} do")
                self.indent += 1
            self._self_call(inner, argument)
            if held:
                self.indent -= 1
                self.line("end")
            if i + 1 < calls or self.chance(0.4):
                self.block(inner, 1, 1, least=0)
        self.indent -= 1
        if self.chance(0.4):
            self.line("else")
            self.indent += 1
            self.block(list(scope), 1, 1)
            self.indent -= 1
        self.line("end")

    def _self_call(self, scope: list[Name], argument: str) -> None:
        name, parameters, result = self.own
        rest = [self._argument(p, scope, same=True) for p in parameters[1:]]
        self._call_of(name, [argument, *rest], result, scope)

    def _linear(self, scope: list[Name]) -> None:
        self._recursion(scope, 1, self.rng.choices(("n - 1", "n - 2", "n"), (14, 1, 1))[0])

    def _double(self, scope: list[Name]) -> None:
        self._recursion(scope, 2, "n - 1")

    def _half(self, scope: list[Name]) -> None:
        self._recursion(scope, 1, self.rng.choice(("n div 2", "n div 2", "n div 3", "(n + 1) div 2")))

    def _pair(self, scope: list[Name]) -> None:
        """The second parameter falls, or the first; or both at once."""
        if not any(v.name == "m" for v in scope):
            self._linear(scope)
            return
        name, parameters, result = self.own
        for test, change in (("m > 0", "m"), ("n > 0", "n")):
            self.line(f"if {test} then" if change == "m" else f"elif {test} then")
            self.indent += 1
            self.block(list(scope), 1, 1, least=0)
            values = [
                f"{p.name} - 1" if p.name == change else self._argument(p, scope, same=True) for p in parameters
            ]
            self._call_of(name, values, result, list(scope))
            self.indent -= 1
        self.line("end")

    # -------------------------------------------------------------- statements
    def block(self, scope: list[Name], most: int, depth: int, least: int = 1) -> None:
        for _ in range(self.rng.randint(least, most)):
            self.statement(scope, depth)
        if not most:
            self.line("skip")

    def statement(self, scope: list[Name], depth: int) -> None:
        kinds = ["spend"] * 4 + ["acquire", "release", "var", "assign"] * 2 + ["note", "any", "call"]
        if depth:
            kinds += ["hold", "hold", "if", "if", "either", "stage"] + (["for", "while"] if self.loops < 3 else [])
        getattr(self, f"_do_{self.rng.choice(kinds)}")(scope, depth)

    def inside(self, first: str, scope: list[Name], depth: int) -> None:
        """A line that opens a block, and the block, which is a scope."""
        self.line(first)
        self.indent += 1
        self.block(list(scope), 2, depth - 1)
        self.indent -= 1

    def _do_spend(self, scope: list[Name], depth: int) -> None:
        self.line(f"spend {self.amount(scope)} {self.rng.choice(('time', 'time', 'writes'))}")

    def _do_acquire(self, scope: list[Name], depth: int) -> None:
        gauge, amount = self.gauge(), self.amount(scope)
        self.line(f"acquire {amount} {gauge}")
        if self.chance(0.7):
            self.line("spend 1 time")
            self.line(f"release {amount if self.chance(0.8) else self.amount(scope)} {gauge}")

    def _do_release(self, scope: list[Name], depth: int) -> None:
        self.line(f"release {self.amount(scope)} {self.gauge()}")

    def _do_hold(self, scope: list[Name], depth: int) -> None:
        self.inside(f"hold {self.amount(scope)} {self.gauge()} do", scope, depth)
        self.line("end")

    def _do_if(self, scope: list[Name], depth: int) -> None:
        self.inside(f"if {self.condition(scope)} then", scope, depth)
        if self.chance(0.25):
            self.inside(f"elif {self.condition(scope)} then", scope, depth)
        if self.chance(0.6):
            self.inside("else", scope, depth)
        self.line("end")

    def _do_either(self, scope: list[Name], depth: int) -> None:
        self.inside("either", scope, depth)
        for _ in range(self.rng.choice((1, 1, 2))):
            self.inside("else", scope, depth)
        self.line("end")

    def _do_var(self, scope: list[Name], depth: int) -> None:
        sort = self.rng.choice(("nat", "nat", "int", "real", "bool"))
        name = self._new(scope, "v")
        size = self.rng.choice(("", "", " size n", " size 3", " size frame"))
        value = "" if self.chance(0.15) else f" := {self._value(scope, sort)}"
        self.line(f"var {name}: {sort}{size}{value}")
        scope.append(Name(name, sort))

    def _new(self, scope: Sequence[Name], letter: str) -> str:
        while True:
            name = self.fresh(letter)
            if all(v.name != name for v in scope):
                return name

    def _do_note(self, scope: list[Name], depth: int) -> None:
        name = self._new(scope, "z")
        kind = self.rng.choice(("nat", "int", "real", "bool"))
        value = self._expression(scope, kind)
        self.line(f"note {name} = {value}")
        scope.append(Name(name, "bool" if kind == "bool" else "real", fixed=True))

    def _do_assign(self, scope: list[Name], depth: int) -> None:
        free = [v for v in scope if not v.fixed]
        target = self.rng.choice(free)
        self._set(target.name, target.sort, scope)

    def _set(self, target: str, sort: str, scope: Sequence[Name]) -> None:
        self.line(f"{target} := {self._value(scope, sort)}")

    def _do_any(self, scope: list[Name], depth: int) -> None:
        free = [v for v in scope if not v.fixed and v.sort != "bool"]
        if not free:
            return self._do_spend(scope, depth)
        v = self.rng.choice(free)
        low = "0 <= " if v.sort != "nat" else ""
        where = self.rng.choice((f" where {low}{v.name} <= {self.amount(scope)}", f" where 1 <= {v.name} <= 3",
                                 f" where {v.name} >= 2 and {v.name} < n + 4", ""))  # fmt: skip
        self.line(f"{v.name} := any{where}")
        return None

    def _do_call(self, scope: list[Name], depth: int) -> None:
        if not self.routines:
            return self._do_spend(scope, depth)
        name, parameters, result = self.rng.choice(self.routines)
        self._call_of(name, [self._argument(p, scope) for p in parameters], result, scope)
        return None

    def _call_of(self, name: str, values: Sequence[str], result: str | None, scope: Sequence[Name]) -> None:
        call = f"{name}({', '.join(values)})"
        targets = [v for v in scope if not v.fixed and ((v.sort == "bool") == (result == "bool"))]
        if result and targets and self.chance(0.7):
            self.line(f"{self.rng.choice(targets).name} := {call}")
        else:
            self.line(call)

    def _argument(self, p: Name, scope: Sequence[Name], same: bool = False) -> str:
        if same and self.chance(0.7):
            return p.name
        return self._expression(scope, p.sort)

    def _do_stage(self, scope: list[Name], depth: int) -> None:
        self.place("stage", f"stage {self._new(scope, 's')}", scope)
        self.line("is")
        self.indent += 1
        self.block(scope, 2, depth - 1)  # no scope of its own
        self.indent -= 1
        self.line("end")

    def _do_for(self, scope: list[Name], depth: int) -> None:
        self._for_loop(scope, depth)

    def _do_while(self, scope: list[Name], depth: int) -> None:
        self._while_loop(scope, depth)

    def _for_loop(self, scope: Sequence[Name], depth: int) -> None:
        r = self.rng
        self.loops += 1
        name = self._new(scope, "i")
        bounds = [v.name for v in scope if v.sort == "nat"] or ["n"]
        low = r.choices(("0", "1", r.choice(bounds), "-1", "n div 2"), (4, 4, 1, 1, 1))[0]
        high = r.choices((r.choice(bounds), "n", "3", "frame", "n - 1", self.amount(scope)), (5, 5, 2, 1, 2, 1))[0]
        inner = [*scope, Name(name, "int", fixed=True)]
        if self.chance(0.3):
            self.place("for", f"for {name} from {low} {r.choice(('to', 'below'))} {high}", inner)
            self.line("do")
        else:
            self.line(f"for {name} from {low} {r.choice(('to', 'below'))} {high} do")
        self.indent += 1
        self.block(inner, 2, depth - 1)
        self.indent -= 1
        self.line("end")

    def _while_loop(self, scope: list[Name], depth: int) -> None:
        r = self.rng
        self.loops += 1
        name = self._new(scope, "w")
        sort = r.choice(("nat", "nat", "int"))
        self.line(f"var {name}: {sort} := {r.choice(('n', 'n', 'n + 1', '3', self.amount(scope)))}")
        up = self.chance(0.2)
        scope.append(Name(name, sort))
        test = f"{name} < n + 2" if up else f"{name} > 0"
        if self.chance(0.15):
            test += f" and {self.condition(scope)}"
        self.place("while", f"while {test}", scope)
        step = f"{name} + 1" if up else r.choices((f"{name} - 1", f"{name} div 2", f"{name} - 2"), (7, 2, 1))[0]
        if self.chance(0.6):
            self.line(f"  measure {r.choices((f'n + 2 - {name}' if up else name, 'n', f'{name} + 1'), (10, 1, 1))[0]}")
        self.line("do")
        self.indent += 1
        inner = [v for v in scope if v.name != name] + [Name(name, sort, fixed=True)]
        first = self.chance(0.5)
        if first:
            self.line(f"{name} := {step}")
        self.block(inner, 2, depth - 1)
        if not first:
            self.line(f"{name} := {step}")
        self.indent -= 1
        self.line("end")

    # -------------------------------------------------------------- expressions
    def gauge(self) -> str:
        return self.rng.choice(("stack", "stack", "heap"))

    def amount(self, scope: Sequence[Name]) -> str:
        """Mostly never negative."""
        return self._expression(scope, self.rng.choices(("nat", "real", "int"), (12, 1, 1))[0])

    def _value(self, scope: Sequence[Name], sort: str) -> str:
        return "any" if self.chance(0.04) else self._expression(scope, sort)

    def _expression(self, scope: Sequence[Name], sort: str) -> str:
        r = self.rng
        if sort == "bool":
            return self.condition(scope)
        plain = [v.name for v in scope if v.sort == "nat"] or ["1"]
        ints = [v.name for v in scope if v.sort == "int"] or plain
        reals = [v.name for v in scope if v.sort == "real"] or ints
        a, b = r.choice(plain), r.choice(plain)
        if sort == "int" or self.chance(0.12):
            i = r.choice(ints)
            return r.choice((i, f"{i} - 1", f"{a} - {b}", f"max({i}, 0)", f"{i} mod 3", f"abs({i})", f"-{a}"))
        if sort == "real":
            x = r.choice([*reals, "frame"])
            return r.choice((x, f"{x}/2", f"{a}/(1 + {b})", "1/2", f"max({x}, 0)", f"abs({x})", self.constants[-1]))
        if self.functions and self.chance(0.15):
            f = r.choice([f for f in self.functions if f in USES] or ["tri"])
            return USES[f].format(a) if f in self.functions else a
        options = ["1", "2", "5", "frame", a, a, f"{a} + 1", f"2*{a}", f"{a}*frame", f"{a} div 2",
                   f"max({a}, 3)", f"min({a}, 4)", f"{a} + {b}", f"{a}*{b}", f"lg({a} + 1)", f"max({a} - 1, 0)",
                   f"{a} mod 2"]  # fmt: skip
        if self.chance(0.3):
            options = [f"if {self.condition(scope)} then {a} else 2", f"sum(j for j from 1 to {a})", "2^n",
                       f"{a} - 1", f"floor({r.choice(reals)})", f"{a} div frame", f"(2 + {a}) div (1 + {b})",
                       f"fact(min({a}, 3))",
                       f"sum(j*{a} for j from 0 to 2)"]  # fmt: skip
        return r.choice(options)

    def condition(self, scope: Sequence[Name]) -> str:
        r = self.rng
        flags = [v.name for v in scope if v.sort == "bool"]
        if flags and self.chance(0.35):
            return r.choice((r.choice(flags), f"not {r.choice(flags)}"))
        numbers = [v.name for v in scope if v.sort in ("nat", "int", "real")] or ["frame"]
        a, b = r.choice(numbers), r.choice([*numbers, "frame"])
        plain = (f"{a} > 2", f"{a} mod 2 = 0", f"{a} = 0", f"{a} <= {b}", f"{a} < {b}", f"{a} != 1", f"1 <= {a} < 4")
        if self.chance(0.15):
            return f"({r.choice(plain)} {r.choice(('and', 'or'))} {r.choice(plain)})"
        if "even" in self.functions and self.chance(0.3):
            return "even(n)"
        return r.choice(plain)
