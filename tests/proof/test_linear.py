"""The exact contradictions of `workbench.proof.linear`, against elimination by hand and against scipy."""

from __future__ import annotations

import random
from collections.abc import Sequence
from fractions import Fraction
from time import thread_time

import pytest
from scipy.optimize import linprog

from workbench.proof import linear
from workbench.proof.linear import CONSTANT, LimitReached, Row, WrongCombination, find_combination, is_contradiction

Coefficients = dict[object, Fraction]


def at_least(**coefficients: int | Fraction) -> Row:
    """`one` is the constant."""
    return Row({CONSTANT if name == "one" else name: value for name, value in coefficients.items()})


def above(**coefficients: int | Fraction) -> Row:
    return Row(at_least(**coefficients).coefficients, strict=True)


def equal(**coefficients: int | Fraction) -> Row:
    return Row(at_least(**coefficients).coefficients, equation=True)


# ------------------------------------------------------------------ two judges that share no code with the module
def can_be_satisfied(rows: Sequence[Row]) -> bool:
    """Fourier-Motzkin elimination over the rationals: slow, complete, and short enough to be believed."""
    lines: set[tuple[frozenset[tuple[object, Fraction]], bool]] = set()
    for row in rows:
        for sign in (1, -1) if row.equation else (1,):
            lines.add((_scaled({m: Fraction(sign * c) for m, c in row.coefficients.items() if c}), row.strict))
    while True:
        monomials = {m for line, _ in lines for m, _ in line if m != CONSTANT}
        if not monomials:
            constants = [(dict(line).get(CONSTANT, Fraction(0)), strict) for line, strict in lines]
            return all(value > 0 or (value == 0 and not strict) for value, strict in constants)
        monomial = min(monomials, key=lambda m: sum(m in dict(line) for line, _ in lines))
        above_0 = [(dict(line), s) for line, s in lines if dict(line).get(monomial, 0) > 0]
        below_0 = [(dict(line), s) for line, s in lines if dict(line).get(monomial, 0) < 0]
        rest = {(line, s) for line, s in lines if monomial not in dict(line)}
        for up, up_strict in above_0:
            for down, down_strict in below_0:
                total = {
                    m: up.get(m, 0) * -down[monomial] + down.get(m, 0) * up[monomial] for m in up.keys() | down.keys()
                }
                rest.add((_scaled({m: Fraction(c) for m, c in total.items() if c}), up_strict or down_strict))
        lines = rest


def _scaled(coefficients: Coefficients) -> frozenset[tuple[object, Fraction]]:
    size = max((abs(c) for c in coefficients.values()), default=Fraction(1))
    return frozenset((m, c / size) for m, c in coefficients.items())


def sums_to_a_contradiction(rows: Sequence[Row], combination: list[tuple[int, Fraction]]) -> bool:
    assert len({i for i, _ in combination}) == len(combination)
    assert all(m > 0 or (rows[i].equation and m != 0) for i, m in combination)
    monomials = {m for row in rows for m in row.coefficients} | {CONSTANT}
    sums = {m: sum(Fraction(rows[i].coefficients.get(m, 0)) * k for i, k in combination) for m in monomials}
    constant = sums.pop(CONSTANT)
    has_strict = any(rows[i].strict and not rows[i].equation for i, _ in combination)
    return not any(sums.values()) and (constant < 0 or (constant == 0 and has_strict))


def random_system(rng: random.Random, homogeneous: bool = False) -> list[Row]:
    monomials = ["n", "k", "n*k", "2^n", "lg"][: rng.randint(1, 5)]
    rows = []
    for _ in range(rng.randint(1, 9)):
        chosen = rng.sample(monomials, rng.randint(0 if rng.random() < 0.1 else 1, min(3, len(monomials))))
        coefficients: dict[object, int | Fraction] = {m: rng.choice([-3, -2, -1, -1, 0, 1, 1, 2]) for m in chosen}
        if not homogeneous and rng.random() < 0.8:
            coefficients[CONSTANT] = rng.randint(-4, 3)
        if rng.random() < 0.2:
            coefficients = {m: Fraction(c, rng.randint(1, 6)) for m, c in coefficients.items()}
        kind = rng.random()
        rows.append(Row(coefficients, strict=kind < 0.25, equation=kind > 0.85))
    return rows


