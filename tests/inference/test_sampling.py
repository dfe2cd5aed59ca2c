"""Paths drawn from their posterior agree with the posterior, pair by pair."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from hmmseg.errors import SequenceError
from hmmseg.inference.expectation import expect
from hmmseg.inference.posterior import posterior
from hmmseg.inference.sampling import sample_path
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig

DRAWS = 2000


def model_of(stages: tuple[int, ...] = (1, 1), zero: bool = False) -> Model:
    joint = np.array([[0.4, 0.1, 0.1, 0.4], [0.1, 0.4, 0.4, 0.1]])
    if zero:
        joint = np.array([[0.5, 0.0, 0.0, 0.5], [0.5, 0.0, 0.0, 0.5]])
    return Model(
        names=("a", "b"),
        reported=(False, True),
        order=0,
        symmetric=True,
        start_kind="stationary",
        transitions=np.array([[0.8, 0.2], [0.3, 0.7]]),
        joint=joint,
        stages=stages,
    )


@pytest.mark.parametrize("closed", [False, True])
@pytest.mark.parametrize("stages", [(1, 1), (1, 3)])
def test_shares_and_steps_of_drawn_paths(closed: bool, stages: tuple[int, ...]) -> None:
    random = np.random.default_rng(1)
    bases = random.integers(0, 4, 30).astype(np.uint8)
    contig = Contig("one", 0, bases, closed, 30)
    model = model_of(stages)
    paths = np.array([sample_path(model, contig, random) for _ in range(DRAWS)])
    # Five standard errors of a share of 2,000 draws are 0.056 at most.
    assert_allclose(paths.mean(axis=0), posterior(model, contig)[:, 1], atol=0.056)
    following = np.roll(paths, -1, axis=1) if closed else paths[:, 1:]
    before = paths if closed else paths[:, :-1]
    steps = ((before == 0) & (following == 1)).sum(axis=1)
    expected = expect(model, Corpus([contig], 0, False)).transitions[0, 1]
    assert abs(steps.mean() - expected) < 5 * steps.std() / np.sqrt(DRAWS)


def test_blocks_are_joined() -> None:
    """A long contig is drawn block by block; the shares still are those of the posterior."""
    random = np.random.default_rng(2)
    contig = Contig("one", 0, random.integers(0, 4, 30_000).astype(np.uint8), False, 30_000)
    share = np.mean([sample_path(model_of(), contig, random).mean() for _ in range(20)])
    assert share == pytest.approx(posterior(model_of(), contig)[:, 1].mean(), abs=0.01)


def test_impossible_sequence_is_explained() -> None:
    contig = Contig("one", 0, np.array([0, 3, 1, 0], np.uint8), False, 4)
    with pytest.raises(SequenceError, match="record one, base 3"):
        sample_path(model_of(zero=True), contig, np.random.default_rng(3))
