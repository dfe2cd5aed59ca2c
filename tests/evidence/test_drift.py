"""Drift follows what is slow, passes over what is short, and is none where there is none."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from hmmseg.evidence.drift import SPAN, WINDOW, RecordWindows, fit_drift, running_median
from hmmseg.sequence.contigs import Contig


def bases_of(gc: NDArray[np.float64], seed: int = 1) -> NDArray[np.uint8]:
    random = np.random.default_rng(seed)
    strong = random.random(len(gc)) < gc
    return np.where(strong, 1 + random.integers(0, 2, len(gc)), 0).astype(np.uint8)


def windows_of(bases: NDArray[np.uint8], circular: bool = False, start: int = 0) -> RecordWindows:
    windows = RecordWindows(len(bases), circular)
    turned = np.roll(bases, -start)
    windows.add(Contig("r", start, turned, circular and start == 0, len(bases)))
    return windows


@given(
    st.lists(st.floats(0, 1) | st.just(np.inf), min_size=1, max_size=30),
    st.integers(1, 5),
    st.booleans(),
)
def test_median_is_the_median(values: list[float], side: int, circular: bool) -> None:
    found = running_median(np.array(values), side, circular)
    round_it = circular and len(values) > 2 * side
    for i, one in enumerate(found):
        around = range(i - side, i + side + 1)
        places = [k % len(values) if round_it else k for k in around]
        known = [values[k] for k in places if 0 <= k < len(values) and np.isfinite(values[k])]
        assert one == pytest.approx(np.median(known) if known else 0.0)


@pytest.mark.parametrize("start", [0, 1, 499, 12_345])
def test_windows_count_bases_in_their_places(start: int) -> None:
    random = np.random.default_rng(2)
    bases = random.integers(0, 5, 20_260).astype(np.uint8)
    found = windows_of(bases, circular=True, start=start)
    for i in range(-(-len(bases) // WINDOW)):
        own = bases[i * WINDOW : (i + 1) * WINDOW]
        assert found.known[i] == (own < 4).sum()
        assert found.strong[i] == ((own == 1) | (own == 2)).sum()


def test_homogeneous_sequence_has_next_to_no_drift() -> None:
    """What is left of the noise of a median over 20 kb, 0.4 points of GC, is less than half."""
    spreads = [
        fit_drift([windows_of(bases_of(np.full(1_000_000, 0.4), seed))]).spread for seed in range(8)
    ]
    assert np.mean(spreads) < 0.002


def test_drift_is_followed() -> None:
    gc = 0.4 + 0.08 * np.sin(np.arange(1_000_000) / 50_000)
    found = fit_drift([windows_of(bases_of(gc))])
    true = gc[WINDOW // 2 :: WINDOW]
    assert np.abs(found.levels[0] - true).max() < 0.025
    assert found.spread == pytest.approx(true.std(), rel=0.05)
    assert found.mean == pytest.approx(true.mean(), abs=0.003)
    assert found.spans == pytest.approx(1_000_000 / SPAN)


@pytest.mark.parametrize("place", [0, 3_000, 400_000])
def test_regions_shorter_than_half_a_span_do_not_become_drift(place: int) -> None:
    """Neither far from the ends nor at them; a stretch of 40 kb does."""
    gc = np.full(1_000_000, 0.4)
    gc[place : place + 4_000] = 0.7
    gc[700_000:740_000] = 0.55
    levels = fit_drift([windows_of(bases_of(gc))]).levels[0]
    inside = levels[place // WINDOW + 1 : (place + 4_000) // WINDOW]
    assert np.abs(inside - 0.4).max() < 0.02
    assert levels[720_000 // WINDOW] > 0.53


def test_levels_are_those_of_their_records() -> None:
    """A record of another composition keeps it; a short one is drawn to the mean; gaps count not.

    The noise in the level of one window is 2.7 points.
    """
    parts = [bases_of(np.full(300_000, g), 3) for g in (0.4, 0.4, 0.4, 0.6)]
    parts[0][50_000:90_000] = 4
    parts.append(bases_of(np.full(400, 0.7), 3))
    found = fit_drift([windows_of(one) for one in parts])
    outside = np.r_[0:90, 190:600]
    assert np.abs(found.levels[0][outside] - 0.4).max() < 0.02
    assert np.abs(found.levels[3] - 0.6).max() < 0.02
    assert found.levels[4].shape == (1,)
    assert found.mean < found.levels[4][0] < parts[4].astype(bool).mean()


def test_nothing_known_has_no_drift() -> None:
    found = fit_drift([windows_of(np.full(3_000, 4, np.uint8))])
    assert (found.spread, found.spans) == (0.0, 0.0)
    assert np.isfinite(found.levels[0]).all()
