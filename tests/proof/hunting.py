"""Hunts for something false that is called proved: python tests/proof/hunting.py [--tries 20000] [--seed 1] [--jobs 2]

Random formulas, and obligations of the table with something in them changed, go to the search; whatever it proves is
compared with evaluation, from the facts that the proof says it rests on. Certificates are forged too: what they were
made for is changed, or they are, and the kernel must not be taken in.
"""

from __future__ import annotations

import argparse
import random
import sys
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.proof.obligations import functions, laws, true_ones
from tests.proof.reading import Unknown, falsified
from tests.proof.shaping import formula, weakened
from workbench.algebra.normal import Algebra
from workbench.algebra.operators import ReservedName
from workbench.algebra.polynomial import Atom, Poly, TooLargeToNormalize, constant, plus, scaled
from workbench.algebra.terms import Term
from workbench.proof.kernel import (
    ByRemainder,
    Certificate,
    Cut,
    Define,
    EquationItem,
    FromAtom,
    Instance,
    Invert,
    Item,
    Leaf,
    Move,
    NotProved,
    OpenPositivePart,
    Proved,
    Rename,
    RowRef,
    Shift,
    SumLaw,
    Then,
    ThreeWays,
    check,
)
from workbench.proof.search import Search

SAMPLES = 250


@dataclass
class Tally:
    """What came out. `wrong`: what is false and was called proved."""

    counts: Counter[str] = field(default_factory=Counter)
    wrong: list[str] = field(default_factory=list)

    def add(self, other: Tally) -> None:
        self.counts += other.counts
        self.wrong += other.wrong


def compared(proof: Proved) -> str:
    """'' or how the proved formula is false, by the facts that count as used."""
    kept = [f for i, f in enumerate(proof.facts) if i in proof.used]
    try:
        values = falsified(kept, proof.goal, SAMPLES, functions=functions())
    except (Unknown, RecursionError):
        return ""
    return "" if values is None else f"{kept} => {proof.goal} fails for {values}, used {set(proof.used)}"


# ------------------------------------------------------------------ what the search proves
def candidate(rng: random.Random) -> tuple[list[Term], Term]:
    if rng.random() < 0.35:
        return [formula(rng, 1) for _ in range(rng.randint(0, 3))], formula(rng, 1)
    o = rng.choice(true_ones())
    facts, goal = list(o.facts), o.goal
    for _ in range(rng.randint(1, 3)):
        facts, goal = weakened(rng, facts, goal)
    return facts, goal


def searched(seed: int, seconds: float) -> Tally:
    """One random obligation, given to the search."""
    rng = random.Random(seed)
    facts, goal = candidate(rng)
    tally = Tally()
    try:
        found = Search(Algebra(), laws(), functions(), seconds=seconds).prove(facts, goal).proved
    except ReservedName:
        found = None
    tally.counts["proved" if found is not None else "open"] += 1
    if found is not None:
        wrong = compared(found)
        tally.wrong += [f"seed {seed}: {wrong}"] if wrong else []
    return tally


