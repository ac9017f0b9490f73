"""An obligation's derivation, step by step, in words: the program part, then the algebra as the kernel's certificate
has it.

Nothing is decided here. A certificate is replayed by the kernel's own moves, and each step says what that move did;
an open or refuted obligation shows how far one gets, and what stands in the way.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from workbench.algebra.denormal import comparison, related, term_of
from workbench.algebra.evaluate import Definition, TooLarge, Undefined, evaluate
from workbench.algebra.formulas import show, show_number
from workbench.algebra.normal import Algebra
from workbench.algebra.polynomial import Atom, Poly, minus, of_atom, plus, scaled, times
from workbench.algebra.terms import Sort, Term, negate, num, substitute, var, variables
from workbench.errors import Span
from workbench.proof.kernel import (
    ByRemainder,
    Certificate,
    Cut,
    Define,
    EquationItem,
    FromAtom,
    Instance,
    Invert,
    Leaf,
    Move,
    OpenPositivePart,
    Proved,
    Rename,
    Row,
    Shift,
    State,
    SumLaw,
    Then,
    ThreeWays,
    atom_row,
    moved,
    start,
)
from workbench.proof.laws import Law
from workbench.proof.report import Decided
from workbench.proof.search import Hints, Search

# A proof that is looked for again with fewer facts is shorter to read; where it takes longer, the first one is shown.
AGAIN_SECONDS = 0.5


@dataclass(frozen=True, slots=True)
class Line:
    """One step. `move` names it, `words` say what was done with what; `before` and `after` are formulas where there
    are any.

    `depth`: how many case distinctions it stands in. `relation`: "=" where `after` equals the line before it (a chain),
    else empty. `span`: the statement that a program step uses.
    """

    move: str
    words: str
    before: Term | None = None
    after: Term | None = None
    depth: int = 0
    relation: str = ""
    span: Span | None = None


@dataclass(frozen=True, slots=True)
class Derivation:
    """`program`: from the last statement to the first. `algebra`: from facts and goal to the end."""

    program: tuple[Line, ...]
    algebra: tuple[Line, ...]
    used: tuple[int, ...] | None = None  # indices of the facts that the proof rests on; None where there is none

    @property
    def lines(self) -> tuple[Line, ...]:
        return self.program + self.algebra


def derivation(
    algebra: Algebra, laws: Mapping[str, Law], functions: Mapping[str, Definition], decided: Decided
) -> Derivation:
    """The derivation of a decided obligation, whatever its verdict."""
    proof = decided.proof
    used = decided.used
    steps = decided.obligation.derive(lambda i: used is None or i in used)
    program = tuple(Line(s.move, s.words, s.before, s.after, span=s.span) for s in steps)
    goal = decided.obligation.goal
    if proof is not None:
        seen = _Seen(*_lean(algebra, laws, functions, decided, proof))
        chain = _chain(algebra, seen)
        return Derivation(program, tuple(chain or _replayed(algebra, laws, seen)), tuple(sorted(used or ())))
    if decided.witness is not None:
        return Derivation(program, tuple(_refuted(goal, decided, functions)))
    return Derivation(program, tuple(_left_open(goal, decided)))


@dataclass(frozen=True, slots=True)
class _Seen:
    """A proof and the numbers that its facts have for the reader."""

    proof: Proved
    numbers: tuple[int, ...]


def _lean(
    algebra: Algebra, laws: Mapping[str, Law], functions: Mapping[str, Definition], decided: Decided, proof: Proved
) -> tuple[Proved, tuple[int, ...]]:
    """The proof found again from the facts that it needs alone: without detours over the others."""
    kept = sorted(proof.used)
    numbers = tuple(decided.facts[i] + 1 for i in range(len(proof.facts)))
    if len(kept) < len(proof.facts):
        o = decided.obligation
        known = {name: laws[name] for name in functions if name in laws}
        using = tuple((u.law, u.arguments) for u in o.using if u.law in laws)
        search = Search(algebra, laws, known, seconds=AGAIN_SECONDS)
        again = search.prove([proof.facts[i] for i in kept], proof.goal, Hints(o.cases, using, o.middle)).proved
        if again is not None:
            return again, tuple(numbers[i] for i in kept)
    return proof, numbers


# ---------------------------------------------------------------- equations as a chain
def _chain(algebra: Algebra, seen: _Seen) -> list[Line] | None:
    """left = … = right, where putting in equations is all that the proof does."""
    proof = seen.proof
    if proof.goal.op != "=":
        return None
    state = start(algebra, proof.facts, proof.goal)
    node: Certificate = proof.certificate
    left, right = proof.goal.args
    lines = [Line("begin", "the left side", after=left)]
    while isinstance(node, Then):
        if not isinstance(node.move, Define) or node.move.atom.kind != "var":
            return None
        row = state.rows[node.move.row]
        if not row.deps:
            break  # what remains speaks of the goal itself
        name = var(str(node.move.atom.data[0]), _sort(node.move.atom))
        image = _solved(row.poly, node.move.atom)
        for side in ("left", "right"):
            before = left if side == "left" else right
            after = substitute(before, {name: image})
            if after != before and side == "left":
                left = after
                lines.append(
                    Line("use a fact", f"{_facts(row, seen)}: {name.name} = {show(image)}", after=left, relation="=")
                )
            elif after != before:
                right = after
        state = moved(state, node.move, {})
        node = node.rest
    ends = algebra.normal(left), algebra.normal(right)
    if ends[0] != ends[1]:
        return None
    shown = term_of(ends[0])
    if shown not in (left, proof.goal.args[1]):
        lines.append(Line("simplify", "distribute, collect, cancel", after=shown, relation="="))
    if lines[-1].after != proof.goal.args[1]:
        lines.append(Line("simplify", "which is the right side", after=proof.goal.args[1], relation="="))
    return lines


def _sort(atom: Atom) -> Sort:
    return atom.data[1]  # type: ignore[return-value]


def _solved(equation: Poly, atom: Atom) -> Term:
    slope = equation.terms[((atom, 1),)]
    rest = minus(equation, scaled(of_atom(atom), slope))
    return term_of(scaled(rest, Fraction(-1) / slope))


# ---------------------------------------------------------------- a certificate, replayed
def _replayed(algebra: Algebra, laws: Mapping[str, Law], seen: _Seen) -> Iterator[Line]:
    """Suppose that the goal fails; each branch ends in something absurd."""
    proof = seen.proof
    yield Line("begin", "suppose that the goal fails", after=negate(proof.goal))
    work: list[tuple[State, Certificate, int, Line | None]] = [
        (start(algebra, proof.facts, proof.goal), proof.certificate, 0, None)
    ]
    while work:
        state, node, depth, heading = work.pop()
        if heading is not None:
            yield heading
        match node:
            case Leaf():
                yield from _added_up(state, node, depth, seen)
            case Cut(atom, yes, no):
                formula = _truth(atom)
                for holds, rest in ((False, no), (True, yes)):
                    case = formula if holds else negate(formula)
                    line = Line("split into cases", f"the case {show(case)}", after=case, depth=depth)
                    work.append((state.assume(atom, holds), rest, depth + 1, line))
            case ByRemainder(atom, branches):
                divisor = len(branches)
                for left in range(divisor - 1, -1, -1):
                    other = state.remainder(atom, divisor, left)
                    words = f"{show(_name(atom))} divided by {divisor} leaves {left}"
                    line = Line("split into cases", words, after=_equation(atom, other.images[atom]), depth=depth)
                    work.append((other, branches[left], depth + 1, line))
            case Then(move, rest):
                other = moved(state, move, laws)
                if not isinstance(move, ThreeWays):  # the case distinction that follows says as much
                    yield _said(state, other, move, laws, depth, seen)
                work.append((other, rest, depth, None))


def _said(
    state: State, other: State, move: Move, laws: Mapping[str, Law], depth: int, seen: _Seen
) -> Line:
    """One move in words."""
    match move:
        case Define(row, atom):
            origin = _facts(state.rows[row], seen)
            return Line(
                "use a fact",
                f"put equals for equals, by {origin}",
                after=_equation(atom, other.images[atom]),
                depth=depth,
            )
        case Shift(row, atom):
            origin = _facts(state.rows[row], seen)
            known = related(state.rows[row].poly, ">=")
            words = f"by {origin}, {show(known)}: write {show(_name(atom))} as its lower bound and a natural number"
            return Line("use a fact", words, after=_equation(atom, other.images[atom]), depth=depth)
        case Rename(poly, atom):
            words = f"name an expression: {show(term_of(poly))}"
            return Line("one named simplification", words, after=_equation(atom, other.images[atom]), depth=depth)
        case Invert(atom):
            words = f"{show(_name(atom))} is not 0, so dividing by it undoes multiplying by it"
            return Line("one named simplification", words, depth=depth)
        case OpenPositivePart(atom):
            words = "max: what is above 0 counts, what is below does not"
            return Line("one named simplification", words, after=_equation(atom, other.images[atom]), depth=depth)
        case Instance(name, arguments):
            return _law_line(laws[name], [term_of(a) for a in arguments], depth)
        case SumLaw(kind, atom, _):
            words = {
                "closed": "the sum in closed form", "empty": "an empty sum is 0",
                "first": "split the first term off the sum", "last": "split the last term off the sum",
            }.get(kind, kind)  # fmt: skip
            after = _equation(atom, other.images[atom]) if atom in other.images else None
            return Line("one named simplification", words, _name(atom), after, depth)
    raise ValueError(f"no words for {type(move).__name__}")


def _law_line(law: Law, arguments: Sequence[Term], depth: int) -> Line:
    values = dict(zip(law.parameters, arguments, strict=True))
    formula = substitute(law.formula, values)
    with_ = ", ".join(f"{p.name} = {show(a)}" for p, a in values.items())
    if law.lean.startswith("function"):
        return Line("unfold a function", f"the definition of {law.name}, {with_}", after=formula, depth=depth)
    source = "" if law.lean else f" ({law.source})"
    return Line("bring in a law instance", f"{law.name}, for {with_}{source}", after=formula, depth=depth)


def _added_up(state: State, leaf: Leaf, depth: int, seen: _Seen) -> Iterator[Line]:
    """Which rows, how often, add up to what cannot be."""
    if len(leaf.items) == 1:
        item = leaf.items[0]
        refs = (item.equation,) if isinstance(item, EquationItem) else item.factors
        if len(refs) == 1 and (row := _row(state, refs[0])).poly.constant is not None:
            what = f"contradicts {_facts(row, seen)}" if row.deps else "cannot be"
            yield Line("finish", f"what is supposed {what}", depth=depth)
            return
    total, strict = Poly({}), False
    for item in leaf.items:
        if isinstance(item, EquationItem):
            row = _row(state, item.equation)
            part = times(item.multiplier, row.poly)
            words = f"({show(term_of(item.multiplier))}) times: {_origin(item.equation, row, seen)}"
        else:
            rows = [_row(state, ref) for ref in item.factors]
            part = Poly({(): item.coefficient})
            for r in rows:
                part = times(part, r.poly)
            strict = strict or (bool(rows) and all(r.relation == ">" for r in rows))
            often = "" if item.coefficient == 1 else f"{show_number(item.coefficient)} times: "
            words = often + " multiplied by ".join(
                _origin(ref, r, seen) for ref, r in zip(item.factors, rows, strict=True)
            )
            if not rows:
                words = f"the number {show_number(item.coefficient)}"
        total = plus(total, part)
        row_term = None
        if isinstance(item, EquationItem):
            row_term = related(_row(state, item.equation).poly, "=")
        elif len(item.factors) == 1:
            row_term = related(rows[0].poly, rows[0].relation)
        yield Line("add up facts", words, after=row_term, depth=depth)
    value = total.constant
    sign = "<" if strict else "<="
    yield Line(
        "finish", f"together: 0 {sign} {show_number(value if value is not None else 0)}, which cannot be", depth=depth
    )


def _row(state: State, ref: int | FromAtom) -> Row:
    return atom_row(state.algebra, ref.atom, ref.which) if isinstance(ref, FromAtom) else state.rows[ref]


def _origin(ref: int | FromAtom, row: Row, seen: _Seen) -> str:
    if isinstance(ref, FromAtom):
        shown = show(_name(ref.atom))
        if ref.atom.kind == "floor":
            return f"floor: {shown} is a whole number next below what is inside"
        if ref.atom.kind == "pos":
            return f"max: {shown} is no less than either"
        if ref.atom.idempotent:
            return "a condition counts 0 or 1"
        return f"{shown} is positive" if ref.atom.positive else f"{shown} is not negative"
    return _facts(row, seen)


def _facts(row: Row, seen: _Seen) -> str:
    """What a row rests on, by the numbers of the facts."""
    if not row.deps:
        return "what is supposed here"
    numbers = [str(seen.numbers[i]) for i in sorted(row.deps)]
    return ("fact " if len(numbers) == 1 else "facts ") + ", ".join(numbers)


def _truth(atom: Atom) -> Term:
    if atom.kind == "ind":
        return comparison(atom)
    if atom.data[0] == "var":
        return var(str(atom.data[1]), "bool")
    return Term("call", tuple(map(term_of, atom.parts)), str(atom.data[1]), sort="bool")


def _name(atom: Atom) -> Term:
    return term_of(of_atom(atom))


def _equation(atom: Atom, image: Poly) -> Term:
    if atom.idempotent:
        formula = _truth(atom)
        return formula if image.constant == 1 else negate(formula) if image.constant == 0 else formula
    return Term("=", (_name(atom), term_of(image)), sort="bool")


# ---------------------------------------------------------------- what is not proved
def _refuted(goal: Term, decided: Decided, functions: Mapping[str, Definition]) -> Iterator[Line]:
    """The values put in, and what either side comes to."""
    values = dict(decided.witness or {})
    here = {
        v: num(values[v.name]) for v in variables(goal) if v.name in values and not isinstance(values[v.name], bool)
    }
    said = ", ".join(f"{n} = {_value(v)}" for n, v in values.items())
    yield Line("put in values", said, goal, substitute(goal, here))
    if goal.op in ("=", "<=", ">=", "<", ">", "!="):
        try:
            left, right = (evaluate(side, values, functions) for side in goal.args)
        except (Undefined, TooLarge, KeyError):
            return
        yield Line("finish", f"{_value(left)} {goal.op} {_value(right)} does not hold")


def _value(value: object) -> str:
    return str(value).lower() if isinstance(value, bool) else show_number(value)  # type: ignore[arg-type]


def _left_open(goal: Term, decided: Decided) -> Iterator[Line]:
    yield Line("left open", decided.why or "no proof was found", after=goal)
    if decided.residue is not None:
        yield Line("left open", f"the two sides differ by {show(decided.residue)}", after=decided.residue)


def count_steps(decided: Decided) -> int:
    """How many steps the derivation of a proved obligation has, without working it out."""
    steps = len(decided.obligation.path)
    if decided.proof is None:
        return steps
    work: list[Certificate] = [decided.proof.certificate]
    while work:
        node = work.pop()
        match node:
            case Leaf():
                steps += len(node.items) + 1
            case Cut(_, yes, no):
                steps += 2
                work += [yes, no]
            case ByRemainder(_, branches):
                steps += len(branches)
                work += branches
            case Then(_, rest):
                steps += 1
                work.append(rest)
    return steps
