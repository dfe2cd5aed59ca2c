"""Inference in blocks against the textbook recursions, over many blocks and in odd ones."""

import itertools

import numpy as np
import pytest
from numpy.typing import NDArray

from hmmseg.inference.expectation import expect, log_likelihoods
from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.path import best_path, best_runs
from hmmseg.inference.posterior import posterior, posterior_windows
from hmmseg.inference.streams import BLOCK, Corpus
from hmmseg.model.contexts import code_count, code_offset
from tests import recursions as plain
from tests.reference import MISSING, Counts, Parameters, Piece, emission, fixed_point_score
from tests.strategies import (
    Texture,
    contig_of,
    contigs_of,
    model_of,
    random_bases,
    random_parameters,
    segmented_bases,
)

KINDS = [(0, "free"), (0, "symmetric"), (1, "symmetric"), (3, "stationary"), (6, "free")]


def _code(context: tuple[int, ...], base: int) -> int:
    index = 0
    for letter in context:
        index = 4 * index + letter
    return code_offset(len(context)) + 4 * index + base


def _by_code(p: Parameters, counts: Counts) -> NDArray[np.float64]:
    table = np.zeros((p.states, code_count(p.order)))
    for context, row in counts.emissions.items():
        for base in range(4):
            table[:, _code(context, base)] = row[:, base]
    return table


@pytest.mark.parametrize("order", range(5))
def test_emissions_of_every_context(order: int) -> None:
    """Known contexts of every length, some of them never seen."""
    rng = np.random.default_rng(order)
    p = random_parameters(rng, 2, order)
    joint = np.where(rng.random(p.joint.shape) < 0.5, 0.0, p.joint)
    joint[:, -1] += 0.01
    p = p._replace(joint=joint / joint.sum(axis=1, keepdims=True))
    table = model_of(p).emissions
    assert table.shape == (2, code_count(order))
    np.testing.assert_array_equal(table[:, -1], 1.0)
    for length in range(order + 1):
        for context in itertools.product(range(4), repeat=length):
            for state, base in itertools.product(range(2), range(4)):
                expected = emission(p.joint[state], context, base)
                assert table[state, _code(context, base)] == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize(("order", "kind"), KINDS)
@pytest.mark.parametrize("states", [1, 2, 3, 8])
def test_expected_counts(states: int, order: int, kind: str) -> None:
    """Of linear and closed contigs together, whatever the length of a block."""
    rng = np.random.default_rng([states, order, len(kind)])
    p = random_parameters(rng, states, order, kind, Texture(1.0, 10.0))
    lengths = [(1, False), (2, False), (64, False), (65, True), (500, False), (700, True)]
    pieces = [Piece(segmented_bases(rng, n, missing=0.05), closed) for n, closed in lengths]
    pieces.append(Piece([MISSING, MISSING, 2]))
    expected = plain.counts_over_strands(p, pieces, plain.log_counts)
    emissions = _by_code(p, expected)
    model = model_of(p)
    for block in (16, 64, 100, BLOCK):
        found = expect(model, Corpus(contigs_of(pieces), order, p.two_stranded, block=block))
        np.testing.assert_allclose(found.start, expected.start, rtol=1e-10, atol=1e-12)
        np.testing.assert_allclose(found.transitions, expected.transitions, rtol=1e-10)
        # The last code is that of missing bases, which nothing is learnt from.
        np.testing.assert_allclose(
            found.emissions[:, :-1], emissions[:, :-1], rtol=1e-10, atol=1e-12
        )


