"""Inference against the sum over every path of tiny sequences, at every order."""

import itertools
import math

import numpy as np
import pytest

from hmmseg.errors import HmmsegError
from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.path import best_path, path_log_probability
from hmmseg.inference.posterior import posterior
from tests.recursions import decode, over_strands, posterior_over_strands
from tests.reference import (
    MISSING,
    Parameters,
    Path,
    Piece,
    brute_best_paths,
    brute_log_likelihood,
    brute_posterior,
    complement_strand,
    fixed_point_score,
    log_path_probability,
)
from tests.strategies import contig_of, contigs_of, model_of, random_bases, random_parameters

ORDERS = range(7)
KINDS = ["free", "stationary", "symmetric"]
CASES = [
    (states, order, kind, closed)
    for states, order, kind, closed in itertools.product([1, 2, 3], ORDERS, KINDS, [False, True])
    if states <= 2 or order == 0
]


def _pieces(rng: np.random.Generator, order: int, closed: bool) -> list[Piece]:
    """Return sequences of up to seven bases: full, with gaps in the contexts, nearly unknown."""
    # A circle no longer than its contexts would have a base among its own context.
    shortest = order + 1 if closed else 1
    pieces = [Piece(random_bases(rng, length), closed) for length in range(shortest, 8)]
    for missing in (0.2, 0.2, 0.7):
        pieces.append(Piece(random_bases(rng, 7, missing), closed))
    inside = random_bases(rng, 7)
    inside[3] = MISSING
    pieces.append(Piece(inside, closed))
    return pieces


def _draw(states: int, order: int, kind: str, closed: bool) -> tuple[Parameters, list[Piece]]:
    rng = np.random.default_rng([states, order, len(kind), closed])
    return random_parameters(rng, states, order, kind), _pieces(rng, order, closed)


@pytest.mark.parametrize(("states", "order", "kind", "closed"), CASES)
def test_log_likelihood(states: int, order: int, kind: str, closed: bool) -> None:
    """The sum over paths; on a circle, over paths that close, relative to all that close."""
    p, pieces = _draw(states, order, kind, closed)
    found = log_likelihood(model_of(p), contigs_of(pieces))
    expected = [over_strands(p, piece, brute_log_likelihood) for piece in pieces]
    np.testing.assert_allclose(found, expected, rtol=1e-12, atol=1e-13)


@pytest.mark.parametrize(("states", "order", "kind", "closed"), CASES)
def test_posterior(states: int, order: int, kind: str, closed: bool) -> None:
    """The share of the paths that pass through a state."""
    p, pieces = _draw(states, order, kind, closed)
    model = model_of(p)
    for piece in pieces:
        found = posterior(model, contig_of(piece))
        expected = posterior_over_strands(p, piece, brute_posterior)
        np.testing.assert_allclose(found, expected, rtol=0, atol=1e-12)


def _decode_by_enumeration(p: Parameters, piece: Piece) -> Path:
    """Return the best path; of a symmetric model with context, the better strand's."""
    score, winners = brute_best_paths(p, piece)
    if p.two_stranded:
        other_score, other_winners = brute_best_paths(p, complement_strand(piece))
        if other_score > score:
            return other_winners[0][::-1]
    return winners[0]


@pytest.mark.parametrize(("states", "order", "kind", "closed"), CASES)
def test_best_path(states: int, order: int, kind: str, closed: bool) -> None:
    """The preferred one of the most probable paths."""
    p, pieces = _draw(states, order, kind, closed)
    model = model_of(p)
    for piece in pieces:
        found = best_path(model, contig_of(piece))
        assert found.dtype == np.int8
        assert tuple(found) == _decode_by_enumeration(p, piece)


@pytest.mark.parametrize(
    ("states", "order", "kind", "closed"),
    [case for case in CASES if case[2] != "symmetric" or case[1] == 0],
)
def test_path_log_probability(states: int, order: int, kind: str, closed: bool) -> None:
    """Of any path, not only of the best; where two strands count, there are two."""
    p, pieces = _draw(states, order, kind, closed)
    model = model_of(p)
    rng = np.random.default_rng(0)
    for piece in pieces:
        path = rng.integers(0, states, size=len(piece.bases)).astype(np.int8)
        found = path_log_probability(model, contig_of(piece), path)
        expected = log_path_probability(p, piece, tuple(path))
        assert found == pytest.approx(expected, rel=1e-9, abs=1e-8)


