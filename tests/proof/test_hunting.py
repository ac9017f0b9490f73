"""A short hunt with fixed seeds; the long one is `python tests/proof/hunting.py`."""

from __future__ import annotations

from tests.proof.hunting import Tally, compared, forged, searched
from tests.proof.obligations import functions, laws, true_ones
from workbench.algebra.normal import Algebra
from workbench.proof.kernel import NONE, Proved
from workbench.proof.search import Search


def test_nothing_that_the_search_proves_is_falsified() -> None:
    tally = Tally()
    for seed in range(120):
        tally.add(searched(seed, 0.03))
    assert tally.wrong == []
    assert tally.counts["proved"] > 20


def test_forged_certificates_prove_nothing_false() -> None:
    tally = Tally()
    for seed in range(18):
        tally.add(forged(seed, 0.5, 8))
    assert tally.wrong == []
    assert tally.counts["refused"] > 80
    assert tally.counts["passed"] > 8


def test_the_hunt_would_notice_a_fact_that_is_used_and_not_counted() -> None:
    o = next(o for o in true_ones() if o.name == "products/monotone")
    proof = Search(Algebra(), laws(), functions()).prove(o.facts, o.goal).proved
    assert proof is not None and compared(proof) == ""
    forgetful = object.__new__(Proved)
    forgetful.facts, forgetful.goal, forgetful.used = proof.facts, proof.goal, NONE
    assert "fails for" in compared(forgetful)
