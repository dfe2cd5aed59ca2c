"""A whole comparison of pieces: every fold in turn, then what all of them say."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence.comparison import Accuracy, Blind, accuracy, blind
from hmmseg.evidence.pieces import Piece
from hmmseg.evidence.turns import Settings, measured, predicted

__all__ = ["accuracy_in_turns", "blind_in_turns"]


def accuracy_in_turns(
    pieces: Sequence[Piece], folds: NDArray[np.int64], order: int, settings: Settings
) -> Accuracy:
    """Measure an HMM and two chains of one order against labels."""
    turns = [measured(pieces, folds, fold, order, settings) for fold in range(folds.max() + 1)]
    return accuracy(pieces, folds, turns, settings)


def blind_in_turns(pieces: Sequence[Piece], folds: NDArray[np.int64], settings: Settings) -> Blind:
    """Compare HMMs and chains without labels."""
    turns = [predicted(pieces, folds, fold, settings) for fold in range(folds.max() + 1)]
    return blind(pieces, folds, turns, settings)
