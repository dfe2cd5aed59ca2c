"""Likelihood, posteriors and best paths against hmmlearn, at order 0 without missing bases."""

import itertools

import numpy as np
import pytest

from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.path import best_path, path_log_probability
from hmmseg.inference.posterior import posterior
from tests.peer import column, peer_of
from tests.recursions import viterbi
from tests.reference import Parameters, Piece, fixed_point_score
from tests.strategies import (
    Texture,
    contig_of,
    model_of,
    random_bases,
    random_parameters,
    segmented_bases,
)

CASES = list(
    itertools.product(
        range(1, 7), ["free", "stationary", "symmetric"], [Texture(), Texture(0.5, 50)]
    )
)


def _draw(states: int, kind: str, texture: Texture) -> tuple[Parameters, np.random.Generator]:
    rng = np.random.default_rng([states, len(kind), int(texture.stay)])
    return random_parameters(rng, states, 0, kind, texture), rng


@pytest.mark.parametrize(("states", "kind", "texture"), CASES)
def test_log_likelihood(states: int, kind: str, texture: Texture) -> None:
    """Of contigs from one base to thousands, in one call."""
    p, rng = _draw(states, kind, texture)
    sequences = [random_bases(rng, length) for length in (1, 2, 3, 63, 64, 65, 500)]
    sequences.append(segmented_bases(rng, 5000))
    found = log_likelihood(model_of(p), [contig_of(Piece(bases)) for bases in sequences])
    expected = [peer_of(p).score(column([bases])[0]) for bases in sequences]
    assert found.dtype == np.float64
    np.testing.assert_allclose(found, expected, rtol=1e-9)


@pytest.mark.parametrize(("states", "kind", "texture"), CASES)
def test_posterior(states: int, kind: str, texture: Texture) -> None:
    """Every position, every state."""
    p, rng = _draw(states, kind, texture)
    for bases in (random_bases(rng, 1), random_bases(rng, 66), segmented_bases(rng, 3000)):
        found = posterior(model_of(p), contig_of(Piece(bases)))
        expected = peer_of(p).predict_proba(column([bases])[0])
        assert found.shape == (len(bases), states)
        np.testing.assert_allclose(found, expected, rtol=0, atol=1e-8)


@pytest.mark.parametrize(("states", "kind", "texture"), CASES)
def test_best_path(states: int, kind: str, texture: Texture) -> None:
    """The same states, and the same probability of the sequence with them."""
    p, rng = _draw(states, kind, texture)
    model = model_of(p)
    for bases in (random_bases(rng, 1), random_bases(rng, 66), segmented_bases(rng, 3000)):
        contig = contig_of(Piece(bases))
        found = best_path(model, contig)
        log_probability, expected = peer_of(p).decode(column([bases])[0])
        assert path_log_probability(model, contig, found) == pytest.approx(
            log_probability, rel=1e-9
        )
        # Paths that take the same steps in another order tie, and rounding decides between them
        # in hmmlearn. So its path must be as probable as ours, and ours follow our own rule.
        piece = Piece(bases)
        score, preferred = viterbi(p, piece)
        rounding = len(bases) + 1
        assert abs(score - fixed_point_score(p, piece, expected)) <= rounding
        np.testing.assert_array_equal(found, preferred)
