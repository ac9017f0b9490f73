"""Which instances of laws are worth trying in a state, in stages: equations that simplify first, then bounds.

Only atoms that stand in rows or undecided facts are looked at; limiting instances to them is what keeps the search
short.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from fractions import Fraction
from itertools import product
from math import comb

from workbench.algebra.polynomial import NOTHING, UNITY, Atom, Poly, constant, minus, of_atom, plus, scaled, times
from workbench.algebra.terms import Term
from workbench.proof.kernel import Instance, Move, State, SumLaw
from workbench.proof.laws import Law

# Pairs of atoms that one stage relates by a law of two arguments.
PAIR_LIMIT = 24
# Other floors that a quotient is compared with.
QUOTIENT_LIMIT = 3
# Products of two atoms whose squares are brought in.
SQUARE_LIMIT = 8
# Sums of up to one term more than this are written out.
WRITTEN_OUT = 8
# Antidifferences are looked for up to this degree.
DEGREE_LIMIT = 8


def deep_atoms(state: State) -> list[Atom]:
    """All atoms of rows and undecided facts, at any depth, that are no part of a sum's summand; in order of first
    sight.

    Atoms that were replaced by what they equal come last: what the laws say of them still holds.
    """
    found: dict[Atom, None] = {}
    stack: list[Poly] = [r.poly for r in state.rows.values()] + [k.poly for k in state.pending]
    stack.reverse()
    while stack:
        for atom in sorted(stack.pop().atoms):
            if atom in found or atom.loose:
                continue
            found[atom] = None
            stack.extend(atom.parts)
    found.update((a, None) for a in state.images if a.kind in _LAWFUL or a.data[:1] == ("call",))
    return list(found)


# Kinds of atoms that laws speak of.
_LAWFUL = frozenset(("pow", "lg", "fact", "binom", "floor", "inv", "sum"))


# ---------------------------------------------------------------- stage 1: equations that simplify
def simplifying(state: State, atoms: Iterable[Atom], functions: Mapping[str, Law]) -> Iterator[Move]:
    """Steps of powers with a symbolic base, halves inside lg, closed forms of sums, definitions with fixed
    arguments.
    """
    for atom in atoms:
        match atom.kind:
            case "pow" if not atom.data:
                yield from _power_steps(atom)
            case "lg":
                yield from _halves(atom)
            case "sum":
                yield from _closed_sum(state, atom)
            case "call" | "truth" if atom.data[0] == "call" and all(p.constant is not None for p in atom.parts):
                if str(atom.data[1]) in functions:
                    yield Instance(functions[str(atom.data[1])].name, atom.parts)
            case "binom":
                if atom.parts[1].constant in (0, 1) or atom.parts[0] == atom.parts[1]:
                    yield Instance("binomial at the edges", (atom.parts[0],))


def _power_steps(atom: Atom) -> Iterator[Move]:
    """b^(e + c) as b * b^(e + c - 1), b^(x + y) as b^x * b^y."""
    base, exponent = atom.parts
    offset = exponent.terms.get((), 0)
    if not exponent.is_integer:
        return
    if isinstance(offset, int) and offset > 0:
        yield Instance("power step", (base, minus(exponent, UNITY)))
    elif isinstance(offset, int) and offset < 0:
        yield Instance("power step", (base, exponent))
    elif len(exponent.terms) > 1:
        (mono, c), *_ = sorted(exponent.terms.items())
        part = Poly({mono: c})
        yield Instance("power of a sum", (base, part, minus(exponent, part)))
    else:
        (mono, c), = exponent.terms.items()
        if isinstance(c, int) and c > 1:
            part = Poly({mono: 1})
            yield Instance("power of a sum", (base, part, scaled(part, c - 1)))


def _halves(atom: Atom) -> Iterator[Move]:
    """lg of x/2, floor(x/2), 2x and 2x + 1 from lg x."""
    inner = atom.parts[0]
    for atom_inside in sorted(inner.atoms):
        if atom_inside.kind == "floor" and inner.terms.get(((atom_inside, 1),)) == 1:
            doubled = scaled(plus(minus(inner, of_atom(atom_inside)), atom_inside.parts[0]), 2)
            if doubled.is_integer:
                yield Instance("lg of a whole half", (doubled,))
    below = [c for c in inner.terms.values() if isinstance(c, Fraction)]
    if below and scaled(inner, 2).is_integer:
        yield Instance("lg of half", (scaled(inner, 2),))
    if inner.is_integer and all(isinstance(c, int) for c in inner.terms.values()):
        odd = inner.terms.get((), 0) % 2 == 1
        rest = minus(inner, UNITY) if odd else inner
        if rest.terms and all(c % 2 == 0 for c in rest.terms.values()):
            half = scaled(rest, Fraction(1, 2))
            yield Instance("lg of a double and one" if odd else "lg of a double", (half,))


def _closed_sum(state: State, atom: Atom) -> Iterator[Move]:
    length = minus(atom.parts[1], atom.parts[0]).constant
    if isinstance(length, int) and 0 <= length <= WRITTEN_OUT:
        yield SumLaw("last", atom)
    found = antidifference(state, atom)
    if found is not None:
        yield SumLaw("closed", atom, found)
    yield SumLaw("empty", atom)


def antidifference(state: State, atom: Atom) -> Poly | None:
    """F with F(i) - F(i - 1) = f(i), for f(i) = i^d * b^(c*i) with a number b: undetermined coefficients from the
    top down.
    """
    algebra = state.algebra
    body = atom.parts[2]
    bound = algebra.bound_atom(str(atom.data[0]))
    ((mono, _),) = body.terms.items()
    degree, ratio, grows = 0, Fraction(1), UNITY
    for factor, exponent in mono:
        if factor == bound:
            degree = exponent
        elif factor.kind == "pow" and factor.data and factor.parts[1] == of_atom(bound):
            ratio *= Fraction(int(factor.data[0])) ** exponent
            grows = times(grows, of_atom(factor, exponent))
        else:
            return None
    if degree > DEGREE_LIMIT:
        return None
    coefficients = _polynomial_antidifference(degree, ratio)
    value = Poly({})
    for power, c in enumerate(coefficients):
        if c:
            value = plus(value, Poly({((bound, power),) if power else (): c.numerator if c.denominator == 1 else c}))
    return times(value, grows)


def _polynomial_antidifference(degree: int, ratio: Fraction) -> list[Fraction]:
    """Q with Q(i) - Q(i - 1)/ratio = i^degree, as coefficients from the constant up."""
    size = degree + 2 if ratio == 1 else degree + 1
    q = [Fraction(0)] * size
    rest = [Fraction(0)] * degree + [Fraction(1)]
    for power in range(degree, -1, -1):
        wanted = rest[power]
        top = power + 1 if ratio == 1 else power
        unit = _difference(top, ratio)
        c = wanted / unit[power]
        q[top] += c
        for k, value in enumerate(unit[: power + 1]):
            rest[k] -= c * value
    return q


def _difference(power: int, ratio: Fraction) -> list[Fraction]:
    """Coefficients of i^power - (i - 1)^power / ratio."""
    result = [-Fraction(comb(power, k) * (-1) ** (power - k)) / ratio for k in range(power + 1)]
    result[power] += 1
    return result


# ---------------------------------------------------------------- stage 2: definitions and steps
def unfolding(atoms: Iterable[Atom], functions: Mapping[str, Law]) -> Iterator[Move]:
    """Definitions of functions, steps of factorials and binomials, first and last terms of sums."""
    atoms = list(atoms)
    for atom in atoms:
        match atom.kind:
            case "call" | "truth" if atom.data[0] == "call" and str(atom.data[1]) in functions:
                yield Instance(functions[str(atom.data[1])].name, atom.parts)
            case "fact":
                yield Instance("factorial step", atom.parts)
            case "binom":
                yield Instance("addition of binomials", atom.parts)
                yield Instance("binomial at the edges", (atom.parts[0],))
                yield Instance("binomial beyond the edge", atom.parts)
    sums = [a for a in atoms if a.kind == "sum"]
    for atom in sums:
        for other in sums:
            if other is atom or other.data != atom.data or other.parts[2] != atom.parts[2]:
                continue
            if atom.parts[1] == other.parts[1] and minus(other.parts[0], atom.parts[0]) == UNITY:
                yield SumLaw("first", atom)
            if atom.parts[0] == other.parts[0] and minus(atom.parts[1], other.parts[1]) == UNITY:
                yield SumLaw("last", atom)


# ---------------------------------------------------------------- stage 3: bounds
def bounding(atoms: Iterable[Atom]) -> Iterator[Move]:
    """Inequalities about single atoms, and monotonicity between pairs of one kind."""
    atoms = list(atoms)
    for atom in atoms:
        match atom.kind:
            case "pow":
                yield from _power_bounds(atom)
            case "lg":
                yield Instance("definition of lg", atom.parts)
                yield Instance("lg below its argument", atom.parts)
                for k in (1, 2, 3):
                    yield Instance("lg grows", (constant(2**k), atom.parts[0]))
                    yield Instance("lg grows", (atom.parts[0], constant(2**k - 1)))
            case "fact":
                yield Instance("factorial above its argument", atom.parts)
            case "binom":
                yield Instance("binomial at least one", atom.parts)
                yield Instance("binomials add up", atom.parts)
            case "inv":
                yield Instance("sign of a quotient", atom.parts)
                yield Instance("quotient", atom.parts)
            case "floor":
                yield from _symbolic_division(atom, atoms)
    yield from _monotone(atoms)


def _power_bounds(atom: Atom) -> Iterator[Move]:
    base, exponent = atom.parts
    if not exponent.is_integer:
        return
    if not atom.data:
        yield Instance("sign of a power", (base, exponent))
        yield Instance("power at least one", (base, exponent))
    if atom.data == (2,) and exponent.nonneg:
        yield Instance("square below power", (plus(exponent, constant(4)),))
    for k in (0, 1, 2, 3):
        yield Instance("tangent of a power", (base, exponent, constant(k)))


def _symbolic_division(atom: Atom, atoms: Iterable[Atom]) -> Iterator[Move]:
    """floor(x/y): what is left of x; and whether it is 0, 1, what another floor is, or one more."""
    inner = atom.parts[0]
    divisors = [a.parts[0] for a in sorted(inner.atoms) if a.kind == "inv"]
    divisors += [of_atom(a) for a in sorted({a for mono in inner.terms for a, e in mono if e == -1})]
    others = [of_atom(a) for a in atoms if a.kind == "floor" and a is not atom][:QUOTIENT_LIMIT]
    for divisor in divisors:
        dividend = _multiplied(inner, divisor)
        yield Instance("division", (dividend, divisor))
        for q in (NOTHING, UNITY, *others, *(plus(q, UNITY) for q in others)):
            yield Instance("whole quotient", (dividend, divisor, q))


def _multiplied(p: Poly, divisor: Poly) -> Poly:
    """p times the divisor, where 1/divisor stands in a term without that factor."""
    result = Poly({})
    for mono, c in p.terms.items():
        rest = tuple(f for f in mono if not (f[0].kind == "inv" and f[0].parts[0] == divisor and f[1] == 1))
        part = Poly({rest: c})
        result = plus(result, part if rest != mono else times(part, divisor))
    return result


def _monotone(atoms: list[Atom]) -> Iterator[Move]:
    """Growth of lg, floor, quotients and powers between two atoms of the kind."""
    laws = {"lg": "lg grows", "floor": "floor grows", "inv": "quotient falls"}
    taken = 0
    for a, b in product(atoms, repeat=2):
        if a is b or a.kind != b.kind or taken >= PAIR_LIMIT:
            continue
        if a.kind in laws:
            taken += 1
            yield Instance(laws[a.kind], (a.parts[0], b.parts[0]))
        elif a.kind == "pow" and a.parts[0] == b.parts[0] and a.parts[1].is_integer and b.parts[1].is_integer:
            taken += 1
            yield Instance("power grows", (a.parts[0], a.parts[1], b.parts[1]))
            yield Instance("tangent of a power", (a.parts[0], b.parts[1], a.parts[1]))
        elif a.kind == "pow" and a.parts[1] == b.parts[1] and a.parts[1].is_integer:
            taken += 1
            yield Instance("power grows with its base", (a.parts[0], b.parts[0], a.parts[1]))


def squares(state: State) -> Iterator[Move]:
    """Squares of sums and differences, for products of two atoms that stand in rows."""
    pairs: dict[tuple[Atom, Atom], None] = {}
    for row in state.rows.values():
        for mono in row.poly.terms:
            if len(mono) == 2 and mono[0][1] == mono[1][1] == 1:
                pairs[mono[0][0], mono[1][0]] = None
            elif len(mono) == 1 and mono[0][1] == 2 and not mono[0][0].nonneg:
                yield Instance("square", (of_atom(mono[0][0]),))
    for a, b in list(pairs)[:SQUARE_LIMIT]:
        yield Instance("square", (minus(of_atom(a), of_atom(b)),))
        if not (a.nonneg and b.nonneg):
            yield Instance("square", (plus(of_atom(a), of_atom(b)),))


# ---------------------------------------------------------------- a user's laws, where they match
def matching(laws: Iterable[Law], atoms: Iterable[Atom], algebra_normal: Mapping[str, Poly]) -> Iterator[Move]:
    """Laws whose function, power or sum stands in the state with arguments that fit its pattern of plain parameters.

    `algebra_normal`: the normal form of each law's formula over its own parameters.
    """
    atoms = list(atoms)
    for law in laws:
        names = {p.name: p for p in law.parameters}
        seen: set[tuple[Poly, ...]] = set()
        for pattern in sorted(algebra_normal[law.name].deep):
            for atom in atoms:
                args = _match(pattern, atom, names)
                if args is not None and args not in seen and len(seen) < PAIR_LIMIT:
                    seen.add(args)
                    yield Instance(law.name, args)


def _match(pattern: Atom, atom: Atom, names: Mapping[str, Term]) -> tuple[Poly, ...] | None:
    """Arguments for all parameters, read off an atom of the same kind whose pattern parts are plain parameters or
    equal.
    """
    if pattern.kind in ("var", "ind", "truth", "pos") or pattern.kind != atom.kind or pattern.data != atom.data:
        return None
    bound: dict[str, Poly] = {}
    for wanted, part in zip(pattern.parts, atom.parts, strict=True):
        (mono, c), *more = wanted.terms.items() or [((), 0)]
        name = str(mono[0][0].data[0]) if len(mono) == 1 and mono[0][0].kind == "var" else ""
        if not more and c == 1 and name in names and mono[0][1] == 1:
            if bound.setdefault(name, part) != part:
                return None
        elif wanted != part:
            return None
    if set(bound) != set(names):
        return None
    return tuple(bound[n] for n in names)
