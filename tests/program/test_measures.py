"""Measures fall lexicographically, and stay natural."""

from __future__ import annotations

from itertools import product

from workbench.algebra.formulas import show
from workbench.algebra.terms import FALSE, app, num, var
from workbench.errors import Span
from workbench.program.measures import components, falls, owed, routine_candidates
from workbench.program.priced import Routine, Specification, Variable

A, B, C, D = (var(n, "int") for n in "abcd")
HERE = Span(0, 0, 1, 1)


def holds(formula: object, values: dict[str, int]) -> bool:
    text = show(formula)  # type: ignore[arg-type]
    return bool(eval(text.replace(" = ", " == "), {}, values))


def test_pairs_are_compared_as_tuples_are() -> None:
    formula = falls((A, B), (C, D))
    for a, b, c, d in product(range(3), repeat=4):
        assert holds(formula, {"a": a, "b": b, "c": c, "d": d}) == ((c, d) < (a, b))


def test_tuples_of_unlike_length_never_fall() -> None:
    assert falls((A, B), (C,)) == FALSE


def test_a_new_measure_is_owed_to_be_natural_and_less() -> None:
    assert [show(g) for g, _ in owed((A,), (app("-", A, num(1)),))] == ["0 <= a - 1", "a - 1 < a"]
    half = app("/", A, num(2))
    assert [show(g) for g, _ in owed((A,), (half,))] == ["floor(a/2) = a/2", "0 <= a/2", "a/2 < a"]


def test_candidates_are_whole_parameters_and_their_sums() -> None:
    spec = Specification("", (), (), None, HERE)
    parameters = (Variable("n", "nat"), Variable("x", "real"), Variable("m", "int"))
    routine = Routine("r", parameters, None, spec, (), frozenset(), frozenset(), "", HERE)
    assert [[show(t) for t in m] for m in routine_candidates(routine)] == [["n"], ["m"], ["n + m"]]


def test_groups_are_routines_that_call_each_other_in_a_circle() -> None:
    calls = {"a": frozenset("b"), "b": frozenset("ac"), "c": frozenset("c"), "d": frozenset("a")}
    groups = components(calls)
    assert groups == {"a": frozenset("ab"), "b": frozenset("ab"), "c": frozenset("c"), "d": frozenset()}
