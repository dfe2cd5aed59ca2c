"""Do q-values keep what they promise: without regions, with regions, and where GC drifts?

Smaller versions are in ``tests/evidence/test_calibration.py``.
"""

import numpy as np
import pytest

from hmmseg.evidence.resolution import formula
from tests.evidence.judging import (
    CASES,
    MEGA,
    false_by_null,
    kept_without_regions,
    made_for,
    rates_of_trained,
)

pytestmark = pytest.mark.slow


def test_without_regions_hardly_any_is_kept() -> None:
    """1 Mb, model and nulls trained alike: at most 16 of 200 keep any region at q <= 0.05.

    By theory one in twenty does, see DEVELOPERS.md.
    """
    some = sum(kept_without_regions(seed, MEGA, 20, "drift") > 0 for seed in range(1, 201))
    print(f"{some} of 200 keep something")
    assert some <= 16


@pytest.mark.parametrize(("count", "size", "contrast"), CASES)
def test_planted_regions_are_kept_and_few_others(count: int, size: int, contrast: float) -> None:
    limits = formula(made_for(count, size, contrast), 1)
    assert size >= limits.l95
    rates = np.array([rates_of_trained(count, size, contrast, seed) for seed in range(1, 21)])
    false, found = rates.mean(axis=0)
    print(f"{size} bases, {contrast} more GC: {false:.3f} false, {found:.3f} found")
    assert false <= 0.12
    assert found >= 0.8


@pytest.mark.parametrize(("count", "size", "contrast"), CASES)
def test_where_gc_drifts_the_drift_null_holds_and_the_chain_does_not(
    count: int, size: int, contrast: float
) -> None:
    """Regions of 400 bases and more are so clear that the chain, too, keeps few others."""
    false = false_by_null(count, size, contrast, range(1, 21))
    print(f"{size} bases where GC drifts: {false}")
    assert false["drift"] <= 0.12
    if size < 200:
        assert false["chain"] > 0.12
