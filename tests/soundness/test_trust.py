"""Nothing is called proved on the word of something that is not: each sheet here once was, or nearly."""

from __future__ import annotations

from workbench.library.loading import load_text
from workbench.program.pricing import price
from workbench.proof.judging import judge


def verdicts(text: str) -> dict[str, str]:
    """Verdicts of claims as routine.label, and of routines by their names."""
    loaded = load_text("trust.ullage", "tariff t; counter time; gauge heap; end\n" + text)
    assert loaded.sheet is not None and not loaded.problems
    report = judge(price(loaded.path, loaded.sheet, loaded.used), seconds=0.5)
    found = {r.routine.name: str(r.verdict) for r in report.routines}
    return found | {f"{r.routine.name}.{c.label}": str(c.verdict) for r in report.routines for c in r.claims}


def test_a_result_must_be_of_the_type_of_what_it_is_assigned_to() -> None:
    found = verdicts("""
routine half() -> real
  claim result = 1/2
is
  result := 1/2
end
routine user()
  claim nonsense: false
is
  var x: int
  x := half()
  stage rest
    claim impossible: x >= 1 or x <= 0
    claim true_enough: x = 1/2
  is
    skip
  end
end
""")
    assert found["half.claim 1"] == "proved"
    assert found["user.nonsense"] == "open"


def test_the_type_of_a_refuted_function_is_not_relied_on() -> None:
    found = verdicts("""
function below(n: nat): nat = n - 5
routine pay(n: nat) is
  var x: nat := below(n)
  spend x time
end
routine caller(n: nat)
  claim grows: spent time >= 0
is
  pay(n)
end
routine noted(n: nat) is
  note x = below(n)
  spend x time
end
""")
    assert found["caller.grows"] == "open"
    assert found["noted"] != "verified"


def test_a_condition_that_a_false_claim_states_word_for_word_leans_on_it() -> None:
    found = verdicts("""
routine value() -> int
  claim wrong: 0 <= result
  claim wronger: 1 <= result
is
  result := -5
end
routine pay() is
  var x: int
  x := value()
  spend x time
end
routine caller()
  claim grows: spent time >= 0
is
  pay()
end
routine digits() -> int
  claim some: lg(result) >= 0
is
  var x: int
  x := value()
  result := x
end
""")
    assert found["value.wrong"] == "refuted"
    assert found["caller.grows"] == "open"
    assert found["digits.some"] != "proved"


def test_what_holds_of_a_state_is_owed_whatever_in_it_changes() -> None:
    found = verdicts("""
state most: nat
state used: nat where used <= most
routine shrink() is
  most := 0
end
""")
    assert found["shrink"] == "refuted"


def test_a_stage_may_have_the_name_of_a_routine_called_in_it() -> None:
    found = verdicts("""
routine ping(n: nat)
  claim cost: spent time = 5
is
  stage pong
    claim spent time = 5
  is
    pong(n)
  end
end
routine pong(n: nat)
  claim cost: spent time = 5
is
  ping(n)
end
""")
    assert found["ping.cost"] == found["pong.cost"] == "open"


def test_a_recursion_without_parameters_has_no_measure() -> None:
    assert verdicts("routine forever()\n  claim nonsense: false\nis\n  forever()\nend\n")["forever.nonsense"] == "open"


def test_a_measure_over_a_gauge_means_its_level_at_the_start_of_the_routine() -> None:
    found = verdicts("""
routine forever()
  given heap = floor(heap)
  given heap >= 0
  claim nonsense: false
  measure heap
is
  acquire 1 heap
  stage inside
    given heap = floor(heap)
    given heap >= 1
    claim nonsense: false
  is
    release 1 heap
    forever()
  end
end
""")
    assert found["forever.nonsense"] == "open"


def test_what_a_routine_calls_must_be_in_order_wherever_the_call_stands() -> None:
    bad = "routine bad() is\n  spend -5 time\nend\nroutine middle() is\n  bad()\nend\n"
    places = ("middle()", "for i from 0 to 3 do bad() end", "stage s is bad() end", "either bad() else skip end")
    for place in places:
        found = verdicts(bad + f"routine top()\n  claim grows: spent time >= 0\nis\n  {place}\nend\n")
        assert found["top.grows"] in ("open", "refuted"), place
