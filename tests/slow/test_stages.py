"""Stages are worth having where lengths have a most likely value."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import ks_2samp

from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.path import runs_of
from hmmseg.inference.sampling import sample_path
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from hmmseg.training.baum_welch import fit

pytestmark = pytest.mark.slow

TRUTH = Model(
    names=("plain", "rich"),
    reported=(False, True),
    order=0,
    symmetric=True,
    start_kind="stationary",
    transitions=np.array([[0.998, 0.002], [0.01, 0.99]]),
    joint=np.array([[0.35, 0.15, 0.15, 0.35], [0.15, 0.35, 0.35, 0.15]]),
    stages=(1, 4),
)
BLOCKS, LENGTH = 40, 50_000


def contigs_of(seed: int) -> tuple[list[Contig], list[np.ndarray]]:
    drawn = list(simulate(TRUTH, [LENGTH] * BLOCKS, seed))
    return [Contig(f"r{i}", 0, one.bases, False, LENGTH) for i, one in enumerate(drawn)], [
        one.path for one in drawn
    ]


def lengths_of(paths: list[np.ndarray]) -> np.ndarray:
    """Lengths of the visits to the second state that begin and end within a contig."""
    found = []
    for path in paths:
        runs = runs_of(path)
        inner = slice(1, -1)
        found.append(np.diff(runs.edges)[inner][runs.states[inner] == 1])
    return np.concatenate(found)


def test_four_stages_beat_one_and_give_the_lengths_back() -> None:
    training, _ = contigs_of(1)
    held_out, paths = contigs_of(2)
    corpus = Corpus(training, 0, False)
    four = fit(TRUTH, corpus).model
    # One stage of the same expected length to begin with.
    single = replace(
        TRUTH, transitions=np.array([[0.998, 0.002], [0.0025, 0.9975]]), stages=(1, 1), start=None
    )
    one = fit(single, corpus).model
    gains = log_likelihood(four, held_out) - log_likelihood(one, held_out)
    error = gains.std(ddof=1) / np.sqrt(BLOCKS)
    print(f"gain {gains.mean():.2f} nats a block, standard error {error:.2f}")
    assert gains.mean() > 3 * error
    random = np.random.default_rng(3)
    sampled = lengths_of([sample_path(four, contig, random) for contig in held_out])
    test = ks_2samp(sampled, lengths_of(paths))
    print(f"{len(sampled)} lengths, Kolmogorov-Smirnov p {test.pvalue:.3f}")
    assert test.pvalue > 0.01
    # The check can fail: lengths under one stage do not look like that.
    other = lengths_of([sample_path(one, contig, random) for contig in held_out])
    assert ks_2samp(other, lengths_of(paths)).pvalue < 0.01
