"""What counts as proved. Nothing else in the package can make a `Proved` value.

The kernel refutes: from facts and the negated goal it follows a certificate until every branch ends in a contradiction.
A state (`kernel_state`) holds what is known on a branch; a move is one sound way to know more; a leaf adds up rows to
something absurd. The search may try what it likes: only what `check` replays counts.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import NOTHING, TooLargeToNormalize, constant, of_atom, plus
from workbench.algebra.terms import Term, app
from workbench.proof.kernel_certificates import (
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
    OpenPositivePart,
    Rename,
    RowRef,
    Shift,
    SumLaw,
    Then,
    ThreeWays,
)
from workbench.proof.kernel_facts import (
    NONE,
    Dependencies,
    Known,
    NotProved,
    Relation,
    Row,
    atom_facts,
    atom_row,
)
from workbench.proof.kernel_laws import law_instance, sum_instance
from workbench.proof.kernel_state import State
from workbench.proof.laws import Law

__all__ = [
    "NONE",
    "ByRemainder",
    "Certificate",
    "Cut",
    "Define",
    "Dependencies",
    "EquationItem",
    "FromAtom",
    "Instance",
    "Invert",
    "Item",
    "Known",
    "Leaf",
    "Move",
    "NotProved",
    "OpenPositivePart",
    "Proved",
    "Relation",
    "Rename",
    "Row",
    "RowRef",
    "Shift",
    "State",
    "SumLaw",
    "Then",
    "ThreeWays",
    "atom_facts",
    "atom_row",
    "check",
    "law_instance",
    "moved",
    "start",
    "sum_instance",
]


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
            return state.invert(atom)
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
        case _:
            raise NotProved("no such move")


# ---------------------------------------------------------------- what is proved
_MINT = object()


class Proved:
    """facts => goal holds for all values. `used`: indices of the facts that the proof rests on; `laws`: user laws
    and functions.
    """

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
            case _:
                raise NotProved("no such step")
    return Proved(_MINT, tuple(facts), goal, used, frozenset(leaned), certificate)


def _contradiction(state: State, leaf: Leaf) -> Dependencies:
    """Adds the items up. All of them are >= 0 (products of nonnegative things, or multiples of zero); the sum must
    be absurd.
    """
    sum_, strict, used = NOTHING, False, NONE
    for item in leaf.items:
        if isinstance(item, EquationItem):
            row = _row(state, item.equation)
            if row.relation != "=":
                raise NotProved("only an equation may be multiplied by anything")
            sum_ = plus(sum_, state.algebra.times(item.multiplier, row.poly))
            used |= row.deps | state.admitted(item.multiplier)
            continue
        if not isinstance(item.coefficient, int | Fraction) or item.coefficient <= 0:
            raise NotProved("a fact must be taken a positive number of times")
        product, all_strict = constant(item.coefficient), True
        for ref in item.factors:
            row = _row(state, ref)
            if row.relation == "=":
                raise NotProved("an equation among the inequalities")
            product = state.algebra.times(product, row.poly)
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
        deps = state.admitted(of_atom(ref.atom))
        row = atom_row(state.algebra, ref.atom, ref.which)
        return Row(row.poly, row.relation, deps)
    if ref not in state.rows:
        raise NotProved("no such row")
    return state.rows[ref]