# ------------------------------------------------------------------ forged certificates
class Forger:
    """Changes one place of a certificate."""

    def __init__(self, rng: random.Random, algebra: Algebra, certificate: Certificate) -> None:
        self.rng = rng
        self.atoms: list[Atom] = []
        self.polys: list[Poly] = []
        self.places = 0
        self._gather(certificate)
        self.atoms.extend(a for p in self.polys for a in p.deep)
        self.atoms.sort(key=lambda a: a.key)
        self.polys.append(constant(1))

    def _gather(self, node: Certificate) -> None:
        self.places += 1
        match node:
            case Leaf(items):
                for item in items:
                    if isinstance(item, EquationItem):
                        self.polys.append(item.multiplier)
                    else:
                        self.atoms.extend(r.atom for r in item.factors if isinstance(r, FromAtom))
            case Then(move, rest):
                match move:
                    case Instance(_, args):
                        self.polys.extend(args)
                    case Rename(poly, atom):
                        self.polys.append(poly)
                        self.atoms.append(atom)
                    case _:
                        self.atoms.append(move.atom)
                self._gather(rest)
            case Cut(atom, yes, no):
                self.atoms.append(atom)
                self._gather(yes)
                self._gather(no)
            case ByRemainder(atom, branches):
                self.atoms.append(atom)
                for b in branches:
                    self._gather(b)

    def forged(self, node: Certificate) -> Certificate:
        return self._at(node, self.rng.randrange(self.places))[0]

    def _at(self, node: Certificate, place: int) -> tuple[Certificate, int]:
        if place == 0:
            return self._other(node), -1
        place -= 1
        if place < 0 or isinstance(node, Leaf):
            return node, place
        match node:
            case Then(move, rest):
                new, place = self._at(rest, place)
                return Then(move, new), place
            case Cut(atom, yes, no):
                yes, place = self._at(yes, place)
                if place >= 0:
                    no, place = self._at(no, place)
                return Cut(atom, yes, no), place
            case ByRemainder(atom, branches):
                made = []
                for b in branches:
                    if place >= 0:
                        b, place = self._at(b, place)
                    made.append(b)
                return ByRemainder(atom, tuple(made)), place

    def _atom(self, old: Atom) -> Atom:
        same = [a for a in self.atoms if a.kind == old.kind]
        return self.rng.choice(same or [old]) if self.rng.random() < 0.8 else self.rng.choice(self.atoms or [old])

    def _poly(self, old: Poly) -> Poly:
        other = self.rng.choice(self.polys)
        return self.rng.choice((other, scaled(old, -1), plus(old, constant(1)), plus(old, scaled(other, -1))))

    def _row(self, old: RowRef) -> RowRef:
        if isinstance(old, FromAtom):
            which = self.rng.choice((old.which, "nonneg", "one", "below", "above"))
            return FromAtom(self._atom(old.atom), which)
        return max(0, old + self.rng.choice((-2, -1, 1, 2, 3)))

    def _other(self, node: Certificate) -> Certificate:
        rng = self.rng
        match node:
            case Leaf(items):
                return Leaf(tuple(self._item(i) if rng.random() < 0.5 else i for i in items if rng.random() < 0.9))
            case Then(_, rest) if rng.random() < 0.3:
                return rest
            case Then(move, rest):
                return Then(self._move(move), rest)
            case Cut(atom, yes, no):
                return rng.choice((Cut(self._atom(atom), yes, no), Cut(atom, no, yes), Cut(atom, yes, yes), yes, no))
            case ByRemainder(atom, branches):
                return rng.choice((
                    ByRemainder(self._atom(atom), branches), ByRemainder(atom, branches[1:]),
                    ByRemainder(atom, branches[::-1]), ByRemainder(atom, branches[:1]),
                ))  # fmt: skip

    def _item(self, item: Item | EquationItem) -> Item | EquationItem:
        if isinstance(item, EquationItem):
            return EquationItem(self._poly(item.multiplier), self._row(item.equation))
        factor = self.rng.choice((1, 2, -1, 0, item.coefficient + 1))
        rows = tuple(self._row(r) if self.rng.random() < 0.5 else r for r in item.factors)
        return Item(factor, self.rng.choice((rows, rows[1:], (*rows, *rows[:1]))))

    def _move(self, move: object) -> Move:
        rng = self.rng
        match move:
            case Instance(law, args):
                new = rng.choice(sorted(laws())) if rng.random() < 0.3 else law
                return Instance(new, tuple(self._poly(a) if rng.random() < 0.6 else a for a in args))
            case Define(row, atom) | Shift(row, atom):
                kind = rng.choice((Define, Shift))
                return kind(max(0, row + rng.choice((0, -1, 1, 2))), self._atom(atom))
            case Rename(poly, atom):
                return Rename(self._poly(poly), self._atom(atom))
            case SumLaw(kind_, atom, antidifference):
                wrong = None if antidifference is None else self._poly(antidifference)
                return SumLaw(rng.choice((kind_, "closed", "first", "last", "empty")), self._atom(atom), wrong)
            case Invert(atom) | OpenPositivePart(atom) | ThreeWays(atom):
                return rng.choice((Invert, OpenPositivePart, ThreeWays))(self._atom(atom))
        raise AssertionError(move)


def forged(seed: int, seconds: float, forgeries: int = 12) -> Tally:
    """The proof of an obligation of the table, held against others, and changed."""
    rng = random.Random(seed)
    o = rng.choice(true_ones())
    algebra, tally = Algebra(), Tally()
    found = Search(algebra, laws(), functions(), seconds=seconds).prove(o.facts, o.goal).proved
    if found is None:
        return tally
    forger = Forger(rng, algebra, found.certificate)
    for _ in range(forgeries):
        certificate = found.certificate
        for _ in range(rng.randint(0, 3)):
            certificate = forger.forged(certificate)
            forger = Forger(rng, algebra, certificate)
        facts, goal = list(o.facts), o.goal
        for _ in range(rng.randint(0, 2)):
            facts, goal = weakened(rng, facts, goal)
        try:
            passed = check(algebra, facts, goal, laws(), certificate)
        except (NotProved, TooLargeToNormalize, ReservedName):
            tally.counts["refused"] += 1
            continue
        tally.counts["passed"] += 1
        wrong = compared(passed)
        tally.wrong += [f"seed {seed}: {wrong} by {certificate}"] if wrong else []
    return tally


def _both(seed: int) -> Tally:
    tally = searched(seed, 0.1)
    if seed % 5 == 0:
        tally.add(forged(seed, 0.5))
    return tally


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__.partition("\n")[0])
    parser.add_argument("--tries", type=int, default=20_000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--jobs", type=int, default=2)
    asked = parser.parse_args()
    tally = Tally()
    with ProcessPoolExecutor(asked.jobs) as pool:
        for done, part in enumerate(pool.map(_both, range(asked.seed, asked.seed + asked.tries), chunksize=50), 1):
            tally.add(part)
            for wrong in part.wrong:
                print("FALSE:", wrong, flush=True)
            if done % 1000 == 0 or done == asked.tries:
                print(done, dict(tally.counts), flush=True)
    return 1 if tally.wrong else 0


if __name__ == "__main__":
    sys.exit(main())
