"""Closed records: it must not matter where the circle was cut."""

import numpy as np
import pytest

from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.path import best_path
from hmmseg.inference.posterior import posterior
from tests.reference import Piece
from tests.strategies import Texture, contig_of, model_of, random_parameters, segmented_bases

CASES = [
    (2, 0, "free"),
    (2, 2, "stationary"),
    (3, 1, "symmetric"),
    (4, 0, "symmetric"),
    (3, 6, "free"),
]
LENGTH = 3001


@pytest.mark.parametrize(("states", "order", "kind"), CASES)
@pytest.mark.parametrize("shift", [1, 64, 1777, LENGTH - 1])
def test_rotation(states: int, order: int, kind: str, shift: int) -> None:
    """Likelihood stays; posteriors and path turn with the record."""
    rng = np.random.default_rng([states, order, shift])
    p = random_parameters(rng, states, order, kind, Texture(1.0, 30.0))
    model = model_of(p)
    bases = np.asarray(segmented_bases(rng, LENGTH, missing=0.03))
    here = contig_of(Piece(bases, closed=True))
    turned = contig_of(Piece(np.roll(bases, -shift), closed=True), start=shift)
    one, other = log_likelihood(model, [here, turned])
    assert one == pytest.approx(other, rel=1e-12)
    np.testing.assert_allclose(
        np.roll(posterior(model, turned), shift, axis=0), posterior(model, here), rtol=0, atol=1e-9
    )
    np.testing.assert_array_equal(np.roll(best_path(model, turned), shift), best_path(model, here))


def test_a_cut_circle_is_not_a_circle() -> None:
    """The check above would mean nothing if closing made no difference."""
    rng = np.random.default_rng(2)
    p = random_parameters(rng, 2, 1, "stationary", Texture(1.0, 30.0))
    bases = segmented_bases(rng, 200)
    circle, line = contig_of(Piece(bases, closed=True)), contig_of(Piece(bases))
    one, other = log_likelihood(model_of(p), [circle, line])
    assert abs(one - other) > 1e-3
