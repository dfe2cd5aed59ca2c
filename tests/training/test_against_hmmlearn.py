"""One Baum-Welch step with a free start against hmmlearn, at order 0 without missing bases."""

import numpy as np
import pytest

from hmmseg.training.baum_welch import step
from tests.peer import column, peer_of
from tests.reference import Piece
from tests.strategies import (
    Texture,
    contigs_of,
    model_of,
    random_bases,
    random_parameters,
    segmented_bases,
)


@pytest.mark.parametrize("states", range(1, 7))
@pytest.mark.parametrize("texture", [Texture(), Texture(0.5, 50.0)])
def test_step_over_several_contigs(states: int, texture: Texture) -> None:
    """Start, transitions and emissions, and the likelihood from which the step was made."""
    rng = np.random.default_rng([states, int(texture.stay)])
    p = random_parameters(rng, states, 0, "free", texture)
    sequences = [random_bases(rng, length) for length in (1, 2, 65, 400)]
    sequences += [segmented_bases(rng, length) for length in (700, 3000)]
    model, log_likelihood = step(model_of(p), contigs_of([Piece(bases) for bases in sequences]))

    symbols, lengths = column(sequences)
    peer = peer_of(p, n_iter=1, params="ste")
    before = peer.score(symbols, lengths)
    peer.fit(symbols, lengths)
    assert log_likelihood == pytest.approx(before, rel=1e-9)
    np.testing.assert_allclose(model.start_probabilities, peer.startprob_, rtol=0, atol=1e-9)
    np.testing.assert_allclose(model.transitions, peer.transmat_, rtol=0, atol=1e-9)
    np.testing.assert_allclose(model.joint, peer.emissionprob_, rtol=0, atol=1e-9)


def test_three_steps_in_a_row() -> None:
    """What one step returns is what the next one takes."""
    rng = np.random.default_rng(11)
    p = random_parameters(rng, 3, 0, "free", Texture(1.0, 20.0))
    sequences = [segmented_bases(rng, length) for length in (1500, 800)]
    contigs = contigs_of([Piece(bases) for bases in sequences])
    model = model_of(p)
    for _ in range(3):
        model, _ = step(model, contigs)
    symbols, lengths = column(sequences)
    peer = peer_of(p, n_iter=3, params="ste", tol=0.0).fit(symbols, lengths)
    np.testing.assert_allclose(model.start_probabilities, peer.startprob_, rtol=0, atol=1e-9)
    np.testing.assert_allclose(model.transitions, peer.transmat_, rtol=0, atol=1e-9)
    np.testing.assert_allclose(model.joint, peer.emissionprob_, rtol=0, atol=1e-9)
