"""Every law that the kernel knows holds for all values tried, edges and side conditions included; and needs each of its
conditions.

Terms are read as total functions here, as the normal form reads them: x/0 = 0, lg x = 0 below 1, and so on.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from itertools import product

import pytest

from tests.proof.reading import ANY, total
from workbench.algebra.terms import TRUE, Rational, Term, conjunction
from workbench.proof.laws import Law, built_in_laws

VALUES: dict[str, tuple[Rational, ...]] = {
    "nat": (0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 15, 16, 17),
    "int": (-5, -3, -2, -1, 0, 1, 2, 3, 4, 7, 8),
    "real": (
        *(-3, -2, -1, 0, 1, 2, 3, 4, 8, 9),
        *(Fraction(-1, 2), Fraction(1, 3), Fraction(1, 2), Fraction(3, 2), Fraction(7, 2)),
    ),
    "bool": (0, 1),
}
LAWS = {law.name: law for law in built_in_laws()}


def assignments(law: Law, wider: str = "") -> Iterator[dict[str, Rational]]:
    """Values of the parameters; `wider`: a natural that may be negative for once."""
    names = [p.name for p in law.parameters]
    sorts = ["int" if p.name == wider else p.sort for p in law.parameters]
    for values in product(*(VALUES[s] for s in sorts)):
        yield dict(zip(names, values, strict=True))


def conjuncts(formula: Term) -> list[Term]:
    if formula.op == "and":
        return [c for a in formula.args for c in conjuncts(a)]
    return [] if formula == TRUE else [formula]


@pytest.mark.parametrize("name", LAWS)
def test_law_holds_wherever_its_condition_does(name: str) -> None:
    law = LAWS[name]
    met = 0
    for values in assignments(law):
        if total(law.given, values):
            met += 1
            assert all(total(law.formula, values, anything=some) for some in (0, ANY)), values
    assert met >= 3, "hardly any value meets the condition"


CONDITIONS = [(name, i) for name, law in LAWS.items() for i in range(len(conjuncts(law.given)))]


@pytest.mark.parametrize(("name", "left_out"), CONDITIONS)
def test_law_fails_somewhere_without_any_one_of_its_conditions(name: str, left_out: int) -> None:
    law = LAWS[name]
    parts = conjuncts(law.given)
    others = conjunction([p for i, p in enumerate(parts) if i != left_out])
    assert any(not total(law.formula, v) for v in assignments(law) if total(others, v)), parts[left_out]


NATURALS = [(name, p.name) for name, law in LAWS.items() for p in law.parameters if p.sort == "nat"]


@pytest.mark.parametrize(("name", "parameter"), NATURALS)
def test_law_fails_somewhere_for_a_negative_natural(name: str, parameter: str) -> None:
    """Else its parameter would be an int. A condition that leaves nothing below 0 says the same."""
    law = LAWS[name]
    outside = [v for v in assignments(law, parameter) if v[parameter] < 0 and total(law.given, v)]
    assert not outside or any(not total(law.formula, v, anything=some) for v in outside for some in (0, ANY))


def test_names_of_laws_are_their_own_and_each_names_its_source() -> None:
    laws = built_in_laws()
    assert len({law.name for law in laws}) == len(laws)
    assert all(law.source for law in laws)
