"""Moves of the kernel, simulated: whatever a state says holds for values that satisfy what it began with.

A run picks values, facts that they satisfy, and random moves, sensible and senseless ones. Names that a move makes get
the values that they stand for; at a case split the case that is true is followed. After every move that the kernel
allows, each row, each undecided fact and each value that an atom has must hold.
"""

from __future__ import annotations

import random
from collections import Counter
from fractions import Fraction
from math import floor

import pytest

from tests.proof.obligations import functions, laws
from tests.proof.reading import POOL, Unknown, inside, total, value_of
from tests.proof.shaping import NAMES, P, Q, formula, number
from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import (
    NOTHING,
    Atom,
    Poly,
    TooLargeToNormalize,
    constant,
    of_atom,
    plus,
    scaled,
)
from workbench.algebra.terms import FALSE, Rational, Term, app, num
from workbench.proof import instances
from workbench.proof.kernel import (
    NONE,
    Define,
    Instance,
    Invert,
    Known,
    NotProved,
    OpenPositivePart,
    Rename,
    Shift,
    State,
    SumLaw,
    ThreeWays,
    moved,
    start,
)

Values = dict[str, Rational]
MOVES = 14
KINDS = ("define", "shift", "rename", "invert", "open", "ways", "law", "sum", "split", "rest")


