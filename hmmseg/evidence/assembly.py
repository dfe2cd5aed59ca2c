"""What nulls need to know of an assembly, gathered in one pass over its sequence."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence.drift import Drift, RecordWindows, fit_drift
from hmmseg.evidence.nulls import (
    BackgroundNull,
    Null,
    Piece,
    background_model,
    chain_null,
    drift_null,
    null_order,
    pieces_of,
)
from hmmseg.model import Model
from hmmseg.model.contexts import code_count, code_offset, missing_code
from hmmseg.sequence.contigs import Contig
from hmmseg.training.chains import chain_of_words, code_counts

__all__ = ["Assembly", "AssemblySurvey"]

_LONGEST_PIECE = 10_000_000


@dataclass(frozen=True, eq=False)
class Assembly:
    """Places of contigs, how GC drifts along them, and counts of words.

    Attributes
    ----------
    contigs : list of Piece
        Places of all contigs.
    pieces : list of Piece
        The same, cut where they are very long.
    bases : int
        In all contigs.
    order : int
        Of the chain whose words were counted.
    counts : int64[code]
    drift : Drift
    """

    contigs: list[Piece]
    pieces: list[Piece]
    bases: int
    order: int
    counts: NDArray[np.int64]
    drift: Drift

    @classmethod
    def of(cls, model: Model, contigs: Sequence[Contig]) -> "Assembly":
        """Return the assembly of contigs, each a record of its own, for nulls of a model."""
        survey = AssemblySurvey(null_order(model.order))
        for contig in contigs:
            survey.add(contig.record_length, contig.closed, [contig])
        return survey.assembly()

    def nulls(self, model: Model) -> dict[str, Null]:
        """Return the nulls by their names.

        A model that reports every state has no background to draw from.
        """
        words = self.counts[code_offset(self.order) : missing_code(self.order)]
        chain = chain_of_words(words.astype(np.float64), self.order, model.symmetric)
        nulls: dict[str, Null] = {
            "chain": chain_null(chain),
            "drift": drift_null(chain, self.drift),
        }
        background = background_model(model)
        if background is not None:
            nulls["background"] = BackgroundNull(background)
        return nulls


class AssemblySurvey:
    """Takes in an assembly record by record.

    Parameters
    ----------
    order
        Of the chain whose words are counted.
    """

    def __init__(self, order: int) -> None:
        self.bases = 0
        """In all contigs so far."""
        self._order = order
        self._contigs: list[Piece] = []
        self._pieces: list[Piece] = []
        self._windows: list[RecordWindows] = []
        self._counts = np.zeros(code_count(order), np.int64)

    def add(self, length: int, circular: bool, contigs: Sequence[Contig]) -> None:
        """Take in a record.

        Parameters
        ----------
        length, circular
            Of the record.
        contigs
            Its contigs; their bases are not kept.
        """
        number, windows = len(self._windows), RecordWindows(length, circular)
        self._windows.append(windows)
        for contig in contigs:
            windows.add(contig)
            self._pieces += pieces_of(contig, number, _LONGEST_PIECE)
            self._contigs += pieces_of(contig, number, len(contig))
            self.bases += len(contig)
        self._counts += code_counts(contigs, self._order)

    def assembly(self) -> Assembly:
        """Return what all records together are."""
        drift = fit_drift(self._windows)
        return Assembly(self._contigs, self._pieces, self.bases, self._order, self._counts, drift)
