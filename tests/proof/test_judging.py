"""Verdicts: what holds what up, and what lends nothing to anything."""

from __future__ import annotations

from workbench.library.checking import check_loaded
from workbench.library.loading import load_text
from workbench.proof.report import ClaimReport, RoutineReport, SheetReport

TARIFF = "tariff t\n  counter time\n  gauge stack over time\nend\n"


def judged(text: str) -> SheetReport:
    report = check_loaded(load_text("sheet.ullage", TARIFF + text), seconds=1)
    assert report.verdict != "unreadable", [p.message for p in report.problems]
    return report


def routine(report: SheetReport, name: str) -> RoutineReport:
    return next(r for r in report.routines if r.routine.name == name)


def claim(report: SheetReport, name: str, label: str) -> ClaimReport:
    return next(c for c in routine(report, name).claims if c.claim.label == label)


POLL = """\
routine poll(n: nat)
  claim hopeful: spent time <= n
  claim nearly: spent time <= n + 1
  claim sound: spent time <= 2*n
  measure n
is
  if n > 0 then
    poll(n - 1)
    spend 2 time
  end
end
"""


def test_a_false_claim_lends_no_proof_to_its_siblings() -> None:
    report = judged(POLL)
    assert claim(report, "poll", "hopeful").verdict == "refuted"
    assert claim(report, "poll", "nearly").verdict == "refuted"
    assert claim(report, "poll", "sound").verdict == "proved"


def test_a_caller_knows_no_more_than_its_callee_says() -> None:
    report = judged(
        "routine scan(n: nat)\n  claim most: spent time <= 4*n\nis\n  spend 3*n time\nend\n"
        "routine watch(n: nat)\n  claim exact: spent time = 3*n\n  claim most: spent time <= 4*n\nis\n  scan(n)\nend\n"
    )
    exact = claim(report, "watch", "exact")
    assert exact.verdict == "open"
    assert any("too weak" in d.why for d in exact.obligations)
    assert claim(report, "watch", "most").verdict == "proved"


def test_a_claim_that_leans_on_a_fallen_one_is_open_and_says_so() -> None:
    report = judged(
        "routine scan(n: nat)\n  claim most: spent time <= 2*n\nis\n  spend 3*n time\nend\n"
        "routine watch(n: nat)\n  claim most: spent time <= 3*n\nis\n  scan(n)\n  spend n time\nend\n"
    )
    assert claim(report, "scan", "most").verdict == "refuted"
    assert claim(report, "watch", "most").verdict in ("open", "refuted")
    assert routine(report, "watch").verdict != "verified"


def test_recursion_without_a_falling_measure_proves_nothing() -> None:
    report = judged("routine hail(n: nat)\n  claim c: spent time = 7\nis\n  hail(n)\nend\n")
    assert claim(report, "hail", "c").verdict == "open"
    assert any(d.obligation.kind == "measure" and d.verdict != "proved" for d in routine(report, "hail").obligations)


def test_a_measure_is_found_among_sums_and_differences() -> None:
    report = judged(
        "routine meet(a: nat, b: nat)\n  claim c: spent time <= a + b\nis\n"
        "  if a > 0 and b > 0 then\n    spend 1 time\n"
        "    either meet(a - 1, b) else meet(a, b - 1) end\n  end\nend\n"
        "routine near(n: nat)\n  claim c: spent time = n\nis\n  var i: nat := 0\n  while i < n\n    given i <= n\n"
        "    claim rest: spent time = n - i\n  do\n    i := i + 1\n    spend 1 time\n  end\nend\n"
    )
    assert report.verdict == "verified"


