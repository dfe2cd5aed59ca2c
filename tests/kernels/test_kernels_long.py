"""Records as long as the longest chromosomes."""

import numpy as np
import pytest

from hmmseg.inference.expectation import expect
from hmmseg.inference.path import best_runs
from hmmseg.inference.streams import Corpus
from hmmseg.kernels.elementary import log
from tests.reference import Piece
from tests.strategies import Texture, contig_of, model_of, random_parameters

LENGTH = 250_000_000


@pytest.mark.slow
def test_one_letter_for_a_whole_chromosome() -> None:
    """Likelihood and counts of 250 Mb of one letter follow from the powers of one matrix.

    With M = T diag(e(A)) and its largest eigenvalue r, log P grows by log r a base once the
    start is forgotten.
    """
    model = model_of(random_parameters(np.random.default_rng(1), 2, 0, "free", Texture(2.0, 50.0)))
    bases = np.zeros(LENGTH, np.uint8)
    counts = expect(model, Corpus([contig_of(Piece(bases))], 0, False), 2)
    step = model.transitions * model.emissions[:, 0]
    trace, determinant = step[0, 0] + step[1, 1], step[0, 0] * step[1, 1] - step[0, 1] * step[1, 0]
    root = (trace + np.sqrt(trace * trace - 4 * determinant)) / 2
    assert counts.log_likelihood == pytest.approx(LENGTH * log(root), rel=1e-6)
    assert counts.transitions.sum() == pytest.approx(LENGTH - 1, rel=1e-10)
    assert counts.emissions[:, 0].sum() == pytest.approx(LENGTH, rel=1e-10)
    assert counts.emissions[:, 1:].sum() == 0
    assert len(best_runs(model, contig_of(Piece(bases)), 2).states) <= 3
