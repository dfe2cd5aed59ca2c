"""One Baum-Welch step against expected counts from every path of tiny sequences."""

import itertools

import numpy as np
import pytest

from hmmseg.training.baum_welch import step
from tests.recursions import (
    baum_welch_step,
    counts_over_strands,
    expected_log_likelihood,
    log_counts,
    over_strands,
)
from tests.recursions import log_likelihood as plain_log_likelihood
from tests.reference import (
    MISSING,
    Piece,
    brute_counts,
    brute_log_likelihood,
)
from tests.strategies import (
    Texture,
    contigs_of,
    model_of,
    parameters_of,
    random_bases,
    random_parameters,
    segmented_bases,
)

CASES = [
    (states, order, kind, closed)
    for states, order, kind, closed in itertools.product(
        [1, 2, 3], range(7), ["free", "stationary", "symmetric"], [False, True]
    )
    if states <= 2 or order == 0
]


@pytest.mark.parametrize("states", [1, 2, 3, 4])
def test_closed_form_with_missing_bases(states: int) -> None:
    """At order 0 with a free start a step is the ratio of expected counts."""
    rng = np.random.default_rng(states)
    p = random_parameters(rng, states, 0, "free", Texture(1.0, 10.0))
    pieces = [Piece(segmented_bases(rng, length, missing=0.1)) for length in (1, 30, 64, 700)]
    pieces.append(Piece([MISSING, 0, MISSING]))
    model, log_likelihood = step(model_of(p), contigs_of(pieces))
    start, transitions, emissions = baum_welch_step(p, pieces)
    np.testing.assert_allclose(model.start_probabilities, start, rtol=0, atol=1e-10)
    np.testing.assert_allclose(model.transitions, transitions, rtol=0, atol=1e-10)
    np.testing.assert_allclose(model.joint, emissions, rtol=0, atol=1e-10)
    # The likelihood that comes with a step is that of the model it started from.
    before = sum(plain_log_likelihood(p, piece) for piece in pieces)
    assert log_likelihood == pytest.approx(before, rel=1e-11)


@pytest.mark.parametrize(("states", "order", "kind", "closed"), CASES)
def test_expected_log_likelihood_never_falls(
    states: int, order: int, kind: str, closed: bool
) -> None:
    """What a step has to raise, start, back-off and closing terms included."""
    rng = np.random.default_rng([states, order, len(kind), closed])
    p = random_parameters(rng, states, order, kind)
    pieces = [Piece(random_bases(rng, 7, missing=0.15), closed) for _ in range(3)]
    if not closed:
        pieces += [Piece(random_bases(rng, length)) for length in (1, 4)]
    model, log_likelihood = step(model_of(p), contigs_of(pieces))
    expected = sum(over_strands(p, piece, brute_log_likelihood) for piece in pieces)
    assert log_likelihood == pytest.approx(expected, rel=1e-11)

    counts = counts_over_strands(p, pieces, brute_counts)
    after = parameters_of(model)
    gain = expected_log_likelihood(after, counts) - expected_log_likelihood(p, counts)
    assert gain > -1e-12
    # Hence the likelihood itself rises by at least as much (Dempster, Laird & Rubin 1977).
    now = sum(over_strands(after, piece, brute_log_likelihood) for piece in pieces)
    assert now - expected > gain - 1e-9


@pytest.mark.parametrize("order", range(7))
@pytest.mark.parametrize("kind", ["free", "stationary", "symmetric"])
def test_random_models_gain(order: int, kind: str) -> None:
    """A random model is never already the best one: a step that gains nothing is stuck."""
    rng = np.random.default_rng([order, len(kind)])
    p = random_parameters(rng, 2, order, kind)
    pieces = [Piece(segmented_bases(rng, length, missing=0.03)) for length in (60, 60, 300)]
    pieces.append(Piece(segmented_bases(rng, 200, missing=0.03), closed=True))
    counts = counts_over_strands(p, pieces, log_counts)
    before = expected_log_likelihood(p, counts)
    after = parameters_of(step(model_of(p), contigs_of(pieces))[0])
    assert expected_log_likelihood(after, counts) - before > 0.1


@pytest.mark.parametrize("order", [1, 2, 4])
def test_transitions_are_the_ratio_of_counts(order: int) -> None:
    """With a free start, context changes nothing about how transitions are learnt."""
    rng = np.random.default_rng(order)
    p = random_parameters(rng, 3, order, "free", Texture(1.0, 10.0))
    pieces = [Piece(segmented_bases(rng, length, missing=0.03)) for length in (300, 800)]
    counts = counts_over_strands(p, pieces, log_counts)
    model, _ = step(model_of(p), contigs_of(pieces))
    expected = counts.transitions / counts.transitions.sum(axis=1, keepdims=True)
    np.testing.assert_allclose(model.transitions, expected, rtol=0, atol=1e-9)
    np.testing.assert_allclose(
        model.start_probabilities, counts.start / counts.start.sum(), rtol=0, atol=1e-9
    )


@pytest.mark.parametrize("order", [1, 2])
def test_chain_learns_the_frequencies_of_words(order: int) -> None:
    """One state has nothing hidden: emissions are those of the words that are there."""
    rng = np.random.default_rng(order)
    p = random_parameters(rng, 1, order, "stationary")
    bases = np.asarray(segmented_bases(rng, 5000))
    model, _ = step(model_of(p), contigs_of([Piece(bases, closed=True)]))
    # On a circle every position has its whole context, and nothing backs off.
    words = sum(np.roll(bases, back).astype(np.int64) * 4**back for back in range(order + 1))
    counted = np.bincount(words, minlength=4 ** (order + 1)) / len(bases)
    np.testing.assert_allclose(model.joint[0], counted, rtol=0, atol=1e-9)


def test_symmetric_step_keeps_the_ties() -> None:
    """The result of a step on one strand is symmetric, and that of a step on the other."""
    rng = np.random.default_rng(9)
    for order in (0, 1, 2):
        p = random_parameters(rng, 3, order, "symmetric", Texture(1.0, 10.0))
        bases = np.asarray(segmented_bases(rng, 2000, missing=0.03))
        other = np.where(bases == MISSING, MISSING, 3 - bases)[::-1].copy()
        here, _ = step(model_of(p), contigs_of([Piece(bases)]))
        there, _ = step(model_of(p), contigs_of([Piece(other)]))
        np.testing.assert_allclose(here.joint, there.joint, rtol=0, atol=1e-10)
        np.testing.assert_allclose(here.transitions, there.transitions, rtol=0, atol=1e-10)
        flow = here.start_probabilities[:, None] * here.transitions
        np.testing.assert_allclose(flow, flow.T, rtol=0, atol=1e-12)
        p_after = parameters_of(here)
        for row in p_after.joint.reshape(3, *[4] * (order + 1)):
            flipped = np.transpose(row)[(slice(None, None, -1),) * (order + 1)]
            np.testing.assert_allclose(row, flipped, rtol=0, atol=1e-14)