@pytest.mark.parametrize(("order", "kind"), KINDS)
@pytest.mark.parametrize("closed", [False, True])
def test_block_length_does_not_matter(order: int, kind: str, closed: bool) -> None:
    """Posteriors to 1e-10, counts to 1e-12, paths exactly."""
    rng = np.random.default_rng([order, len(kind), closed])
    for states in (2, 3):
        p = random_parameters(rng, states, order, kind, Texture(1.0, 30.0))
        piece = Piece(segmented_bases(rng, 2000, missing=0.03), closed)
        model, contig = model_of(p), contig_of(piece)
        gamma, path = posterior(model, contig), best_path(model, contig)
        counts = expect(model, Corpus([contig], order, p.two_stranded))
        for block in (16, 63, 256, 1999, 2000, 2001):
            windows = posterior_windows(model, contig, block=block)
            other = np.concatenate([window for _, window in windows])
            np.testing.assert_allclose(other, gamma, rtol=0, atol=1e-10)
            corpus = Corpus([contig], order, p.two_stranded, block=block)
            recounted = expect(model, corpus)
            np.testing.assert_allclose(log_likelihoods(model, corpus), counts.logs, rtol=1e-12)
            np.testing.assert_allclose(recounted.transitions, counts.transitions, rtol=1e-12)
            runs = best_runs(model, contig, block=block)
            np.testing.assert_array_equal(np.repeat(runs.states, np.diff(runs.edges)), path)


@pytest.mark.parametrize(
    ("length", "closed"),
    [(BLOCK, False), (BLOCK + 1, False), (BLOCK + 1, True), (2 * BLOCK + 1, False)],
)
def test_lengths_around_a_block(length: int, closed: bool) -> None:
    """Nothing is lost or counted twice where blocks meet."""
    rng = np.random.default_rng([length, closed])
    p = random_parameters(rng, 2, 2, "stationary", Texture(1.0, 50.0))
    piece = Piece(segmented_bases(rng, length, missing=0.01), closed)
    model, contig = model_of(p), contig_of(piece)
    found = log_likelihood(model, [contig])[0]
    assert found == pytest.approx(plain.log_likelihood(p, piece), rel=1e-11)
    np.testing.assert_allclose(
        posterior(model, contig), plain.log_posterior(p, piece), rtol=0, atol=1e-9
    )
    score, _ = plain.viterbi(p, piece)
    path = best_path(model, contig)
    assert fixed_point_score(p, piece, tuple(path)) == score


@pytest.mark.parametrize(("order", "kind"), KINDS)
def test_threads_give_the_same_bits(order: int, kind: str) -> None:
    """Results are equal, not nearly equal."""
    rng = np.random.default_rng([order, len(kind)])
    p = random_parameters(rng, 3, order, kind, Texture(1.0, 50.0))
    lengths = [(90_000, False), (40_000, True), *((300, False),) * 20]
    pieces = [Piece(segmented_bases(rng, n, missing=0.01), closed) for n, closed in lengths]
    contigs, model = contigs_of(pieces), model_of(p)
    corpus = Corpus(contigs, order, p.two_stranded)
    one, two = expect(model, corpus, threads=1), expect(model, corpus, threads=2)
    assert one.start.tobytes() == two.start.tobytes()
    assert one.transitions.tobytes() == two.transitions.tobytes()
    assert one.emissions.tobytes() == two.emissions.tobytes()
    single, double = (log_likelihood(model, contigs, threads=threads) for threads in (1, 2))
    assert single.tobytes() == double.tobytes()
    for contig in contigs[:2]:
        first, second = (posterior(model, contig, threads=threads) for threads in (1, 2))
        assert first.tobytes() == second.tobytes()
        first_path, second_path = (best_path(model, contig, threads=n) for n in (1, 2))
        assert first_path.tobytes() == second_path.tobytes()


@pytest.mark.parametrize("stride", [2, -1])
def test_views_are_read_like_copies(stride: int) -> None:
    """Bases need not lie side by side in memory."""
    rng = np.random.default_rng(6)
    p = random_parameters(rng, 2, 1, "stationary")
    model = model_of(p)
    view = random_bases(rng, 1000, missing=0.03)[::stride]
    strided, copied = contig_of(Piece(view)), contig_of(Piece(view.copy()))
    assert not strided.bases.flags.c_contiguous
    one, other = log_likelihood(model, [strided, copied])
    assert one == other
    np.testing.assert_array_equal(posterior(model, strided), posterior(model, copied))
    np.testing.assert_array_equal(best_path(model, strided), best_path(model, copied))
