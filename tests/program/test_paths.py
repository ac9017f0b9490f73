"""Paths keep the state by substitution, and branches joined into one event say what either branch said."""

from __future__ import annotations

from workbench.algebra.formulas import show
from workbench.algebra.terms import app, num, var
from workbench.errors import Span
from workbench.program.obligation import Fact
from workbench.program.paths import Branch, Event, Path, joined, summary

HERE = Span(0, 0, 1, 1)
X, Y = var("x", "int"), var("y", "int")


def assign(name: object, value: object) -> Event:
    return Event("substitute the statement", "", HERE, {name: value})  # type: ignore[dict-item]


def test_later_statements_see_earlier_values() -> None:
    path = Path().then(assign(X, app("+", X, num(1)))).then(assign(Y, app("*", X, X)))
    assert show(path.value(Y)) == "(x + 1)*(x + 1)"


def test_all_updates_of_one_event_happen_at_once() -> None:
    path = Path().then(Event("swap", "", HERE, {X: Y, Y: X}))
    assert (path.value(X), path.value(Y)) == (Y, X)


def test_facts_speak_of_the_state_before_their_event() -> None:
    path = Path().then(assign(X, num(3)))
    path = path.then(Event("take the branch", "", HERE, {X: num(4)}, (Fact(app("<", X, Y), "the branch"),)))
    assert [show(f.formula) for f in path.facts] == ["3 < y"]


def test_summary_of_events_is_over_the_names_before_them() -> None:
    path = summary([assign(X, app("+", X, num(2))), assign(X, app("*", X, num(5)))])
    assert show(path.value(X)) == "(x + 2)*5"


def test_joined_growth_stays_a_sum_and_other_values_get_a_name() -> None:
    condition = app("<", Y, num(7))
    branches = [
        Branch(condition, "", (assign(X, app("+", X, num(2))), assign(Y, num(0)))),
        Branch(app("not", condition), "", ()),
    ]
    event = joined(branches, "", HERE, {"x", "y"}, lambda n: var(f"{n.name}@1", n.sort))
    assert show(event.updates[X]) == "x + (if y < 7 then 2 else 0)"
    assert show(event.updates[Y]) == "y@1"
    assert [show(f.formula) for f in event.facts] == ["y@1 = (if y < 7 then 0 else y)"]


def test_facts_of_a_joined_branch_hold_where_it_is_taken() -> None:
    condition = app("<", Y, num(7))
    told = Event("name a middle state", "", HERE, {}, (Fact(app("=", X, num(1)), "told"),))
    branches = [Branch(condition, "", ()), Branch(app("not", condition), "", (told,))]
    event = joined(branches, "", HERE, {"x"}, lambda n: n)
    assert [show(f.formula) for f in event.facts] == ["not y < 7 implies x = 1"]


def test_names_that_end_with_a_branch_are_left_behind() -> None:
    inner = var("inner", "int")
    branches = [Branch(app("<", X, Y), "", (assign(inner, num(1)),)), Branch(app(">=", X, Y), "", ())]
    assert dict(joined(branches, "", HERE, {"x", "y"}, lambda n: n).updates) == {}
