"""Healthy or fever, judged by three visits: normal, cold, dizzy.

The worked example of the article "Viterbi algorithm" in the English Wikipedia, in the form it
had for many years; the numbers are from memory. The most probable path is healthy, healthy,
fever, and its probability is 0.6 x 0.5 x 0.7 x 0.4 x 0.3 x 0.6 = 0.01512.
"""

import math

import numpy as np
import pytest

from hmmseg.inference.path import best_path, path_log_probability
from tests.reference import Parameters, Piece
from tests.strategies import contig_of, model_of

NORMAL, COLD, DIZZY = 0, 1, 2  # written as A, C and G; T never occurs
HEALTHY, FEVER = 0, 1
PATIENT = Parameters(
    order=0,
    symmetric=False,
    start_kind="free",
    start=np.array([0.6, 0.4]),
    transitions=np.array([[0.7, 0.3], [0.4, 0.6]]),
    joint=np.array([[0.5, 0.4, 0.1, 0.0], [0.1, 0.3, 0.6, 0.0]]),
)


def test_best_path() -> None:
    """Healthy, healthy, fever."""
    model, contig = model_of(PATIENT), contig_of(Piece([NORMAL, COLD, DIZZY]))
    path = best_path(model, contig)
    assert list(path) == [HEALTHY, HEALTHY, FEVER]
    probability = math.exp(path_log_probability(model, contig, path))
    assert probability == pytest.approx(0.01512, rel=1e-9)