@pytest.mark.parametrize("order", ORDERS)
def test_circle_shorter_than_its_contexts(order: int) -> None:
    """Contexts go round as often as they must."""
    rng = np.random.default_rng(order)
    p = random_parameters(rng, 2, order, "stationary")
    pieces = [Piece(random_bases(rng, length), closed=True) for length in range(1, order + 1)]
    if not pieces:
        pieces = [Piece([2], closed=True)]
    found = log_likelihood(model_of(p), contigs_of(pieces))
    expected = [brute_log_likelihood(p, piece) for piece in pieces]
    np.testing.assert_allclose(found, expected, rtol=1e-12, atol=1e-13)


@pytest.mark.parametrize("order", [0, 1, 2])
@pytest.mark.parametrize("closed", [False, True])
def test_zero_probabilities(order: int, closed: bool) -> None:
    """Words, transitions and starts that never happen; contexts that never happen back off."""
    rng = np.random.default_rng([order, closed])
    possible = 0
    for _ in range(40):
        p = random_parameters(rng, 2, order)
        joint = np.where(rng.random(p.joint.shape) < 0.4, 0.0, p.joint)
        joint[:, 0] += 0.05
        joint /= joint.sum(axis=1, keepdims=True)
        p = p._replace(
            start=np.array([1.0, 0.0]),
            transitions=np.array([[0.6, 0.4], [0.0, 1.0]]),
            joint=joint,
        )
        piece = Piece(random_bases(rng, 5, missing=0.2), closed)
        model, contig = model_of(p), contig_of(piece, record="scaffold-7")
        _, winners = brute_best_paths(p, piece)
        if fixed_point_score(p, piece, winners[0]) == -math.inf:
            with pytest.raises(HmmsegError, match="scaffold-7"):
                log_likelihood(model, [contig])
            with pytest.raises(HmmsegError, match="scaffold-7"):
                posterior(model, contig)
            with pytest.raises(HmmsegError, match="scaffold-7"):
                best_path(model, contig)
            continue
        possible += 1
        expected = brute_log_likelihood(p, piece)
        assert log_likelihood(model, [contig])[0] == pytest.approx(expected, rel=1e-12)
        np.testing.assert_allclose(
            posterior(model, contig), brute_posterior(p, piece), rtol=0, atol=1e-12
        )
        assert tuple(best_path(model, contig)) == winners[0]
    assert possible > 0


@pytest.mark.parametrize("order", [0, 1])
@pytest.mark.parametrize("closed", [False, True])
@pytest.mark.parametrize("length", [1, 2, 5, 130, 1001])
def test_equal_states_give_the_first_in_order_from_the_end(
    order: int, closed: bool, length: int
) -> None:
    """Where no two paths differ in probability, all of the best path is state 0."""
    rng = np.random.default_rng([order, length])
    single = random_parameters(rng, 1, order)
    p = single._replace(
        start=np.full(3, 1 / 3),
        transitions=np.full((3, 3), 1 / 3),
        joint=np.tile(single.joint, (3, 1)),
    )
    path = best_path(model_of(p), contig_of(Piece(random_bases(rng, length, 0.1), closed)))
    np.testing.assert_array_equal(path, np.zeros(length))


@pytest.mark.parametrize("closed", [False, True])
def test_partial_ties_follow_the_rule(closed: bool) -> None:
    """Probabilities that are powers of one half tie often; the rule settles each."""
    rng = np.random.default_rng(closed)
    ties = 0
    for _ in range(60):
        p = Parameters(
            order=0,
            symmetric=False,
            start_kind="free",
            start=np.array([0.5, 0.25, 0.25]),
            transitions=rng.permuted(np.tile([0.5, 0.25, 0.25], (3, 1)), axis=1),
            joint=rng.permuted(np.tile([0.5, 0.25, 0.125, 0.125], (3, 1)), axis=1),
        )
        piece = Piece(random_bases(rng, 6, missing=0.1), closed)
        _, winners = brute_best_paths(p, piece)
        ties += len(winners) > 1
        assert tuple(best_path(model_of(p), contig_of(piece))) == winners[0]
    assert ties > 10


@pytest.mark.parametrize(
    ("order", "kind"), [(0, "free"), (0, "symmetric"), (2, "stationary"), (2, "symmetric")]
)
@pytest.mark.parametrize("closed", [False, True])
def test_best_path_of_a_long_sequence(order: int, kind: str, closed: bool) -> None:
    """Beyond the reach of enumeration, against the plain recursion."""
    rng = np.random.default_rng([order, len(kind), closed])
    for states in (1, 2, 3, 5):
        p = random_parameters(rng, states, order, kind)
        piece = Piece(random_bases(rng, 1500, missing=0.03), closed)
        _, expected = decode(p, piece)
        np.testing.assert_array_equal(best_path(model_of(p), contig_of(piece)), expected)
