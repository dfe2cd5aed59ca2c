"""Surprise, entropy and variance of bases, beside the likelihood of every continuation."""

import math

import numpy as np
import pytest

from hmmseg.errors import SequenceError
from hmmseg.inference.predictive import predictive_bits
from hmmseg.inference.surprise import surprise_of_pieces
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from tests.evidence.planted import LIMIT_MODELS
from tests.inference.test_sampling import model_of as two_states
from tests.recursions import log_likelihood, log_posterior
from tests.reference import MISSING, Parameters, Piece, complement_strand
from tests.strategies import contig_of, model_of, random_parameters, segmented_bases

EDGES = np.array([0, 7, 8, 30, 45])


def plain_sums(p: Parameters, piece: Piece) -> np.ndarray:
    """Excess, variance, known bases and states of every position, from prefixes alone."""
    rows = []
    bases = list(piece.bases)
    for at, base in enumerate(bases):
        if base == MISSING:
            rows.append([0.0] * (3 + p.states))
            continue
        before = log_likelihood(p, Piece(bases[:at])) if at else 0.0
        chances = [
            math.exp(log_likelihood(p, Piece([*bases[:at], other])) - before) for other in range(4)
        ]
        assert sum(chances) == pytest.approx(1, abs=1e-9)
        entropy = -sum(chance * math.log(chance) for chance in chances)
        spread = sum(chance * (math.log(chance) + entropy) ** 2 for chance in chances)
        filtered = log_posterior(p, Piece(bases[: at + 1]))[-1]
        rows.append([-math.log(chances[base]) - entropy, spread, 1.0, *filtered])
    return np.array(rows)


@pytest.mark.parametrize("kind", ["free", "stationary", "symmetric"])
@pytest.mark.parametrize("order", [0, 2])
@pytest.mark.parametrize("states", [1, 3])
def test_sums_are_those_of_the_plain_twin(states: int, order: int, kind: str) -> None:
    rng = np.random.default_rng([states, order])
    p = random_parameters(rng, states, order, kind)
    piece = Piece(segmented_bases(rng, 45, missing=0.1))
    rows = plain_sums(p, piece)
    if kind == "symmetric":
        rows = (rows + plain_sums(p, complement_strand(piece))[::-1]) / 2
    wanted = np.add.reduceat(rows, EDGES[:-1], axis=0)
    found = surprise_of_pieces(model_of(p), contig_of(piece), EDGES)
    assert found.excess == pytest.approx(wanted[:, 0], abs=1e-9)
    assert found.variance == pytest.approx(wanted[:, 1], abs=1e-9)
    assert found.known.tolist() == wanted[:, 2].tolist()
    assert found.states == pytest.approx(wanted[:, 3:], abs=1e-9)


def test_surprise_is_that_of_the_bits() -> None:
    """On the forward strand the excess is the bits less the entropy, which a chain has at once."""
    rng = np.random.default_rng(3)
    p = random_parameters(rng, 1, 0, "stationary")
    contig = contig_of(Piece(segmented_bases(rng, 900)))
    entropy = -float((p.joint[0] * np.log(p.joint[0])).sum())
    wanted = predictive_bits(model_of(p), contig).sum() * np.log(2) - 900 * entropy
    (found,) = surprise_of_pieces(model_of(p), contig, np.array([0, 900])).excess
    assert found == pytest.approx(wanted, rel=1e-9)


@pytest.mark.parametrize("name", LIMIT_MODELS)
def test_excess_has_the_variance_that_is_said(name: str) -> None:
    """On 200 sequences drawn from the model: mean 0, variance 1, to within 4 standard errors."""
    model = LIMIT_MODELS[name]
    scores = []
    for drawn in simulate(model, [5000] * 200, 1):
        contig = Contig("r", 0, drawn.bases, False, 5000)
        found = surprise_of_pieces(model, contig, np.array([0, 5000]))
        scores.append(float(found.excess[0] / np.sqrt(found.variance[0])))
    assert abs(np.mean(scores)) < 4 / np.sqrt(200)
    # Variance of a variance: 2 / 199; both strands' mean may have a little less.
    assert 1 - 5 * np.sqrt(2 / 199) < np.var(scores) < 1 + 4 * np.sqrt(2 / 199)


def test_pieces_and_threads_change_nothing() -> None:
    model = LIMIT_MODELS["words"]
    (drawn,) = simulate(model, [9000], 2)
    contig = Contig("r", 0, drawn.bases, False, 9000)
    whole = surprise_of_pieces(model, contig, np.array([0, 9000]))
    parts = surprise_of_pieces(model, contig, np.array([0, 100, 101, 5000, 9000]), threads=2)
    assert parts.excess.sum() == pytest.approx(whole.excess[0], abs=1e-8)
    assert parts.states.sum(axis=0) == pytest.approx(whole.states[0], abs=1e-7)
    again = surprise_of_pieces(model, contig, np.array([0, 100, 101, 5000, 9000]))
    assert (again.excess == parts.excess).all()


@pytest.mark.parametrize("closed", [False, True])
def test_impossible_sequence_is_explained(closed: bool) -> None:
    contig = Contig("one", 0, np.array([0, 3, 1, 0], np.uint8), closed, 4)
    with pytest.raises(SequenceError, match="record one, base 3"):
        surprise_of_pieces(two_states(zero=True), contig, np.array([0, 4]))
