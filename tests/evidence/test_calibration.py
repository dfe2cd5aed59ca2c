"""Small versions of ``tests/slow/test_calibration.py``: fewer seeds, less null sequence."""

import numpy as np

from tests.evidence.judging import (
    CASES,
    MEGA,
    false_by_null,
    judged,
    kept_without_regions,
    made_for,
    plant,
)


def test_without_regions_hardly_any_is_kept() -> None:
    """One in twenty would keep something; three of six would have a chance of 1 in 450."""
    kept = [kept_without_regions(seed, 50_000, 20, "drift") for seed in range(1, 7)]
    assert sum(count > 0 for count in kept) < 3


def test_planted_regions_are_kept_and_few_others() -> None:
    case = CASES[1]
    sequence = plant(1, *case)
    table = judged(sequence.contig, made_for(*case), None, "drift", 4 * MEGA, 1, "posterior")
    false, found = sequence.rates(table, 0.1)
    assert false <= 0.2
    assert found >= 0.8


def test_where_gc_drifts_the_chain_keeps_more_false_ones() -> None:
    false = false_by_null(*CASES[0], range(1, 4))
    assert false["chain"] > 0.12
    assert false["drift"] < false["chain"] / 2


def test_drift_null_does_not_swallow_regions() -> None:
    """Dense regions, three tenths of the sequence, are all kept by the drift null."""
    case = (200, 1500, 0.2)
    sequence = plant(2, *case)
    table = judged(sequence.contig, made_for(*case), None, "drift", 2 * MEGA, 1)
    assert sequence.rates(table, 0.05)[1] > 0.95
    assert np.isfinite(table["q_value"]).all()
