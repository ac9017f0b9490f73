"""A small, fixed part of the hunt; `hunt.py` is the long one."""

from __future__ import annotations

from tests.soundness.hunt import Tally, hunt


def test_no_run_breaks_a_proved_claim() -> None:
    total = Tally()
    for seed in range(12):
        total.add(hunt(seed, seconds=0.2))
    assert total.violations == []
    assert total.verdicts["proved"] >= 30
    assert total.verdicts["refuted"] >= 20
