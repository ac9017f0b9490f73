"""Every event at its price, against priced programs written out by hand."""

from __future__ import annotations

from textwrap import dedent

import pytest

from workbench.algebra.formulas import show
from workbench.algebra.terms import variables
from workbench.library.loading import load_text
from workbench.printing.priced import priced_lines
from workbench.program.priced import Block, Hold, Loop, Program, Spend, Stage, Statement
from workbench.program.pricing import price
from workbench.program.running import run

TARIFF = """
constant frame: nat
state level: int
tariff all
  counter time
  counter writes
  gauge stack over time
  gauge heap
  on call: hold frame stack, spend 2 time
  on declare: hold 4*size stack, spend 3 time
  on assign: spend 1 time
  on test: spend 7 time
end
routine leaf(k: nat) is skip end
routine value(k: nat) -> nat with frame = 8 + k is result := k end
"""
RESOURCES = "tariff plain\n  counter time\n  gauge stack over time\n  gauge heap\nend\n"


def program(text: str) -> Program:
    loaded = load_text("priced.ullage", text)
    assert loaded.sheet is not None and not loaded.problems, loaded.problems
    return price(loaded.path, loaded.sheet, loaded.used)


def body(text: str, before: str = TARIFF) -> Block:
    """The priced body of a routine r(n: nat, q: real, b: bool) with these statements."""
    return program(f"{before}\nroutine r(n: nat, q: real, b: bool) is\n{text}\nend\n").routines["r"].body


def lines(text: str, before: str = TARIFF) -> list[str]:
    made = program(f"{before}\nroutine r(n: nat, q: real, b: bool) is\n{text}\nend\n").routines["r"]
    return [line.removesuffix("    # tariff").removeprefix("  ") for line, _ in priced_lines(made)][1:]


def first(block: Block, kind: type) -> Statement:
    """The first statement of the kind, wherever it stands."""
    work = list(block)
    while work:
        s = work.pop(0)
        if isinstance(s, kind):
            return s  # type: ignore[no-any-return]
        if isinstance(s, (Hold, Loop, Stage)):
            work = [*s.body, *work]
    raise AssertionError(f"no {kind.__name__}")


EVENTS = {
    "an assignment costs before it is made": (
        "level := n",
        """
        spend 1 time
        level := n
        """,
    ),
    "any value costs as every assignment": (
        "level := any where level > n",
        """
        spend 1 time
        level := any where level > n
        """,
    ),
    "a call spends, then holds until the callee returns": (
        "leaf(n + 1)",
        """
        spend 2 time
        hold frame stack do
          leaf(n + 1)
        end
        """,
    ),
    "a call is priced by the callee's bindings over the arguments": (
        "level := value(n*2)",
        """
        spend 2 time
        hold 8 + n*2 stack do
          level := value(n*2)
        end
        spend 1 time
        """,
    ),
    "a declaration holds to the end of its block, with a size of 1": (
        """
        spend 5 writes
        var x: nat
        spend n writes
        """,
        """
        spend 5 writes
        spend 3 time
        hold 4*1 stack do
          x := any
          spend n writes
        end
        """,
    ),
    "an initialised declaration is a declaration and an assignment": (
        "var x: nat size n + 2 := 6",
        """
        spend 3 time
        hold 4*(n + 2) stack do
          spend 1 time
          x := 6
        end
        """,
    ),
    "a declaration from a call is charged as declared, called, assigned": (
        "var x: nat := value(3)",
        """
        spend 3 time
        hold 4*1 stack do
          spend 2 time
          hold 8 + 3 stack do
            x := value(3)
          end
          spend 1 time
        end
        """,
    ),
    "holds of two declarations end together": (
        """
        var x: nat
        var y: nat size 2
        """,
        """
        spend 3 time
        hold 4*1 stack do
          x := any
          spend 3 time
          hold 4*2 stack do
            y := any
          end
        end
        """,
    ),
    "a declaration in a branch ends with it": (
        """
        if b then
          var x: nat
        end
        spend 1 writes
        """,
        """
        spend 7 time
        if b then
          spend 3 time
          hold 4*1 stack do
            x := any
          end
        end
        spend 1 writes
        """,
    ),
    "every test is charged where it is reached": (
        "if n = 0 then spend 1 writes elif n = 1 then spend 2 writes elif n = 2 then skip else spend 4 writes end",
        """
        spend 7 time
        if n = 0 then
          spend 1 writes
        else
          spend 7 time
          if n = 1 then
            spend 2 writes
          else
            spend 7 time
            if n = 2 then
            else
              spend 4 writes
            end
          end
        end
        """,
    ),
    "a loop's test is charged each time, the failing one too": (
        "while level > 0 do level := level - 1 end",
        """
        loop
          spend 7 time
        while level > 0 do
          spend 1 time
          level := level - 1
        end
        """,
    ),
    "a for declares, assigns, tests and steps": (
        "for i from 1 to n do spend i writes end",
        """
        spend 3 time
        hold 4*1 stack do
          spend 1 time
          i := 1
          loop
            spend 7 time
          while i <= n do
            spend i writes
            spend 1 time
            i := i + 1
          end
        end
        """,
    ),
    "bounds that may change are noted once, before anything is charged": (
        "for i from level below level + n do level := 0 end",
        """
        note i.first = level
        note i.last = level + n
        spend 3 time
        hold 4*1 stack do
          spend 1 time
          i := i.first
          loop
            spend 7 time
          while i < i.last do
            spend 1 time
            level := 0
            spend 1 time
            i := i + 1
          end
        end
        """,
    ),
    "what the author wrote is not charged": (
        """
        note k = n + 1
        spend k time
        acquire k heap
        hold 2 heap do release k heap end
        """,
        """
        note k = n + 1
        spend k time
        acquire k heap
        hold 2 heap do
          release k heap
        end
        """,
    ),
    "either costs nothing by itself": (
        "either spend 1 time else leaf(0) end",
        """
        either
          spend 1 time
        else
          spend 2 time
          hold frame stack do
            leaf(0)
          end
        end
        """,
    ),
    "room for what a stage declares outlives it": (
        """
        stage begin is
          var x: nat size n := 0
        end
        spend 1 writes
        """,
        """
        stage begin
          spend 3 time
          acquire 4*n stack
          spend 1 time
          x := 0
        end
        spend 1 writes
        release 4*n stack
        """,
    ),
    "room whose size may change is noted, so that the same is released": (
        """
        stage begin is
          var x: nat size n
          n := 0
        end
        """,
        """
        stage begin
          spend 3 time
          note x.room = 4*n
          acquire x.room stack
          x := any
          spend 1 time
          n := 0
        end
        release x.room stack
        """,
    ),
    "a stage in a loop gives back at the end of each iteration": (
        "while n > 0 do\n stage s is\n var x: nat\n end\n n := n - 1\n end",
        """
        loop
          spend 7 time
        while n > 0 do
          stage s
            spend 3 time
            acquire 4*1 stack
            x := any
          end
          spend 1 time
          n := n - 1
          release 4*1 stack
        end
        """,
    ),
}


