"""What counts as proved. Nothing else in the package can make a `Proved` value.

The kernel refutes: from facts and the negated goal it follows a certificate until every branch ends in a contradiction.
A state holds what is known on a branch; a move is one sound way to know more; a leaf adds up rows to something absurd.
The search may try what it likes: only what `check` replays counts.

Soundness of each rule stands beside it. All facts are indicators (see `algebra.normal`): polynomials that equal 1.
Bound variables of sums (`#1`, …) never occur free in a state, so rewriting cannot reach into a sum by accident.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal, TypeAlias

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import (
    NOTHING,
    UNIT,
    UNITY,
    Atom,
    Poly,
    TooLargeToNormalize,
    constant,
    denominator,
    minus,
    of_atom,
    plus,
    scaled,
    times,
)
from workbench.algebra.terms import Rational, Sort, Term, app
from workbench.errors import UllageError
from workbench.proof.laws import Law

Relation: TypeAlias = Literal[">=", ">", "="]
Dependencies: TypeAlias = frozenset[int]  # indices of the facts that a row rests on
NONE: Dependencies = frozenset()


class NotProved(UllageError):
    """A certificate does not prove what it is for; says which step fails."""


@dataclass(frozen=True, slots=True)
class Row:
    """poly >= 0, > 0 or = 0."""

    poly: Poly
    relation: Relation
    deps: Dependencies = NONE


@dataclass(frozen=True, slots=True)
class Known:
    """An indicator that equals 1, and what that rests on."""

    poly: Poly
    deps: Dependencies


class State:
    """What is known on one branch. Every change makes a new state; rows keep their number for good."""

    __slots__ = ("algebra", "rows", "pending", "images", "rests", "next_row")

    def __init__(self, algebra: Algebra) -> None:
        self.algebra = algebra
        self.rows: dict[int, Row] = {}
        self.pending: list[Known] = []
        self.images: dict[Atom, Poly] = {}  # atom -> what it equals here; no key occurs in an image
        self.rests: dict[Atom, Dependencies] = {}
        self.next_row = 0

    def copy(self) -> State:
        other = State(self.algebra)
        other.rows = dict(self.rows)
        other.pending = list(self.pending)
        other.images = dict(self.images)
        other.rests = dict(self.rests)
        other.next_row = self.next_row
        return other

    # ---------------------------------------------------------- knowing more (in place, on a copy)
    def know(self, indicators: Iterable[Known]) -> None:
        """Take indicators as equal to 1, and draw the direct conclusions until nothing new follows."""
        work = [self._rewritten(k) for k in indicators]
        while work:
            known = work.pop()
            learned = self._conclusions(known)
            if learned:
                work.extend(self._replace(learned))

    def _rewritten(self, k: Known) -> Known:
        used: set[Atom] = set()
        poly = self.algebra.rewrite(k.poly, self.images, None, used)
        return Known(poly, k.deps.union(*(self.rests[a] for a in used)))

    def _conclusions(self, k: Known) -> dict[Atom, tuple[Poly, Dependencies]]:
        """Atoms decided by poly = 1: a product of indicators is 1 when each is; c*a + d = 1 fixes a."""
        k = self._rewritten(k)
        rest = minus(k.poly, UNITY)
        if not rest.terms:
            return {}
        if rest.constant is not None:
            self._add_row(Row(rest, "=", k.deps))
            return {}
        if len(k.poly.terms) == 1:
            (mono, c), = k.poly.terms.items()
            if c == 1 and all(a.idempotent for a, _ in mono):
                return self._decided({a: True for a, _ in mono}, k.deps)
        atoms = rest.atoms
        if len(atoms) == 1:
            (atom,) = atoms
            slope, offset = rest.terms.get(((atom, 1),)), rest.terms.get(UNIT, 0)
            if atom.idempotent and slope is not None:
                value = Fraction(-offset) / slope
                if value in (0, 1):
                    return self._decided({atom: value == 1}, k.deps)
                self._add_row(Row(UNITY, "=", k.deps))  # an indicator is 0 or 1
                return {}
        self.pending.append(k)
        return {}

    def _decided(self, truths: dict[Atom, bool], deps: Dependencies) -> dict[Atom, tuple[Poly, Dependencies]]:
        for atom, holds in truths.items():
            row = _row_of(atom, holds, deps)
            if row is not None:
                self._add_row(row)
        return {atom: (UNITY if holds else NOTHING, deps) for atom, holds in truths.items()}

    def _add_row(self, row: Row) -> None:
        self.rows[self.next_row] = row
        self.next_row += 1

    def _replace(self, new: dict[Atom, tuple[Poly, Dependencies]]) -> list[Known]:
        """Put equals for equals everywhere; returns pending indicators that changed, to be looked at again."""
        for atom in new:
            if atom.loose:
                raise NotProved("a bound variable outside its sum")
        images = {a: image for a, (image, _) in new.items()}
        self.rests.update({a: deps for a, (_, deps) in new.items()})
        for a, image in list(self.images.items()):
            if not image.deep.isdisjoint(images):
                used: set[Atom] = set()
                self.images[a] = self.algebra.rewrite(image, images, None, used)
                self.rests[a] = self.rests[a].union(*(self.rests[u] for u in used))
        self.images.update(images)
        for number, row in self.rows.items():
            if not row.poly.deep.isdisjoint(images):
                used = set()
                poly = self.algebra.rewrite(row.poly, self.images, None, used)
                self.rows[number] = Row(poly, row.relation, row.deps.union(*(self.rests[u] for u in used)))
        changed = [k for k in self.pending if not k.poly.deep.isdisjoint(images)]
        if changed:
            self.pending = [k for k in self.pending if k.poly.deep.isdisjoint(images)]
        return changed

    # ---------------------------------------------------------- moves: each returns a new state
    def assume(self, atom: Atom, holds: bool) -> State:
        """One branch of a case split on an indicator."""
        if not atom.idempotent or atom in self.images or atom.loose:
            raise NotProved("only an undecided comparison or truth value can be split")
        other = self.copy()
        other.know([Known(of_atom(atom) if holds else minus(UNITY, of_atom(atom)), NONE)])
        return other

    def define(self, number: int, atom: Atom) -> State:
        """c*atom + rest = 0 with the atom nowhere in the rest: the atom is -rest/c everywhere."""
        row = self.rows.get(number)
        slope = row.poly.coefficient(atom) if row is not None and row.relation == "=" else None
        if row is None or slope is None or atom.loose:
            raise NotProved("a definition needs an equation with the atom alone in one term")
        rest = minus(row.poly, scaled(of_atom(atom), slope))
        image = scaled(rest, Fraction(-1) / slope)
        return self._with_image(atom, image, row.deps)

    def _with_image(self, atom: Atom, image: Poly, deps: Dependencies) -> State:
        """The atom equals the image. What its sort said of its sign is kept as a row."""
        other = self.copy()
        changed = other._replace({atom: (image, deps)})
        if atom.nonneg and not image.nonneg:
            other._add_row(Row(image, ">" if atom.positive else ">=", deps))
        other.know(changed)
        return other

    def shift(self, number: int, atom: Atom) -> State:
        """name - t >= 0 for an integer name and an integer t: name = t + m for a fresh natural m."""
        row = self.rows.get(number)
        if row is None or row.relation != ">=" or atom.kind != "var" or not atom.integer or atom.loose:
            raise NotProved("a shift needs a lower bound of an integer name")
        if row.poly.coefficient(atom) != 1:
            raise NotProved("a shift needs the name alone, once")
        bound = minus(of_atom(atom), row.poly)
        if not bound.is_integer:
            raise NotProved("a shift needs an integer bound")
        above = self._fresh_name("nat")
        return self._with_image(atom, plus(bound, of_atom(above)), row.deps)

    def _fresh_name(self, sort: Sort) -> Atom:
        """A name that stands nowhere on this branch: as many images as there are, none of their keys is ever used again."""
        return self.algebra.variable_atom(f"@{len(self.images) + 1}", sort)

    def rename(self, p: Poly, atom: Atom) -> State:
        """p = c*atom + rest with c = 1 or -1 and the atom nowhere in the rest: for u = p, the atom is c*(u - rest)."""
        slope = p.coefficient(atom)
        if slope not in (1, -1) or atom.loose or atom in self.images or not p.deep.isdisjoint(self.images):
            raise NotProved("a new name needs an expression with the atom alone, once")
        fresh = self._fresh_name("int" if p.is_integer else "real")
        rest = minus(p, scaled(of_atom(atom), slope))
        return self._with_image(atom, scaled(minus(of_atom(fresh), rest), slope), NONE)

    def invertible(self, atom: Atom) -> State:
        """Where atom /= 0 is known, 1/atom is atom^-1, and atom*atom^-1 cancels."""
        p = of_atom(atom)
        inverse = self.algebra.inverse(p)
        inverse_atom = next(iter(inverse.atoms), None)
        if inverse_atom is None or inverse_atom.kind != "inv" or atom.loose:
            raise NotProved("nothing to invert")
        used: set[Atom] = set()
        zero = self.algebra.rewrite(self.algebra.equal(p), self.images, None, used)
        if zero.terms and not atom.positive:
            raise NotProved("only what is not zero can be divided by")
        deps = NONE.union(*(self.rests[u] for u in used))
        return self._with_image(inverse_atom, of_atom(atom, -1), deps)

    def remainder(self, atom: Atom, divisor: int, left: int) -> State:
        """One of the cases of division with remainder: an integer name is divisor*q + left, q an integer (a natural, if the name is)."""
        if atom.kind != "var" or not atom.integer or atom.loose or atom in self.images:
            raise NotProved("only an integer name can be divided with remainder")
        quotient = of_atom(self._fresh_name("nat" if atom.nonneg else "int"))
        return self._with_image(atom, plus(scaled(quotient, divisor), constant(left)), NONE)

    def open_positive_part(self, atom: Atom) -> State:
        """pos(p) = [p >= 0]*p, for all p."""
        if atom.kind != "pos" or atom.loose or atom in self.images:
            raise NotProved("no positive part to open")
        inner = atom.parts[0]
        image = self.algebra.rewrite(times(self.algebra.compare(inner, strict=False), inner), self.images)
        if atom in image.deep:
            raise NotProved("a positive part inside itself")
        other = self.copy()
        used: set[Atom] = set()
        self.algebra.rewrite(times(self.algebra.compare(inner, strict=False), inner), self.images, None, used)
        other.know(other._replace({atom: (image, NONE.union(*(self.rests[u] for u in used)))}))
        return other

    def three_ways(self, atom: Atom) -> State:
        """[p > 0] + [p = 0] = [p >= 0], for all p."""
        if atom.kind != "ind" or atom.data != ("eq",) or atom.loose:
            raise NotProved("only an equation has three ways to fail or hold")
        p = atom.parts[0]
        above = self.algebra.compare(p, strict=True)
        weak = self.algebra.compare(p, strict=False)
        return self._knowing(plus(minus(minus(UNITY, above), self.algebra.equal(p)), weak))

    def instance(self, law: Law, args: Sequence[Poly]) -> State:
        """A law with expressions for its parameters: (sorts and condition) implies formula."""
        return self._knowing(law_instance(self.algebra, law, args))

    def sum_law(self, kind: str, atom: Atom, antidifference: Poly | None) -> State:
        return self._knowing(sum_instance(self.algebra, kind, atom, antidifference))

    def _knowing(self, indicator: Poly) -> State:
        if indicator.loose:
            raise NotProved("a bound variable outside its sum")
        other = self.copy()
        other.know([Known(indicator, NONE)])
        return other


def _row_of(atom: Atom, holds: bool, deps: Dependencies) -> Row | None:
    """The row that a decided comparison gives; a name that is true or false, or p /= 0, gives none."""
    if atom.kind != "ind":
        return None
    p = atom.parts[0]
    match atom.data[0], holds:
        case "ge", True:
            return Row(p, ">=", deps)
        case "gt", True:
            return Row(p, ">", deps)
        case "eq", True:
            return Row(p, "=", deps)
        case "ge", False:
            if p.is_integer:
                return Row(minus(scaled(p, -1), UNITY), ">=", deps)
            return Row(scaled(p, -1), ">", deps)
        case "gt", False:
            return Row(scaled(p, -1), ">=", deps)
    return None


# ---------------------------------------------------------------- facts about atoms that hold without condition
def atom_row(algebra: Algebra, atom: Atom, which: str) -> Row:
    """Rows that hold for every value: signs, floor and positive part against what is inside, indicators in [0, 1]."""
    me = of_atom(atom)
    match which:
        case "one" if atom.positive and atom.integer:
            return Row(minus(me, UNITY), ">=")
        case "nonneg" if atom.positive:
            return Row(me, ">")
        case "nonneg" if atom.nonneg:
            return Row(me, ">=")
        case "below" if atom.kind == "floor":
            return Row(minus(atom.parts[0], me), ">=")
        case "above" if atom.kind == "floor":
            return _floor_above(atom)
        case "below" if atom.kind == "pos":
            return Row(minus(me, atom.parts[0]), ">=")
        case "below" if atom.idempotent:
            return Row(minus(UNITY, me), ">=")
    raise NotProved(f"no such fact about {atom.kind}: {which}")


def _floor_above(atom: Atom) -> Row:
    """p < floor(p) + 1; and if D*p is an integer, p <= floor(p) + (D - 1)/D."""
    p = atom.parts[0]
    gap = minus(plus(of_atom(atom), UNITY), p)
    below = denominator(p)
    if scaled(p, below).is_integer:
        return Row(minus(gap, constant(Fraction(1, below))), ">=")
    return Row(gap, ">")


def atom_facts(atom: Atom) -> tuple[str, ...]:
    """Which facts `atom_row` has for the atom."""
    signs: tuple[str, ...] = ("nonneg",) if atom.nonneg else ()
    if atom.positive and atom.integer:
        signs = ("nonneg", "one")
    if atom.kind == "floor":
        return (*signs, "below", "above")
    if atom.kind == "pos" or atom.idempotent:
        return (*signs, "below")
    return signs


# ---------------------------------------------------------------- instances of laws
def law_instance(algebra: Algebra, law: Law, args: Sequence[Poly]) -> Poly:
    """The indicator of (sorts and condition) implies formula. Integer parameters need arguments that are integer-valued for sure."""
    if len(args) != len(law.parameters):
        raise NotProved(f"the law '{law.name}' has {len(law.parameters)} parameters")
    guard = UNITY
    values: dict[Term, Poly] = {}
    for parameter, arg in zip(law.parameters, args, strict=True):
        if parameter.sort in ("nat", "int") and not arg.is_integer:
            raise NotProved(f"the law '{law.name}' needs an integer for {parameter.name}")
        if parameter.sort == "bool" and not _is_indicator(arg):
            raise NotProved(f"the law '{law.name}' needs a truth value for {parameter.name}")
        if parameter.sort == "nat":
            guard = times(guard, algebra.compare(arg, strict=False))
        values[parameter] = arg
    guard = times(guard, algebra.normal(law.given, values))
    formula = algebra.normal(law.formula, values)
    return plus(minus(UNITY, guard), times(guard, formula))


def _is_indicator(p: Poly) -> bool:
    """0, 1, an indicator, or 1 minus one."""
    rest = p if len(p.terms) == 1 else minus(UNITY, p)
    if rest.constant is not None:
        return rest.constant in (0, 1)
    (mono, c), *more = rest.terms.items()
    return not more and c == 1 and all(a.idempotent for a, _ in mono)


def sum_instance(algebra: Algebra, kind: str, atom: Atom, antidifference: Poly | None) -> Poly:
    """Laws of finite sums over i from a to b of f(i), for integer a and b.

    closed: if F(i) - F(i - 1) = f(i) for all i and b >= a - 1, the sum is F(b) - F(a - 1).
    empty:  b < a gives 0.   first / last: a <= b splits off f(a) / f(b).
    """
    if atom.kind != "sum" or atom.loose:
        raise NotProved("not a sum")
    low, high, body = atom.parts
    if not (low.is_integer and high.is_integer):
        raise NotProved("a sum needs integer bounds")
    bound = algebra.variable_atom(str(atom.data[0]), "int")
    me, length = of_atom(atom), minus(high, low)

    def at(p: Poly, value: Poly) -> Poly:
        return _instantiated(algebra, p, bound, value)

    if kind == "closed":
        if antidifference is None or not antidifference.loose <= {str(atom.data[0])}:
            raise NotProved("a closed form needs an antidifference")
        step = minus(antidifference, at(antidifference, minus(of_atom(bound), UNITY)))
        if minus(step, body).terms:
            raise NotProved("not an antidifference of the summand")
        guard = algebra.compare(plus(length, UNITY), strict=False)
        value = minus(at(antidifference, high), at(antidifference, minus(low, UNITY)))
    elif kind == "empty":
        guard = algebra.compare(scaled(length, -1), strict=True)
        value = NOTHING
    else:
        guard = algebra.compare(length, strict=False)
        if kind == "first":
            value = plus(at(body, low), algebra.sum(str(atom.data[0]), plus(low, UNITY), high, body))
        elif kind == "last":
            value = plus(at(body, high), algebra.sum(str(atom.data[0]), low, minus(high, UNITY), body))
        else:
            raise NotProved(f"no such law of sums: {kind}")
    return plus(minus(UNITY, guard), times(guard, algebra.equal(minus(me, value))))


def _instantiated(algebra: Algebra, p: Poly, bound: Atom, value: Poly) -> Poly:
    """p with the bound variable replaced; the value may contain that variable itself (a simultaneous replacement)."""
    if bound not in value.deep:
        return algebra.rewrite(p, {bound: value})
    stand_in = algebra.variable_atom("#shifted", "int")
    moved = algebra.rewrite(p, {bound: of_atom(stand_in)})
    return algebra.rewrite(moved, {stand_in: value})


# ---------------------------------------------------------------- certificates
@dataclass(frozen=True, slots=True)
class FromAtom:
    """A row of `atom_row`."""

    atom: Atom
    which: str


RowRef: TypeAlias = int | FromAtom


@dataclass(frozen=True, slots=True)
class Item:
    """coefficient * (product of inequality rows): never negative."""

    coefficient: Rational
    factors: tuple[RowRef, ...]


@dataclass(frozen=True, slots=True)
class EquationItem:
    """multiplier * (an equation's row): zero."""

    multiplier: Poly
    equation: RowRef


@dataclass(frozen=True, slots=True)
class Leaf:
    """The items add up to a negative number, or to zero with a strict one among them."""

    items: tuple[Item | EquationItem, ...]


@dataclass(frozen=True, slots=True)
class Define:
    row: int
    atom: Atom


@dataclass(frozen=True, slots=True)
class Shift:
    row: int
    atom: Atom


@dataclass(frozen=True, slots=True)
class OpenPositivePart:
    atom: Atom


@dataclass(frozen=True, slots=True)
class ThreeWays:
    atom: Atom


@dataclass(frozen=True, slots=True)
class Instance:
    law: str
    args: tuple[Poly, ...]


@dataclass(frozen=True, slots=True)
class SumLaw:
    kind: str
    atom: Atom
    antidifference: Poly | None = None


@dataclass(frozen=True, slots=True)
class Rename:
    poly: Poly
    atom: Atom


@dataclass(frozen=True, slots=True)
class Invert:
    atom: Atom


Move: TypeAlias = Define | Shift | Rename | Invert | OpenPositivePart | ThreeWays | Instance | SumLaw


@dataclass(frozen=True, slots=True)
class Then:
    move: Move
    rest: Certificate


@dataclass(frozen=True, slots=True)
class Cut:
    atom: Atom
    yes: Certificate
    no: Certificate


@dataclass(frozen=True, slots=True)
class ByRemainder:
    """One branch for every remainder of the name by a natural divisor, which is their number."""

    atom: Atom
    branches: tuple[Certificate, ...]


Certificate: TypeAlias = Leaf | Then | Cut | ByRemainder


def moved(state: State, move: Move, laws: Mapping[str, Law]) -> State:
    """The state after one move; raises NotProved where the move does not apply."""
    match move:
        case Define(row, atom):
            return state.define(row, atom)
        case Shift(row, atom):
            return state.shift(row, atom)
        case Rename(poly, atom):
            return state.rename(poly, atom)
        case Invert(atom):
            return state.invertible(atom)
        case OpenPositivePart(atom):
            return state.open_positive_part(atom)
        case ThreeWays(atom):
            return state.three_ways(atom)
        case Instance(name, args):
            if name not in laws:
                raise NotProved(f"no such law: {name}")
            return state.instance(laws[name], args)
        case SumLaw(kind, atom, antidifference):
            return state.sum_law(kind, atom, antidifference)


# ---------------------------------------------------------------- what is proved
_MINT = object()


class Proved:
    """facts => goal holds for all values. `used`: indices of the facts that the proof rests on; `laws`: user laws and functions."""

    __slots__ = ("facts", "goal", "used", "laws", "certificate")

    def __init__(
        self,
        mint: object,
        facts: tuple[Term, ...],
        goal: Term,
        used: Dependencies,
        laws: frozenset[str],
        certificate: Certificate,
    ) -> None:
        if mint is not _MINT:
            raise NotProved("only the kernel makes proofs")
        self.facts = facts
        self.goal = goal
        self.used = used
        self.laws = laws
        self.certificate = certificate


def start(algebra: Algebra, facts: Sequence[Term], goal: Term) -> State:
    """The facts and the negated goal. A fact too large to normalize is left out, which only makes the proof harder."""
    state = State(algebra)
    known = []
    for i, fact in enumerate(facts):
        try:
            known.append(Known(algebra.normal(fact), frozenset((i,))))
        except TooLargeToNormalize:
            continue
    known.append(Known(algebra.normal(app("not", goal)), NONE))
    state.know(reversed(known))
    return state


def check(
    algebra: Algebra, facts: Sequence[Term], goal: Term, laws: Mapping[str, Law], certificate: Certificate
) -> Proved:
    """Replays the certificate; raises NotProved at the first step that does not hold."""
    used: Dependencies = NONE
    leaned: set[str] = set()
    work: list[tuple[State, Certificate]] = [(start(algebra, facts, goal), certificate)]
    while work:
        state, node = work.pop()
        match node:
            case Leaf():
                used |= _contradiction(state, node)
            case Cut(atom, yes, no):
                work.append((state.assume(atom, True), yes))
                work.append((state.assume(atom, False), no))
            case ByRemainder(atom, branches):
                if not branches:
                    raise NotProved("a division with remainder by nothing")
                for left, branch in enumerate(branches):
                    work.append((state.remainder(atom, len(branches), left), branch))
            case Then(move, rest):
                if isinstance(move, Instance) and move.law in laws and laws[move.law].lean:
                    leaned.add(laws[move.law].lean)
                work.append((moved(state, move, laws), rest))
    return Proved(_MINT, tuple(facts), goal, used, frozenset(leaned), certificate)


def _contradiction(state: State, leaf: Leaf) -> Dependencies:
    """Adds the items up. All of them are >= 0 (products of nonnegative things, or multiples of zero); the sum must be absurd."""
    sum_, strict, used = NOTHING, False, NONE
    for item in leaf.items:
        if isinstance(item, EquationItem):
            row = _row(state, item.equation)
            if row.relation != "=" or item.multiplier.loose:
                raise NotProved("only an equation may be multiplied by anything")
            sum_ = plus(sum_, times(item.multiplier, row.poly))
            used |= row.deps
            continue
        if item.coefficient <= 0:
            raise NotProved("a fact must be taken a positive number of times")
        product, all_strict = constant(item.coefficient), True
        for ref in item.factors:
            row = _row(state, ref)
            if row.relation == "=":
                raise NotProved("an equation among the inequalities")
            product = times(product, row.poly)
            all_strict = all_strict and row.relation == ">"
            used |= row.deps
        sum_ = plus(sum_, product)
        strict = strict or (all_strict and bool(item.factors))
    value = sum_.constant
    if value is None or value > 0 or (value == 0 and not strict):
        raise NotProved("the facts do not add up to a contradiction")
    return used


def _row(state: State, ref: RowRef) -> Row:
    if isinstance(ref, FromAtom):
        if ref.atom.loose:
            raise NotProved("a bound variable outside its sum")
        return atom_row(state.algebra, ref.atom, ref.which)
    if ref not in state.rows:
        raise NotProved("no such row")
    return state.rows[ref]
