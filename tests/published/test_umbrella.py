"""The umbrella world: is it raining outside, judged by who carries an umbrella?

Russell, S. and Norvig, P., Artificial Intelligence: A Modern Approach (3rd ed., 2010), chapter
15, figure 15.2 and section 15.2: rain persists with 0.7, an umbrella is carried with 0.9 in rain
and with 0.2 otherwise, and the prior is even.

The numbers are from memory. Their prior is that of day 0, before the first umbrella, so that the
first day starts from prior x transitions; with these numbers that is even again. The section
itself works out one day (0.818) and two days (0.883, for both days); the five days with a day
without umbrella in the middle are the well-known extension of it.
"""

import numpy as np
import pytest

from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.posterior import posterior
from tests.reference import Parameters, Piece
from tests.strategies import contig_of, model_of

UMBRELLA, NONE = 0, 1  # written as A and C; G and T never occur
RAIN = 0
PRIOR = np.array([0.5, 0.5])
TRANSITIONS = np.array([[0.7, 0.3], [0.3, 0.7]])
WORLD = Parameters(
    order=0,
    symmetric=False,
    start_kind="free",
    start=PRIOR @ TRANSITIONS,
    transitions=TRANSITIONS,
    joint=np.array([[0.9, 0.1, 0.0, 0.0], [0.2, 0.8, 0.0, 0.0]]),
)
DAYS = [UMBRELLA, UMBRELLA, NONE, UMBRELLA, UMBRELLA]


def test_smoothed_over_five_days() -> None:
    """P(rain on each day given all five)."""
    found = posterior(model_of(WORLD), contig_of(Piece(DAYS)))
    expected = [0.8673, 0.8204, 0.3075, 0.8204, 0.8673]
    np.testing.assert_allclose(found[:, RAIN], expected, rtol=0, atol=5e-5)


@pytest.mark.parametrize(("days", "rain"), [(1, 0.818), (2, 0.883)])
def test_filtered(days: int, rain: float) -> None:
    """P(rain today given the days up to today)."""
    found = posterior(model_of(WORLD), contig_of(Piece(DAYS[:days])))
    assert found[-1, RAIN] == pytest.approx(rain, abs=5e-4)


def test_smoothed_over_two_days() -> None:
    """The second umbrella makes rain on the first day more probable."""
    found = posterior(model_of(WORLD), contig_of(Piece(DAYS[:2])))
    assert found[0, RAIN] == pytest.approx(0.883, abs=5e-4)


def test_log_likelihood() -> None:
    """log P(five days), as implementations of the example print it."""
    found = log_likelihood(model_of(WORLD), [contig_of(Piece(DAYS))])
    assert found[0] == pytest.approx(-3.3725, abs=5e-5)
