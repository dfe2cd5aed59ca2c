"""E, p, q and the Poisson bound, against their definitions and SciPy."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from hmmseg.evidence.significance import (
    at_or_above,
    significance,
    smallest_q,
    thresholds,
    upper_counts,
)
from tests.reference_regions import plain_significance

SCORES = st.lists(st.integers(-5, 30).map(float), max_size=30)


@given(SCORES, SCORES, st.sampled_from([0.05, 0.5, 2.0]))
def test_as_defined(real: list[float], null: list[float], ratio: float) -> None:
    found = significance(np.array(real), np.array(null), ratio)
    expected = plain_significance(real, null, ratio)
    for i, one in enumerate(expected):
        assert [column[i] for column in found] == pytest.approx(one, rel=1e-12)


def test_by_hand() -> None:
    """Worked out on paper: two real regions above all nulls, one among them."""
    found = significance(np.array([9.0, 7.0, 3.0]), np.array([5.0, 3.0, 1.0]), 0.1)
    assert found.expected == pytest.approx([0.1, 0.1, 0.3])
    # 0.1 / 1 for the best alone, but 0.1 / 2 if both are kept; 0.3 / 3 for all three.
    assert found.q_value == pytest.approx([0.05, 0.05, 0.1])


@given(SCORES.filter(len), SCORES)
def test_higher_scores_are_never_less_sure(real: list[float], null: list[float]) -> None:
    found = significance(np.sort(real), np.array(null), 0.1)
    for column in found:
        assert (np.diff(column) <= 1e-15).all()
        assert (column >= 0).all()
    assert (found.q_value <= 1).all()
    assert found.q_value.min() >= smallest_q(len(real), 0.1) - 1e-15


def test_p_of_rare_events_is_their_number() -> None:
    """Karlin & Altschul 1990: p = 1 - exp(-E), nearly E where E is small."""
    found = significance(np.array([1.0]), np.array([]), 1e-4)
    assert found.p_value[0] == pytest.approx(-math.expm1(-1e-4), rel=1e-10)


def test_nothing_to_judge() -> None:
    found = significance(np.array([]), np.array([1.0]), 0.1)
    assert [len(column) for column in found] == [0, 0, 0]
    assert smallest_q(0, 0.1) == 1


def test_q_promises_what_it_says() -> None:
    """Barber & Candès 2015: with as many nulls as reals the share of false ones is below q.

    Scores of real regions are those of nulls and, for half of them, something on top; over many
    draws the share of false ones among those kept must not exceed the level.
    """
    random = np.random.default_rng(1)
    shares = []
    for _ in range(400):
        false, null = random.exponential(size=30), random.exponential(size=300)
        real = np.concatenate((false, random.exponential(size=30) + 3))
        kept = significance(real, null, 0.1).q_value <= 0.2
        shares.append(kept[:30].sum() / max(kept.sum(), 1))
    mean, error = np.mean(shares), np.std(shares) / 20
    assert 0.1 < mean < 0.2 + 2 * error


def test_bound_is_that_of_garwood() -> None:
    """Against SciPy's quantiles of chi-square: half of that at 0.95 with 2 (n + 1) degrees."""
    counts = np.array([0, 1, 2, 3, 10, 47, 300, 4_000, 60_000, 1, 0])
    assert upper_counts(counts) == pytest.approx(
        stats.chi2.ppf(0.95, 2 * (counts + 1)) / 2, rel=1e-8
    )


def test_bound_of_nothing_is_the_rule_of_three() -> None:
    """With no event at all the 95 % bound is -ln 0.05, about 3."""
    assert upper_counts(np.array([0]))[0] == pytest.approx(-math.log(0.05), rel=1e-9)
    assert len(upper_counts(np.empty(0, np.int64))) == 0


@given(SCORES, SCORES)
def test_thresholds_cover_all_scores_and_stay_few(real: list[float], null: list[float]) -> None:
    at = thresholds(np.array(real), np.array(null))
    assert (np.diff(at) > 0).all()
    for scores in filter(len, (real, null)):
        assert at[0] <= min(scores)
        assert max(scores) in at
    many = np.arange(100_000) / 1000
    assert len(thresholds(many, many)) < 200


def test_counts_include_the_level_itself() -> None:
    assert at_or_above(np.array([1.0, 2.0, 2.0, 3.0]), np.array([2.0, 2.5])).tolist() == [3, 1]
