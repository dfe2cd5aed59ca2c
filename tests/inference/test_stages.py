"""States with stages against the same chain written out by hand."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from hmmseg.errors import ModelError
from hmmseg.inference.expectation import expect
from hmmseg.inference.path import best_path, path_log_probability
from hmmseg.inference.posterior import posterior
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model, model_from_dict, model_to_dict
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate

JOINT = np.array([[0.4, 0.1, 0.1, 0.4], [0.15, 0.35, 0.35, 0.15]])
STAGED = Model(
    names=("plain", "rich"),
    reported=(False, True),
    order=0,
    symmetric=True,
    start_kind="stationary",
    transitions=np.array([[0.99, 0.01], [0.05, 0.95]]),
    joint=JOINT,
    stages=(1, 3),
)
# The same, with the three stages of the second state as states of their own.
WRITTEN_OUT = Model(
    names=("plain", "rich-1", "rich-2", "rich-3"),
    reported=(False, True, True, True),
    order=0,
    symmetric=False,
    start_kind="stationary",
    transitions=np.array(
        [
            [0.99, 0.01, 0.0, 0.0],
            [0.0, 0.95, 0.05, 0.0],
            [0.0, 0.0, 0.95, 0.05],
            [0.05, 0.0, 0.0, 0.95],
        ]
    ),
    joint=JOINT[[0, 1, 1, 1]],
)


def drawn(length: int, closed: bool = False) -> Contig:
    (one,) = simulate(STAGED, [length], 4)
    return Contig("one", 0, one.bases, closed, length)


@pytest.mark.parametrize("closed", [False, True])
def test_posterior_pools_the_stages(closed: bool) -> None:
    contig = drawn(3000, closed)
    written_out = posterior(WRITTEN_OUT, contig)
    expected = np.column_stack([written_out[:, 0], written_out[:, 1:].sum(axis=1)])
    assert_allclose(posterior(STAGED, contig), expected, rtol=0, atol=1e-12)


@pytest.mark.parametrize("closed", [False, True])
def test_counts_pool_the_stages(closed: bool) -> None:
    contig = drawn(3000, closed)
    staged = expect(STAGED, Corpus([contig], 0, False))
    written_out = expect(WRITTEN_OUT, Corpus([contig], 0, False))
    steps = written_out.transitions
    assert_allclose(staged.logs, written_out.logs, rtol=1e-13)
    assert_allclose(staged.transitions[1, 1], np.diag(steps)[1:].sum(), rtol=1e-12)
    assert_allclose(staged.advances, [0, steps[1, 2] + steps[2, 3]], rtol=1e-12, atol=1e-12)
    assert_allclose(staged.transitions[0], [steps[0, 0], steps[0, 1]], rtol=1e-12)
    assert_allclose(staged.transitions[1, 0], steps[3, 0], rtol=1e-12)
    assert_allclose(staged.emissions[1], written_out.emissions[1:].sum(axis=0), rtol=1e-12)


def test_path_joins_the_stages() -> None:
    contig = drawn(3000)
    assert best_path(STAGED, contig).tolist() == (best_path(WRITTEN_OUT, contig) > 0).tolist()


def test_other_strand_mirrors() -> None:
    contig = drawn(2000)
    other = Contig("one", 0, reverse_complement(contig.bases), False, len(contig))
    assert_allclose(posterior(STAGED, other)[::-1], posterior(STAGED, contig), rtol=0, atol=1e-12)


def test_lengths_and_shares() -> None:
    """Three stages of 20 bases each are 60; a visit to each state alternates."""
    assert STAGED.expected_lengths.tolist() == pytest.approx([100, 60])
    assert STAGED.shares.tolist() == pytest.approx([100 / 160, 60 / 160])
    assert WRITTEN_OUT.start_probabilities.tolist() == pytest.approx(
        STAGED.machine.start_probabilities.tolist()
    )


def test_simulated_lengths_are_negative_binomial() -> None:
    """Mean 60 and variance 3 x 0.95 / 0.05**2 = 1140, not 60**2 as of one stage."""
    (one,) = simulate(STAGED, [1_000_000], 1)
    edges = np.flatnonzero(np.diff(one.path.astype(int))) + 1
    runs = np.diff(edges)[(one.path[edges[:-1]] == 1)]
    assert len(runs) > 5000
    assert runs.mean() == pytest.approx(60, rel=0.03)
    assert runs.var() == pytest.approx(1140, rel=0.1)


def test_document_keeps_the_stages() -> None:
    assert model_from_dict(model_to_dict(STAGED)).stages == (1, 3)


def test_probability_of_a_path_needs_single_stages() -> None:
    contig = drawn(20)
    with pytest.raises(ModelError, match="stages"):
        path_log_probability(STAGED, contig, np.zeros(20, np.int8))
