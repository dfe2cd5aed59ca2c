"""Symmetric models: it must not matter which strand was written down."""

import numpy as np
import pytest

from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.path import best_path
from hmmseg.inference.posterior import posterior
from tests.recursions import decode
from tests.reference import Piece, complement_strand, fixed_point_score
from tests.strategies import Texture, contig_of, model_of, random_parameters, segmented_bases

CASES = [(states, order) for states in (2, 3, 4) for order in (0, 1, 2)]


@pytest.mark.parametrize(("states", "order"), CASES)
@pytest.mark.parametrize("closed", [False, True])
def test_likelihood_and_posteriors_are_mirrored(states: int, order: int, closed: bool) -> None:
    """Both strands are equally probable and show the same states."""
    rng = np.random.default_rng([states, order, closed])
    p = random_parameters(rng, states, order, "symmetric", Texture(1.0, 30.0))
    model = model_of(p)
    piece = Piece(segmented_bases(rng, 2500, missing=0.03), closed)
    here, there = contig_of(piece), contig_of(complement_strand(piece))
    one, other = log_likelihood(model, [here, there])
    assert one == pytest.approx(other, rel=1e-13)
    np.testing.assert_allclose(
        posterior(model, here), posterior(model, there)[::-1], rtol=0, atol=1e-12
    )


@pytest.mark.parametrize(("states", "order"), CASES)
@pytest.mark.parametrize("closed", [False, True])
def test_best_paths_are_mirrored(states: int, order: int, closed: bool) -> None:
    """The path found on one strand is the path found on the other, read backwards."""
    rng = np.random.default_rng([states, order, closed, 1])
    p = random_parameters(rng, states, order, "symmetric", Texture(1.0, 30.0))
    model = model_of(p)
    piece = Piece(segmented_bases(rng, 1500, missing=0.03), closed)
    other = complement_strand(piece)
    path = best_path(model, contig_of(piece))
    mirrored = best_path(model, contig_of(other))[::-1]
    np.testing.assert_array_equal(path, mirrored)
    # Neither strand's own best path beats what was kept.
    score, _ = decode(p, piece)
    assert max(
        fixed_point_score(p, piece, tuple(path)), fixed_point_score(p, other, tuple(path[::-1]))
    ) == pytest.approx(score, abs=0)


def test_stranded_models_do_tell_strands_apart() -> None:
    """The check above would mean nothing if it held for every model."""
    rng = np.random.default_rng(8)
    p = random_parameters(rng, 2, 1, "stationary")
    piece = Piece(segmented_bases(rng, 2500))
    one, other = log_likelihood(
        model_of(p), [contig_of(piece), contig_of(complement_strand(piece))]
    )
    assert abs(one - other) > 1