@pytest.mark.parametrize("name", EVENTS)
def test_events_are_priced(name: str) -> None:
    text, expected = EVENTS[name]
    assert lines(dedent(text)) == dedent(expected).strip().split("\n")


def test_charges_are_told_from_what_the_author_wrote() -> None:
    charge, own = body("level := n\nspend 1 time")[::2]
    assert isinstance(charge, Spend) and charge.is_charge
    assert isinstance(own, Spend) and not own.is_charge
    hold = body("leaf(1)")[1]
    assert isinstance(hold, Hold) and hold.is_charge


def test_spends_come_before_holds_and_tariffs_add_up_in_their_order() -> None:
    two = RESOURCES + "tariff a\non call: hold 1 stack, hold 2 heap\nend\ntariff b\non call: spend 3 time\nend\n"
    assert lines("leaf()", two + "routine leaf() is skip end\n") == [
        "spend 3 time", "hold 1 stack do", "  hold 2 heap do", "    leaf()", "  end", "end",
    ]  # fmt: skip


def test_a_price_means_the_callees_names_whatever_the_caller_calls_its_own() -> None:
    summed = RESOURCES + "tariff a\non call: hold sum(frame for i from 1 to 3) stack\nend\n"
    text = f"{summed}routine leaf(k: nat) with frame = k is skip end\n"
    made = program(text + "routine top(n: nat) is\nfor i from 1 to n do leaf(i) end\nend\n")
    assert run(made, "top", {"n": 5}).peak == {"stack": 15, "heap": 0}  # three times the last i


def test_a_size_means_the_declarations_names_whatever_the_price_calls_its_own() -> None:
    summed = RESOURCES + "tariff a\non declare: hold sum(size*j for j from 1 to 3) stack\nend\n"
    made = program(summed + "routine top(j: nat) is\nvar x: nat size j\nend\n")
    assert run(made, "top", {"j": 5}).peak == {"stack": 30, "heap": 0}  # 5*1 + 5*2 + 5*3


def test_bindings_mean_entry_values_where_a_parameter_is_assigned() -> None:
    text = """
routine r(n: nat) with room = 2*n
  claim spent time = room
is
  n := 0
  spend room time
end
routine s(n: nat) with room = 2*n is
  spend room time
end
"""
    made = program(RESOURCES + text)
    assert [line for line, _ in priced_lines(made.routines["r"])][1:] == [
        "  note n.entry = n", "  n := 0", "  spend 2*n.entry time",
    ]  # fmt: skip
    assert show(made.routines["r"].spec.claims[0].formula) == "time' = time + 2*n"
    assert [line for line, _ in priced_lines(made.routines["s"])][1:] == ["  spend 2*n time"]


def test_a_binding_may_reuse_the_name_of_a_constant() -> None:
    text = "constant room: nat = 100\nroutine r(n: nat) with room = n is spend room time end\n"
    made = program(RESOURCES + text + "routine other() is spend room time end\n")
    assert [line for line, _ in priced_lines(made.routines["r"])][1:] == ["  spend n time"]
    assert [line for line, _ in priced_lines(made.routines["other"])][1:] == ["  spend 100 time"]


def test_constants_with_a_value_stand_for_it_in_any_order() -> None:
    text = "constant page: nat = 2*word\nconstant word: nat = 3 + gap\nconstant gap: nat where gap > 0\n"
    assert lines("spend page time", RESOURCES + text) == ["spend 2*(3 + gap) time"]


# ---------------------------------------------------------------- specifications
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


# ---------------------------------------------------------------- what loops, stages and routines change
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
    assert (made["a"].calls, made["b"].calls, made["c"].calls) == ({"b"}, {"a"}, frozenset())
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
