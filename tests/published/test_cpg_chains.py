"""Two chains of order 1, inside and outside CpG islands, and their log-odds table.

Durbin, R., Eddy, S., Krogh, A., Mitchison, G., Biological Sequence Analysis (1998), section 3.1:
transition tables of the two chains, estimated from 48 islands, and the table of log2 ratios
beside them. The numbers are from memory. The book computed its ratios before it rounded the
probabilities to three decimals, which moves a ratio by up to 0.006 bits.
"""

import itertools

import numpy as np
import pytest
from numpy.typing import NDArray

from hmmseg.inference.likelihood import log_likelihood
from tests.reference import Parameters, Piece
from tests.strategies import contig_of, model_of

ISLAND = np.array(
    [
        [0.180, 0.274, 0.426, 0.120],
        [0.171, 0.368, 0.274, 0.188],
        [0.161, 0.339, 0.375, 0.125],
        [0.079, 0.355, 0.384, 0.182],
    ]
)
OCEAN = np.array(
    [
        [0.300, 0.205, 0.285, 0.210],
        [0.322, 0.298, 0.078, 0.302],
        [0.248, 0.246, 0.298, 0.208],
        [0.177, 0.239, 0.292, 0.292],
    ]
)
LOG_ODDS_BITS = np.array(
    [
        [-0.740, 0.419, 0.580, -0.803],
        [-0.913, 0.302, 1.812, -0.685],
        [-0.624, 0.461, 0.331, -0.730],
        [-1.169, 0.573, 0.393, -0.679],
    ]
)


def _chain(table: NDArray[np.float64]) -> Parameters:
    """Return a chain whose contexts are equally frequent, which its conditionals do not feel."""
    joint = table / table.sum(axis=1, keepdims=True) / 4
    return Parameters(1, False, "free", np.ones(1), np.ones((1, 1)), joint.reshape(1, 16))


@pytest.mark.parametrize(("first", "second"), list(itertools.product(range(4), repeat=2)))
def test_log_odds_of_a_pair(first: int, second: int) -> None:
    """What the second base of a pair adds for islands, in bits."""
    contigs = [contig_of(Piece([first])), contig_of(Piece([first, second]))]
    added = [np.diff(log_likelihood(model_of(_chain(t)), contigs))[0] for t in (ISLAND, OCEAN)]
    bits = (added[0] - added[1]) / np.log(2)
    assert bits == pytest.approx(LOG_ODDS_BITS[first, second], abs=0.008)
