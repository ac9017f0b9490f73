"""What pricing makes of headers, and what it says that loops, stages and routines change."""

from __future__ import annotations

import pytest

from tests.program.sheets import RESOURCES, body, first, program
from workbench.algebra.formulas import show
from workbench.algebra.terms import variables
from workbench.program.priced import Loop, Stage

SHORT_FORMS = {
    "spent time <= n": "time' <= time + n",
    "net stack = 0": "stack' = stack",
    "net heap >= n": "heap' >= heap + n",
    "peak stack = 3": "stack.peak' = max(stack.peak, stack + 3)",
    "area stack <= n": "stack.area' <= stack.area + stack*(time' - time) + n",
    "mean stack >= 2": "stack.area' - stack.area - stack*(time' - time) >= 2*(time' - time)",
    "n > 0 implies spent time = 1": "n > 0 implies time' = time + 1",
}


@pytest.mark.parametrize("claim", SHORT_FORMS)
def test_short_forms_mean_what_their_table_says(claim: str) -> None:
    made = program(f"{RESOURCES}routine r(n: nat)\nclaim {claim}\nis skip end\n")
    (priced,) = made.routines["r"].spec.claims
    assert (show(priced.formula), priced.text) == (SHORT_FORMS[claim], claim)


def test_labels_of_claims_are_their_own() -> None:
    claims = ["spent time <= n", "own: net stack = 0", "n > 0 implies spent time = 1", "heap' = heap",
              "spent time >= 0", "n >= 0"]  # fmt: skip
    text = "".join(f"claim {c}\n" for c in claims)
    made = program(f"{RESOURCES}routine r(n: nat)\n{text}is skip end\n")
    assert [c.label for c in made.routines["r"].spec.claims] == [
        "spent time", "own", "spent time (2)", "claim 4", "spent time (3)", "claim 6",
    ]  # fmt: skip


def test_labels_of_loops_and_stages_are_their_own() -> None:
    text = """
for i from 1 to 2 do skip end
for i from 1 to 2 do skip end
while n > 1 do skip end
stage s is
  skip
end
"""
    found = [s.spec.label for s in body(text, RESOURCES) if isinstance(s, (Loop, Stage))]
    assert found[0] == "for i" and found[-1] == "s"
    assert len(set(found)) == 4 and found[1].startswith("for i at line") and found[2].startswith("while at line")


def test_names_carry_their_sorts() -> None:
    made = program(f"{RESOURCES}state s: int\nroutine r(n: nat, q: real, b: bool) -> int\n"
                   "claim b implies result = s' + n + stack.peak\nis\nnote k = n + 1\nnote h = n/2\n"
                   "note t = n > 1\nnote d = n - 1\nresult := 0\nend\n")  # fmt: skip
    claim = made.routines["r"].spec.claims[0].formula
    assert {v.name: v.sort for v in variables(claim)} == {
        "b": "bool", "result": "int", "s'": "int", "n": "nat", "stack.peak": "real",
    }  # fmt: skip
    notes = {s.target: s.sort for s in made.routines["r"].body}  # type: ignore[union-attr]
    assert notes == {"k": "nat", "h": "real", "t": "bool", "d": "int", "result": "int"}


def test_loops_know_their_scope_bounds_and_what_they_change() -> None:
    text = """
var x: nat := 0
for i from 2 below n do
  var inner: nat := 0
  x := x + 1
  hold 1 heap do
    spend 1 time
  end
end
"""
    loop = first(body(text, RESOURCES), Loop)
    assert isinstance(loop, Loop)
    assert {v.name: v.sort for v in loop.scope} == {"n": "nat", "q": "real", "b": "bool", "x": "nat", "i": "int"}
    assert loop.changed == {"x", "i", "time", "stack.area", "heap.peak"}
    assert loop.lower is not None and loop.upper is not None
    assert (loop.variable, show(loop.lower), show(loop.upper)) == ("i", "2", "n - 1")


@pytest.mark.parametrize(
    ("bounds", "upper"),
    [
        ("1 to n", "n"),
        ("1 below n", "n - 1"),
        ("1 to q", "floor(q)"),
        ("1 below q", "ceil(q) - 1"),
        ("1 to n/2", "floor(n/2)"),
    ],
)
def test_the_last_value_of_a_for_is_the_last_integer_that_passes(bounds: str, upper: str) -> None:
    loop = first(body(f"for i from {bounds} do skip end", RESOURCES), Loop)
    assert isinstance(loop, Loop) and loop.upper is not None
    assert show(loop.upper) == upper


def test_a_stage_knows_what_it_declares_and_changes() -> None:
    stage = first(body("var x: nat := 0\nstage s is\nvar y: int := 1\nn := 2\nspend 1 time\nend\n", RESOURCES), Stage)
    assert isinstance(stage, Stage)
    assert [v.name for v in stage.scope] == ["n", "q", "b", "x"]
    assert [(v.name, v.sort) for v in stage.declared] == [("y", "int")]
    assert stage.changed == {"n", "time", "stack.area"}


def test_what_a_routine_changes_is_known_through_calls_in_a_circle() -> None:
    text = """
state s: nat
state t: nat
routine a(n: nat) is
  var local: nat := n
  if n > 0 then b(n - 1) end
  acquire 1 heap
end
routine b(n: nat) is
  if n > 0 then a(n - 1) end
  s := 1
  while t > 1 do
    a(0)
  end
end
routine c() is
  skip
end
"""
    made = program(RESOURCES + text).routines
    assert made["a"].changed == made["b"].changed == {"heap", "heap.peak", "s"}
    assert made["c"].changed == frozenset()
    assert {name: set(r.calls) for name, r in made.items()} == {"a": {"b"}, "b": {"a"}, "c": set()}
    loop = first(made["b"].body, Loop)
    assert isinstance(loop, Loop) and loop.changed == {"heap", "heap.peak", "s"}


def test_sibling_scopes_may_reuse_a_name_with_another_sort() -> None:
    text = """
if b then
  var x: nat := n
  while x > 0 do x := x - 1 end
else
  var x: real := q
  while x > 0 do x := x - 1/2 end
end
"""
    (choice,) = body(text, RESOURCES)
    found = [first(block, Loop) for block in (choice.then, choice.otherwise)]  # type: ignore[union-attr]
    sorts = [{v.name: v.sort for v in loop.scope}["x"] for loop in found if isinstance(loop, Loop)]
    assert sorts == ["nat", "real"]
    conditions = [variables(loop.condition).pop().sort for loop in found if isinstance(loop, Loop)]
    assert conditions == ["nat", "real"]
