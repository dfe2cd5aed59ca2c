"""Baum-Welch climbs: no step loses likelihood, whatever the model and the sequence.

A closed-form step with a stationary start or with tables that back off is only nearly right;
what makes it exact is checked here from outside, by likelihoods alone.
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hmmseg.inference.likelihood import log_likelihood
from hmmseg.training.baum_welch import step
from tests.reference import Parameters, Piece
from tests.strategies import contigs_of, learning_cases, model_of

LOSS_PER_BASE = 1e-11
"""Nats: what rounding may take."""

STEPS = 6
MANY_STEPS = 60
"""So many that most models no longer move, and rounding is all that is left of a gain."""


def _climb(p: Parameters, pieces: list[Piece], steps: int = STEPS) -> None:
    contigs = contigs_of(pieces)
    bases = sum(len(contig) for contig in contigs)
    model = model_of(p)
    trace = []
    for _ in range(steps):
        model, before = step(model, contigs)
        trace.append(before)
    trace.append(float(np.sum(log_likelihood(model, contigs))))
    gains = np.diff(trace) / bases
    assert gains.min() >= -LOSS_PER_BASE, f"{gains.min():.2e} nats per base in {gains}"


@given(case=learning_cases())
@settings(max_examples=150)
def test_no_step_loses_likelihood(case: tuple[Parameters, list[Piece]]) -> None:
    """Any ties, any start, contigs of 60 to 2,000 bases."""
    p, pieces = case
    _climb(p, pieces)


@given(case=learning_cases(max_contigs=60))
@settings(max_examples=15)
def test_many_contigs(case: tuple[Parameters, list[Piece]]) -> None:
    """Many starts and many shortened contexts, where the closed form is worst."""
    p, pieces = case
    _climb(p, [*pieces, *(Piece(piece.bases[:60]) for piece in pieces)])


@given(case=learning_cases(max_contigs=4), circles=st.integers(1, 4))
@settings(max_examples=40)
def test_circles(case: tuple[Parameters, list[Piece]], circles: int) -> None:
    """Closed records, alone and beside linear ones."""
    p, pieces = case
    closed = [Piece(piece.bases, closed=True) for piece in pieces[:circles]]
    _climb(p, closed + pieces[circles:])


@pytest.mark.slow
@given(case=learning_cases(max_contigs=30), circles=st.integers(0, 3))
@settings(max_examples=400)
def test_long_climbs(case: tuple[Parameters, list[Piece]], circles: int) -> None:
    """Towards the top, where no step has anything left to give."""
    p, pieces = case
    closed = [Piece(piece.bases, closed=True) for piece in pieces[:circles]]
    _climb(p, closed + pieces[circles:], MANY_STEPS)
