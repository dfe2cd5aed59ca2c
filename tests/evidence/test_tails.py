"""Tails beside SciPy's, and adjusted p-values beside a worked example."""

from itertools import pairwise

import numpy as np
import pytest
from scipy.stats import chi2, gamma, norm

from hmmseg.evidence.tails import beyond, chi_square_tail, holm, normal_tail


@pytest.mark.parametrize("z", [0.0, 1e-3, 0.5, 1.96, 2.999, 3.0, 3.5, 6.0, 12.0, 30.0])
def test_normal_tail(z: float) -> None:
    assert normal_tail(z) == pytest.approx(2 * norm.sf(z), rel=1e-11)


@pytest.mark.parametrize("freedom", [1, 2, 3, 4, 7, 10, 25, 40])
def test_chi_square_tail(freedom: int) -> None:
    for value in (0.0, 0.01, 1.0, 3.84, 17.3, 60.0, 200.0):
        assert chi_square_tail(value, freedom) == pytest.approx(
            chi2.sf(value, freedom), rel=1e-10, abs=1e-300
        )


def test_chance_beyond_a_sample() -> None:
    """A gamma sample's tail is nearly exponential; within a factor of two at one in 10,000."""
    sample = gamma.rvs(3, size=1000, random_state=1)
    for chance, factor in ((0.5, 1.1), (0.1, 1.25), (0.01, 1.5), (1e-4, 2.0)):
        found = beyond(sample, float(gamma.isf(chance, 3)))
        assert chance / factor < found < chance * factor
    assert beyond(sample, -1.0) == 1.0
    falling = [beyond(sample, value) for value in np.linspace(0, 30, 200)]
    assert all(a >= b for a, b in pairwise(falling))


def test_sample_of_equal_values_has_no_tail() -> None:
    assert beyond(np.ones(99), 2.0) == 0.01
    assert beyond(np.ones(99), 1.0) == 1.0


def test_holm_on_a_worked_example() -> None:
    """By hand: 4 x 0.005, 3 x 0.01, 2 x 0.03, and not below the one before for 0.04."""
    assert holm([0.01, 0.04, 0.03, 0.005]) == pytest.approx([0.03, 0.06, 0.06, 0.02])
    assert holm([0.5, 0.9]) == [1.0, 1.0]
    assert holm([]) == []