class Run:
    """One state, and values of which everything in it must be true."""

    def __init__(self, seed: int) -> None:
        self.rng = random.Random(seed)
        self.algebra = Algebra()
        self.values: Values = {v.name: self.rng.choice(POOL[v.sort]) for v in (*NAMES, P, Q)}
        facts = [f for f in (self._fact() for _ in range(4)) if f is not None]
        self.state = start(self.algebra, facts, FALSE)
        self.made: Counter[str] = Counter()

    def _fact(self) -> Term | None:
        rng = self.rng
        f = formula(rng, 2)
        try:
            if rng.random() < 0.5:  # an equation, or a bound that is met
                left, right = (number(rng, rng.choice((0, 1, 2))) for _ in range(2))
                gap = total(left, self.values, functions()) - total(right, self.values, functions())
                return app(rng.choice(("=", "=", ">=", "<=")), left, app("+", right, num(gap)))
            return f if total(f, self.values, functions()) else app("not", f)
        except Unknown:
            return None

    def value(self, p: Poly) -> Rational:
        return value_of(p, self.values, functions())

    # -------------------------------------------------------------- what must hold
    def check(self) -> None:
        for row in self.state.rows.values():
            value = self.known(row.poly)
            if value is not None:
                assert {">=": value >= 0, ">": value > 0, "=": value == 0}[row.relation], (row, self.values)
        for k in self.state.pending:
            assert self.known(k.poly) in (1, None), (k, self.values)
        for atom, image in self.state.images.items():
            own, value = self.known(of_atom(atom)), self.known(image)
            assert own is None or value is None or own == value, (atom, image, self.values)
        for atom in self.state.inverted:
            assert self.known(of_atom(atom)) != 0, atom

    def known(self, p: Poly) -> Rational | None:
        try:
            return self.value(p)
        except (Unknown, OverflowError):
            return None

    # -------------------------------------------------------------- random moves
    def atoms(self) -> list[Atom]:
        found: set[Atom] = set(self.state.images)
        for poly in self.polys():
            found |= poly.deep
        return sorted(found, key=lambda a: a.key)

    def polys(self) -> list[Poly]:
        return [r.poly for r in self.state.rows.values()] + [k.poly for k in self.state.pending]

    def expression(self) -> Poly:
        atoms = self.atoms()
        p = constant(self.rng.choice((0, 1, 2, -1, Fraction(1, 2))))
        for _ in range(self.rng.randint(0, 2)):
            if atoms:
                p = plus(p, scaled(of_atom(self.rng.choice(atoms)), self.rng.choice((1, 1, -1, 2))))
        return p

    def step(self) -> None:
        rng, atoms = self.rng, self.atoms()
        if not atoms:
            return
        atom = rng.choice(atoms)
        kind = rng.choice((*KINDS, "law", "invert", "invert"))
        if kind == "split":
            self._split(rng.choice([a for a in atoms if a.idempotent] or [atom]))
        elif kind == "rest":
            self._divide(atom, rng.choice((1, 2, 3)))
        else:
            move = self._move(kind, atom, atoms)
            self._made_by(move, moved(self.state, move, laws()))
        self.made[kind] += 1

    def _move(
        self, kind: str, atom: Atom, atoms: list[Atom]
    ) -> Define | Shift | Rename | Invert | OpenPositivePart | ThreeWays | Instance | SumLaw:
        rng = self.rng
        wanted = {"define": "=", "shift": ">="}.get(kind)
        row = rng.choice([n for n, r in self.state.rows.items() if r.relation == wanted] or [*self.state.rows, 0])
        own = sorted(self.state.rows[row].poly.atoms, key=lambda a: a.key) if row in self.state.rows else []
        match kind:
            case "define":
                return Define(row, rng.choice(own or [atom]))
            case "shift":
                return Shift(row, rng.choice(own or [atom]))
            case "rename":
                return Rename(plus(of_atom(atom), self.expression()), atom)
            case "invert":
                inverses = [a.parts[0].lead[0][0] for a in atoms if a.kind == "inv" and len(a.parts[0].terms) == 1]
                return Invert(rng.choice(inverses or [atom]))
            case "open":
                return OpenPositivePart(rng.choice([a for a in atoms if a.kind == "pos"] or [atom]))
            case "ways":
                return ThreeWays(rng.choice([a for a in atoms if a.data == ("eq",)] or [atom]))
            case "sum":
                sums = [a for a in atoms if a.kind == "sum" and not a.loose]
                if not sums:
                    return SumLaw("first", atom)
                one = rng.choice(sums)
                found = instances.antidifference(self.state, one)
                return SumLaw(rng.choice(("closed", "closed", "first", "last", "empty")), one, found)
        sensible = [*instances.bounding(atoms), *instances.unfolding(atoms, functions()),
                    *instances.simplifying(self.state, atoms, functions())]  # fmt: skip
        some = [m for m in sensible if isinstance(m, Instance)]
        if some and rng.random() < 0.7:
            return rng.choice(some)
        law = laws()[rng.choice(sorted(laws()))]
        return Instance(law.name, tuple(self.expression() for _ in law.parameters))

    def _made_by(self, move: object, after: State) -> None:
        """The value of the name that the move has made."""
        name = f"~{after.newest}"
        if isinstance(move, Shift):
            self.values[name] = self.value(self.state.rows[move.row].poly)
            assert self.values[name] >= 0 and self.values[name].denominator == 1
        elif isinstance(move, Rename):
            self.values[name] = self.value(move.poly)
        self.state = after

    def _split(self, atom: Atom) -> None:
        self.state = self.state.assume(atom, not atom.loose and bool(inside(atom, self.values, functions())))

    def _divide(self, atom: Atom, divisor: int) -> None:
        value = 0 if atom.loose else self.value(of_atom(atom))
        left = int(value - divisor * floor(Fraction(value) / divisor)) if value.denominator == 1 else 0
        after = self.state.remainder(atom, divisor, left)
        self.values[f"~{after.newest}"] = floor(Fraction(value) / divisor)
        self.state = after


def simulated(seed: int) -> Counter[str]:
    """How often each kind of move was made."""
    run = Run(seed)
    run.check()
    for _ in range(MOVES):
        try:
            run.step()
        except (NotProved, TooLargeToNormalize, Unknown):
            continue
        run.check()
    return run.made


def test_what_a_state_says_is_true_of_values_that_satisfy_its_facts() -> None:
    made: Counter[str] = Counter()
    for seed in range(90):
        made += simulated(seed)
    assert set(made) == set(KINDS)
    assert sum(made.values()) > 300


def test_the_simulation_would_notice_what_is_false() -> None:
    run = Run(3)
    run.check()
    run.state.know([Known(NOTHING, NONE)])
    with pytest.raises(AssertionError):
        run.check()