# ------------------------------------------------------------------ random systems
@pytest.mark.parametrize("homogeneous", [False, True], ids=["general", "degenerate"])
@pytest.mark.parametrize("eager_pivots", [0, 100], ids=["smallest index", "eager"])
def test_finds_a_contradiction_exactly_where_elimination_does(
    homogeneous: bool, eager_pivots: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(linear, "EAGER_PIVOTS", eager_pivots)
    rng = random.Random(20_240 + homogeneous)
    contradictory = 0
    for _ in range(500):
        rows = random_system(rng, homogeneous)
        found = find_combination(rows, raise_limits=True)
        assert (found is None) == can_be_satisfied(rows), rows
        if found is not None:
            contradictory += 1
            assert sums_to_a_contradiction(rows, found), (rows, found)
    assert 100 < contradictory < 400  # both answers were really tried


def test_no_row_of_a_combination_of_inequalities_is_superfluous() -> None:
    rng = random.Random(5)
    tried = 0
    for _ in range(300):
        rows = [Row(r.coefficients, r.strict) for r in random_system(rng)]
        found = find_combination(rows)
        if found is not None and len(found) > 1:
            tried += 1
            used = [rows[i] for i, _ in found]
            for left_out in range(len(used)):
                assert can_be_satisfied(used[:left_out] + used[left_out + 1 :]), used
    assert tried > 50


def test_answers_for_middling_systems_agree_with_scipy() -> None:
    rng = random.Random(11)
    contradictory = 0
    for _ in range(60):
        width = rng.randint(5, 18)
        rows = []
        for _ in range(rng.randint(width, 3 * width)):
            coefficients: dict[object, int] = {m: rng.randint(-5, 5) for m in rng.sample(range(width), 4)}
            coefficients[CONSTANT] = rng.randint(-6, 6)
            rows.append(Row(coefficients, equation=rng.random() < 0.1))
        found = find_combination(rows, raise_limits=True)
        assert (found is None) == scipy_finds_a_point(rows, width)
        if found is not None:
            contradictory += 1
            assert sums_to_a_contradiction(rows, found)
    assert 10 < contradictory < 50


def scipy_finds_a_point(rows: Sequence[Row], width: int) -> bool:
    def matrix(chosen: list[Row]) -> list[list[float]]:
        return [[-float(r.coefficients.get(m, 0)) for m in range(width)] for r in chosen]

    def right(chosen: list[Row]) -> list[float]:
        return [float(r.coefficients.get(CONSTANT, 0)) for r in chosen]

    inequalities, equations = [r for r in rows if not r.equation], [r for r in rows if r.equation]
    answer = linprog(
        [0.0] * width,
        A_ub=matrix(inequalities) or None,
        b_ub=right(inequalities) or None,
        A_eq=matrix(equations) or None,
        b_eq=right(equations) or None,
        bounds=(None, None),
    )
    assert answer.status in (0, 2), answer.message  # solved, or infeasible
    return bool(answer.status == 0)


def test_rows_that_a_known_point_satisfies_give_nothing() -> None:
    rng = random.Random(3)
    for _ in range(100):
        point = {m: Fraction(rng.randint(-20, 20), rng.randint(1, 4)) for m in range(8)}
        rows = []
        for _ in range(25):
            chosen = rng.sample(range(8), 3)
            coefficients: dict[object, int | Fraction] = {m: rng.randint(-4, 4) for m in chosen}
            value = sum(Fraction(coefficients[m]) * point[m] for m in chosen)
            equation, strict = rng.random() < 0.2, rng.random() < 0.3
            slack = 0 if equation else rng.randint(1, 5) if strict else rng.randint(0, 2)
            coefficients[CONSTANT] = slack - value
            rows.append(Row(coefficients, strict, equation))
        assert find_combination(rows, raise_limits=True) is None


def test_planted_contradictions_among_products_are_found() -> None:
    rng = random.Random(8)
    for _ in range(20):
        facts = [{(v,): 1, (): rng.randint(-2, 2)} for v in "abcdef"] + [{("a",): -1, ("b",): 2, (): 1}]
        products = [_product(p, q) for i, p in enumerate(facts) for q in facts[: i + 1]]
        goal: dict[tuple[str, ...], int] = {(): -1}
        for product in rng.sample(products, 6):
            factor = rng.randint(1, 3)
            for monomial, c in product.items():
                goal[monomial] = goal.get(monomial, 0) - factor * c
        rows = [Row(p) for p in [*facts, *products, goal]]
        found = find_combination(rows, raise_limits=True)
        assert found is not None
        assert sums_to_a_contradiction(rows, found)


def _product(p: dict[tuple[str, ...], int], q: dict[tuple[str, ...], int]) -> dict[tuple[str, ...], int]:
    result: dict[tuple[str, ...], int] = {}
    for m, a in p.items():
        for n, b in q.items():
            key = tuple(sorted(m + n))
            result[key] = result.get(key, 0) + a * b
    return result


# ------------------------------------------------------------------ single cases
@pytest.mark.parametrize(
    ("rows", "expected"),
    [
        ([at_least(n=1), at_least(n=-1, one=-1)], [(0, 1), (1, 1)]),
        ([at_least(n=2, k=-3), at_least(k=1, one=-1), at_least(n=-1)], [(0, 1), (1, 3), (2, 2)]),
        ([at_least(n=Fraction(1, 2)), at_least(n=Fraction(-1, 3), one=-1)], [(0, 2), (1, 3)]),
        ([above(n=1), at_least(n=-1)], [(0, 1), (1, 1)]),
        ([above(n=1, k=-1), above(k=1, m=-1), at_least(m=1, n=-1)], [(0, 1), (1, 1), (2, 1)]),
        ([equal(n=1, one=-3), equal(n=2, one=-5)], [(0, 2), (1, -1)]),
        ([equal(n=1, k=-2), above(n=-1), at_least(k=1)], [(0, 1), (1, 1), (2, 2)]),
        ([equal(n=1), above(n=1)], [(0, -1), (1, 1)]),
        ([equal(n=1), above(n=-1)], [(0, 1), (1, 1)]),
        ([at_least(one=-1)], [(0, 1)]),
        ([above()], [(0, 1)]),
        ([equal(one=3)], [(0, -1)]),
        ([equal(one=-3)], [(0, 1)]),
        ([at_least(n=0, one=-2)], [(0, 1)]),
        ([at_least(n=1, one=-4), at_least(n=1, one=-7), at_least(n=-1, one=5)], [(1, 1), (2, 1)]),
        ([at_least(n=3, one=-1), at_least(n=-2)], [(0, 2), (1, 3)]),
        ([above(n=1, one=-2), at_least(n=-1, one=2)], [(0, 1), (1, 1)]),
        ([at_least(n=1, k=1, one=-1), at_least(n=-1), at_least(k=-1)], [(0, 1), (1, 1), (2, 1)]),
        ([at_least(n=1), at_least(k=1), equal(n=1, k=1, one=1)], [(0, 1), (1, 1), (2, -1)]),
        ([at_least(n=1), at_least(k=1), equal(n=-1, k=-1, one=-1)], [(0, 1), (1, 1), (2, 1)]),
    ],
)
def test_combination_is_the_one_worked_out_by_hand(rows: list[Row], expected: list[tuple[int, int]]) -> None:
    found = find_combination(rows)
    assert found is not None and is_contradiction(rows, found)
    assert [(i, int(m)) for i, m in found] in (expected, [(i, -m) for i, m in expected])


@pytest.mark.parametrize(
    "rows",
    [
        [],
        [at_least()],
        [at_least(one=2)],
        [above(one=1)],
        [equal()],
        [at_least(n=1), at_least(n=-1)],
        [above(n=1), at_least(n=-1, one=1)],
        [equal(n=1), at_least(n=1), at_least(n=-1)],
        [above(n=1, k=-1), above(k=1, n=-1, one=1)],
        [at_least(n=-1, one=-1)],
        [equal(n=1, k=1), equal(n=1, k=-1), equal(n=2)],
        [at_least(n=1), at_least(n=1), at_least(n=2, one=3)],
    ],
)
def test_rows_that_can_hold_together_give_nothing(rows: list[Row]) -> None:
    assert find_combination(rows, raise_limits=True) is None


def test_multipliers_have_no_common_divisor() -> None:
    assert find_combination([at_least(n=4), at_least(n=-4, one=-8)]) == [(0, Fraction(1)), (1, Fraction(1))]


def test_rows_are_left_as_they_were() -> None:
    rows = [at_least(n=1, k=-1), at_least(k=1, one=-1), at_least(n=-1), equal(n=1, m=-1)]
    before = [dict(r.coefficients) for r in rows]
    find_combination(rows)
    assert [dict(r.coefficients) for r in rows] == before


HARD = [at_least(n=1, k=-1), at_least(k=1, m=-1, one=-1), at_least(m=1, n=-1)]


def test_no_pivots_left_gives_nothing_or_raises_as_asked() -> None:
    assert find_combination(HARD) is not None
    assert find_combination(HARD, pivots=0) is None
    with pytest.raises(LimitReached, match="pivots"):
        find_combination(HARD, pivots=0, raise_limits=True)


def test_a_deadline_that_has_passed_gives_nothing_or_raises_as_asked() -> None:
    assert find_combination(HARD, deadline=thread_time() + 60) is not None
    assert find_combination(HARD, deadline=thread_time() - 1) is None
    with pytest.raises(LimitReached, match="time"):
        find_combination(HARD, deadline=thread_time() - 1, raise_limits=True)


def test_a_wrong_combination_never_gets_out(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(linear._Dictionary, "contradiction", lambda self: {0: 1, 1: 2})
    with pytest.raises(WrongCombination):
        find_combination([at_least(n=1), at_least(n=-1, one=-1)])


@pytest.mark.parametrize(
    ("rows", "combination"),
    [
        ([at_least(n=1), at_least(n=1, one=1)], [(0, 1), (1, -1)]),  # a negative multiple of an inequality
        ([at_least(n=1), at_least(n=-1, one=1)], [(0, 1), (1, 1)]),  # 1 >= 0 is no contradiction
        ([at_least(n=1), at_least(n=-1)], [(0, 1), (1, 1)]),  # nor is 0 >= 0
        ([at_least(n=1), at_least(n=-2, one=-1)], [(0, 1), (1, 1)]),  # n is left over
        ([at_least(n=1), at_least(n=-1), above(n=1)], [(0, 1), (1, 1), (2, 0)]),  # strict, but not used
        ([Row({}, strict=True, equation=True)], [(0, 1)]),  # 0 = 0, whatever else is said of it
        ([], []),
    ],
)
def test_what_is_no_contradiction_is_told_apart(rows: list[Row], combination: list[tuple[int, int]]) -> None:
    assert not is_contradiction(rows, combination)
