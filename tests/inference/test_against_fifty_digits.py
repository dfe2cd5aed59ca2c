"""Likelihood and posteriors against 50-digit arithmetic, and models that defy floats."""

import numpy as np
import pytest

from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.posterior import posterior
from tests.fifty_digits import stationary
from tests.recursions import exact_log_likelihood, exact_posterior, over_strands
from tests.recursions import posterior_over_strands as averaged
from tests.reference import MISSING, Parameters, Piece
from tests.strategies import (
    Texture,
    contig_of,
    model_of,
    random_bases,
    random_parameters,
    segmented_bases,
)

LINEAR = [
    (1, 6, "stationary"),
    (2, 0, "symmetric"),
    (2, 5, "free"),
    (3, 4, "stationary"),
    (4, 3, "free"),
    (5, 2, "stationary"),
    (6, 1, "symmetric"),
]
# Every state at the cut costs a pass of its own, so that circles of many states are shorter.
CLOSED = [(1, 2, "free"), (2, 6, "stationary"), (3, 1, "symmetric")]
SMALL_CLOSED = [(4, 0, "free"), (5, 3, "symmetric"), (6, 0, "stationary")]
CASES = [
    *((*case, False, 2000) for case in LINEAR),
    *((*case, True, 2000) for case in CLOSED),
    *((*case, True, 400) for case in SMALL_CLOSED),
]


@pytest.mark.parametrize(("states", "order", "kind", "closed", "length"), CASES)
def test_two_thousand_positions(
    states: int, order: int, kind: str, closed: bool, length: int
) -> None:
    """Order and number of states as they come, bases missing, linear and closed."""
    rng = np.random.default_rng([states, order, closed])
    p = random_parameters(rng, states, order, kind, Texture(0.7, 20.0))
    piece = Piece(segmented_bases(rng, length, missing=0.03), closed)
    model, contig = model_of(p), contig_of(piece)
    expected = over_strands(p, piece, exact_log_likelihood)
    assert log_likelihood(model, [contig])[0] == pytest.approx(expected, rel=1e-12)
    np.testing.assert_allclose(
        posterior(model, contig), averaged(p, piece, exact_posterior), rtol=0, atol=1e-10
    )


@pytest.mark.parametrize("stay", [0.0, 3.0, 1e6])
def test_stationary_start(stay: float) -> None:
    """The distribution that the transitions keep, also where they hardly ever move."""
    rng = np.random.default_rng(int(stay))
    for states in range(1, 9):
        p = random_parameters(rng, states, 0, "stationary", Texture(0.5, stay))
        np.testing.assert_allclose(
            model_of(p).start_probabilities, stationary(p.transitions), rtol=1e-12
        )


def _extreme(
    transitions: list[list[float]], joint: list[list[float]], start: list[float]
) -> Parameters:
    return Parameters(0, False, "free", np.array(start), np.array(transitions), np.array(joint))


TINY = 1e-300
EXTREME = {
    # Whoever is in state 0 must leave it at a C, at a price of 1e-300 each time.
    "paid transitions": _extreme(
        [[1.0, TINY], [TINY, 1.0]], [[0.5, 0.0, 0.5, 0.0], [0.0, 0.5, 0.5, 0.0]], [0.5, 0.5]
    ),
    # One way only: the moment of the step is what matters.
    "no return": _extreme(
        [[1.0, TINY], [0.0, 1.0]],
        [[0.4, 0.1, 0.4, 0.1], [0.1, 0.4, 0.1, 0.4]],
        [1.0, 0.0],
    ),
    # The state that explains the sequence can hardly be reached from the start.
    "hidden start": _extreme(
        [[1.0, 0.0], [0.5, 0.5]], [[1e-200, 0.4, 0.6, 0.0], [0.3, 0.2, 0.5, 0.0]], [TINY, 1.0]
    ),
    # Three stages that take turns: periodic, most entries zero.
    "in turn": _extreme(
        [[0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [1.0, 0.0, 0.0]],
        [[0.7, 0.1, 0.1, 0.1], [0.1, 0.7, 0.1, 0.1], [0.1, 0.1, 0.7, 0.1]],
        [1.0, 0.0, 0.0],
    ),
}


@pytest.mark.parametrize("name", EXTREME)
@pytest.mark.parametrize("closed", [False, True])
def test_extreme_models(name: str, closed: bool) -> None:
    """Transitions down to 1e-300 and exact zeros neither overflow nor lose the answer."""
    p = EXTREME[name]
    rng = np.random.default_rng(7)
    pieces = [
        Piece([0] * 120 + [1] * 60 + [2] * 20 + [0] * 63 + [MISSING] * 7 + [1] * 30, closed),
        Piece([0, 1] * 150, closed),
        Piece(rng.integers(0, 3, size=300, dtype=np.uint8), closed),
        Piece([2] * 300, closed),
    ]
    model = model_of(p)
    for piece in pieces:
        contig = contig_of(piece)
        found = log_likelihood(model, [contig])[0]
        assert found == pytest.approx(exact_log_likelihood(p, piece), rel=1e-12)
        np.testing.assert_allclose(
            posterior(model, contig), exact_posterior(p, piece), rtol=0, atol=1e-10
        )


def test_one_letter_for_long() -> None:
    """A million times the same base: the closed form is a power of one matrix."""
    rng = np.random.default_rng(3)
    p = random_parameters(rng, 1, 0)
    length = 1_000_000
    contig = contig_of(Piece(np.zeros(length, dtype=np.uint8)))
    expected = length * np.log(p.joint[0, 0])
    assert log_likelihood(model_of(p), [contig])[0] == pytest.approx(expected, rel=1e-12)


def test_only_missing_bases() -> None:
    """A sequence without a known base says nothing: P = 1, and the states as they start."""
    rng = np.random.default_rng(4)
    p = random_parameters(rng, 3, 2, "stationary")
    contig = contig_of(Piece([MISSING] * 200))
    assert log_likelihood(model_of(p), [contig])[0] == pytest.approx(0.0, abs=1e-12)
    np.testing.assert_allclose(
        posterior(model_of(p), contig), np.tile(p.start, (200, 1)), atol=1e-12
    )


def test_random_bases_without_missing_ones() -> None:
    """The plain case once more, in many short contigs in one call."""
    rng = np.random.default_rng(5)
    p = random_parameters(rng, 4, 1, "symmetric")
    pieces = [Piece(random_bases(rng, int(length))) for length in rng.integers(1, 80, size=40)]
    found = log_likelihood(model_of(p), [contig_of(piece) for piece in pieces])
    expected = [over_strands(p, piece, exact_log_likelihood) for piece in pieces]
    np.testing.assert_allclose(found, expected, rtol=1e-12)