def test_mutual_recursion_compares_measures_with_each_other() -> None:
    text = (
        "routine ping(n: nat)\n  claim c: spent time = n\n  measure {}\nis\n  if n > 0 then\n    spend 1 time\n"
        "    pong(n - 1)\n  end\nend\nroutine pong(n: nat)\n  claim c: spent time = n\n  measure {}\nis\n"
        "  if n > 0 then\n    spend 1 time\n    ping(n - 1)\n  end\nend\n"
    )
    assert judged(text.format("n", "n")).verdict == "verified"
    report = judged(text.format("2*n", "n"))
    assert claim(report, "ping", "c").verdict == "open"


def test_a_broken_side_condition_leaves_claims_open() -> None:
    report = judged(
        "routine down(n: nat)\n  claim c: spent time = 1\nis\n  var x: nat := n - 1\n  spend 1 time\nend\n"
    )
    assert claim(report, "down", "c").verdict == "open"
    (side,) = routine(report, "down").obligations
    assert side.obligation.kind == "range" and side.verdict == "refuted"
    assert side.witness is not None and side.witness["n"] == 0


def test_a_given_that_no_values_meet_is_warned_of() -> None:
    report = judged("routine never(n: nat)\n  given n < 0\n  claim c: spent time = 5\nis\n  skip\nend\n")
    assert claim(report, "never", "c").verdict == "proved"
    assert routine(report, "never").warnings


def test_a_path_that_nothing_takes_is_proved_and_marked() -> None:
    report = judged(
        "routine r(n: nat)\n  claim c: spent time = 0\nis\n  if n < 0 then\n    spend 9 time\n  end\nend\n"
    )
    found = claim(report, "r", "c")
    assert found.verdict == "proved"
    assert [d.unreachable for d in found.obligations] == [True, False]


def test_a_false_law_is_not_used_and_is_named() -> None:
    report = judged(
        "law wrong(n: nat): 2^n >= n^2 by induction on n\n"
        "routine r(n: nat)\n  claim c: spent time >= n^2\n    using wrong(n)\nis\n  spend 2^n time\nend\n"
    )
    assert report.mathematics[0].verdict in ("open", "refuted")
    assert claim(report, "r", "c").verdict != "proved"


def test_a_law_may_not_hold_itself_up() -> None:
    report = judged(
        "function f(n: nat): nat = n + 1\nlaw a(n: nat): f(n) = n\nlaw b(n: nat): f(n) = n\n"
        "routine r(n: nat)\n  claim c: spent time = f(n) - n\nis\n  skip\nend\n"
    )
    assert [m.verdict for m in report.mathematics if m.kind == "law"] == ["refuted", "refuted"]
    assert claim(report, "r", "c").verdict != "proved"


def test_a_function_without_a_solution_lends_nothing() -> None:
    report = judged(
        "function load(n: nat): nat = load(n) + 1\n"
        "routine r(n: nat)\n  claim c: spent time <= load(n) - load(n)\nis\n  spend 1 time\nend\n"
    )
    assert report.mathematics[0].verdict != "proved"
    assert claim(report, "r", "c").verdict != "proved"


def test_entry_levels_are_anything() -> None:
    report = judged(
        "routine r(n: nat)\n  claim own: peak stack = n\n  claim absolute: stack.peak' = n\nis\n"
        "  hold n stack do\n    spend 1 time\n  end\nend\n"
    )
    assert claim(report, "r", "own").verdict == "proved"
    assert claim(report, "r", "absolute").verdict == "refuted"


def test_many_ifs_in_a_row_are_judged_at_once() -> None:
    import time

    body = "".join(
        f"  if a mod {i + 2} = 0 then\n    hold {i + 1} stack do spend 1 + n time end\n"
        "  else\n    spend 2 time\n  end\n"
        for i in range(12)
    )
    began = time.process_time()
    report = judged(
        "routine many(n: nat, a: int)\n  claim most: spent time <= 12*n + 24\n  claim back: net stack = 0\n"
        f"  claim top: peak stack <= 12\nis\n{body}end\n"
    )
    assert report.verdict == "verified"
    assert time.process_time() - began < 3  # a third of a second where nothing else runs
