"""The plain twins check one another: three engines, written apart, must agree."""

import itertools

import numpy as np
import pytest

from tests.fifty_digits import log_closed_paths, stationary
from tests.recursions import (
    decode,
    exact_log_likelihood,
    exact_posterior,
    log_counts,
    log_likelihood,
    log_posterior,
    viterbi,
)
from tests.reference import (
    MISSING,
    Piece,
    brute_best_paths,
    brute_counts,
    brute_log_likelihood,
    brute_posterior,
    complement_strand,
    emission,
    fixed_point_score,
    known_contexts,
)
from tests.strategies import random_bases, random_parameters

CASES = list(itertools.product([1, 2, 3], [0, 1, 3], [False, True]))


@pytest.mark.parametrize(("states", "order", "closed"), CASES)
def test_engines_agree(states: int, order: int, closed: bool) -> None:
    """Enumeration, log space and fifty digits give one answer."""
    rng = np.random.default_rng([states, order, closed])
    p = random_parameters(rng, states, order)
    piece = Piece(random_bases(rng, 6, missing=0.2), closed)
    expected = brute_log_likelihood(p, piece)
    assert log_likelihood(p, piece) == pytest.approx(expected, rel=1e-12)
    assert exact_log_likelihood(p, piece) == pytest.approx(expected, rel=1e-12)
    np.testing.assert_allclose(log_posterior(p, piece), brute_posterior(p, piece), atol=1e-12)
    np.testing.assert_allclose(exact_posterior(p, piece), brute_posterior(p, piece), atol=1e-12)

    brute, recursive = brute_counts(p, piece), log_counts(p, piece)
    np.testing.assert_allclose(recursive.start, brute.start, atol=1e-12)
    np.testing.assert_allclose(recursive.transitions, brute.transitions, atol=1e-12)
    assert recursive.emissions.keys() == brute.emissions.keys()
    for context, table in brute.emissions.items():
        np.testing.assert_allclose(recursive.emissions[context], table, atol=1e-12)

    score, winners = brute_best_paths(p, piece)
    assert viterbi(p, piece) == (score, winners[0])
    assert fixed_point_score(p, piece, winners[0]) == score


@pytest.mark.parametrize("closed", [False, True])
def test_ties_go_to_the_path_first_in_order_from_the_end(closed: bool) -> None:
    """States that cannot be told apart make every path a best path."""
    p = random_parameters(np.random.default_rng(1), 1, 0)
    p = p._replace(
        start=np.full(2, 0.5), transitions=np.full((2, 2), 0.5), joint=np.tile(p.joint, (2, 1))
    )
    piece = Piece([0, 1, 2], closed)
    score, winners = brute_best_paths(p, piece)
    assert len(winners) == 2**3
    assert winners[1] == (1, 0, 0)
    assert viterbi(p, piece) == (score, (0, 0, 0))
    assert decode(p, piece) == (score, (0, 0, 0))


def test_contexts_stop_at_missing_bases_and_at_the_start() -> None:
    """A circle has no start; a missing base ends what is known."""
    bases = [0, 1, MISSING, 2, 3]
    assert known_contexts(bases, 2, closed=False) == [(), (0,), (0, 1), (), (2,)]
    assert known_contexts(bases, 2, closed=True) == [(2, 3), (3, 0), (0, 1), (), (2,)]


def test_short_contexts_use_the_marginal() -> None:
    """The table of a shorter context sums over the bases that are not known."""
    joint = np.zeros((4, 4))
    joint[0] = [0.1, 0.2, 0.0, 0.0]
    joint[3] = [0.3, 0.0, 0.0, 0.4]
    row = joint.ravel()
    assert emission(row, (0,), 1) == pytest.approx(0.2 / 0.3)
    assert emission(row, (), 0) == pytest.approx(0.4)
    assert emission(row, (2,), 0) == pytest.approx(0.4)  # nothing ever follows G
    assert emission(row, (0,), MISSING) == 1


def test_other_strand() -> None:
    """The other strand is read backwards, in complements."""
    assert list(complement_strand(Piece([0, 1, MISSING, 3])).bases) == [0, MISSING, 2, 3]


def test_stationary_and_closed_paths() -> None:
    """Two states, where both have a closed form."""
    transitions = np.array([[0.9, 0.1], [0.3, 0.7]])
    np.testing.assert_allclose(stationary(transitions), [0.75, 0.25], rtol=1e-15)
    # The eigenvalues are 1 and 0.6.
    assert log_closed_paths(transitions, 5) == pytest.approx(np.log(1 + 0.6**5), rel=1e-14)
