"""Every event at its price, against priced programs written out by hand."""

from __future__ import annotations

from textwrap import dedent

import pytest

from tests.program.sheets import RESOURCES, body, lines, printed, program
from workbench.algebra.formulas import show
from workbench.program.priced import Hold, Spend
from workbench.program.running import run

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
    assert printed(made.routines["r"]) == [
        "note n.entry = n", "n := 0", "spend 2*n.entry time",
    ]  # fmt: skip
    assert show(made.routines["r"].spec.claims[0].formula) == "time' = time + 2*n"
    assert printed(made.routines["s"]) == ["spend 2*n time"]


def test_a_binding_may_reuse_the_name_of_a_constant() -> None:
    text = "constant room: nat = 100\nroutine r(n: nat) with room = n is spend room time end\n"
    made = program(RESOURCES + text + "routine other() is spend room time end\n")
    assert printed(made.routines["r"]) == ["spend n time"]
    assert printed(made.routines["other"]) == ["spend 100 time"]


def test_constants_with_a_value_stand_for_it_in_any_order() -> None:
    text = "constant page: nat = 2*word\nconstant word: nat = 3 + gap\nconstant gap: nat where gap > 0\n"
    assert lines("spend page time", RESOURCES + text) == ["spend 2*(3 + gap) time"]
