"""What nulls need to know of an assembly, gathered in one pass over its sequence."""

from collections.abc import Sequence
from dataclasses import dataclass, field

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

__all__ = ["Assembly"]

_LONGEST_PIECE = 10_000_000


@dataclass(eq=False)
class Assembly:
    """Places of contigs, GC in windows, and counts of words.

    Parameters
    ----------
    order
        Of the chain whose words are counted.
    contigs
        Places of all contigs.
    pieces
        The same, cut where they are very long.
    windows
        Of each record.
    bases
        In all contigs.
    counts
        int64[code].
    """

    order: int
    contigs: list[Piece] = field(default_factory=list)
    pieces: list[Piece] = field(default_factory=list)
    windows: list[RecordWindows] = field(default_factory=list)
    bases: int = 0
    counts: NDArray[np.int64] = field(init=False)

    def __post_init__(self) -> None:
        """Begin with nothing counted."""
        self.counts = np.zeros(code_count(self.order), np.int64)

    @classmethod
    def of(cls, model: Model, contigs: Sequence[Contig]) -> "Assembly":
        """Return the assembly of contigs, each a record of its own, for nulls of a model."""
        assembly = cls(null_order(model.order))
        for contig in contigs:
            assembly.add(contig.record_length, contig.closed, [contig])
        return assembly

    def add(self, length: int, circular: bool, contigs: Sequence[Contig]) -> None:
        """Take in a record.

        Parameters
        ----------
        length, circular
            Of the record.
        contigs
            Its contigs; their bases are not kept.
        """
        number, windows = len(self.windows), RecordWindows(length, circular)
        self.windows.append(windows)
        for contig in contigs:
            windows.add(contig)
            self.pieces += pieces_of(contig, number, _LONGEST_PIECE)
            self.contigs += pieces_of(contig, number, len(contig))
            self.bases += len(contig)
        self.counts += code_counts(contigs, self.order)

    def nulls(self, model: Model) -> tuple[dict[str, Null], Drift]:
        """Return the nulls by their names, and the drift.

        A model that reports every state has no background to draw from.
        """
        words = self.counts[code_offset(self.order) : missing_code(self.order)]
        chain = chain_of_words(words.astype(np.float64), self.order, model.symmetric)
        drift = fit_drift(self.windows)
        nulls: dict[str, Null] = {"chain": chain_null(chain), "drift": drift_null(chain, drift)}
        background = background_model(model)
        if background is not None:
            nulls["background"] = BackgroundNull(background)
        return nulls, drift
