"""What the commands ``fold`` and ``compare`` are given, and how the sequence is dealt out."""

from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import UsageError
from hmmseg.evidence.pieces import Piece, block_length, cut, deal
from hmmseg.evidence.turns import Settings
from hmmseg.jobs.labelled import read_labelled
from hmmseg.jobs.sources import Sources
from hmmseg.sequence.contigs import Contig

__all__ = ["Trial", "Truth", "set_up"]


@dataclass(frozen=True)
class Truth:
    """Labels, and how sequence is held out.

    Parameters
    ----------
    labels
        Known regions as BED; None to compare without.
    name
        Use only intervals of this name, or of this name with a number.
    order
        Context length of both ways of calling; None for the one that predicts best.
    split
        ``contigs`` or ``blocks``: what is held out; None for contigs where they make even folds.
    block
        Length of a block in bases; None for about 200 blocks.
    """

    labels: str | None = None
    name: str | None = None
    order: int | None = None
    split: str | None = None
    block: int | None = None


@dataclass(frozen=True, eq=False)
class Trial:
    """Sequence dealt out to folds, and what is to be done with it.

    Attributes
    ----------
    sources : Sources
    truth : Truth
    settings : Settings
    pieces : list of Piece
        All of the sequence.
    folds : int64[piece]
        The fold in which each is held out.
    split : str
        What is held out.
    block : int
        Length of a block.
    """

    sources: Sources
    truth: Truth
    settings: Settings
    pieces: list[Piece]
    folds: NDArray[np.int64]
    split: str
    block: int

    def parameters(self) -> dict[str, Any]:
        """Return what stands in the provenance."""
        chosen = asdict(self.settings)
        del chosen["seed"]
        labels = self.truth.labels
        return {
            **self.sources.parameters(),
            **chosen,
            "labels": Path(labels) if labels is not None else None,
            "label": self.truth.name,
            "order": self.truth.order,
            "split": self.split,
            "block": self.block,
        }

    def files(self) -> list[str]:
        """Return the files that bear on the result."""
        labels = self.truth.labels
        return [*self.sources.files(), *([labels] if labels is not None else [])]


def set_up(sources: Sources, truth: Truth, settings: Settings) -> Trial:
    """Read the sequence and its labels, and deal them out.

    Raises
    ------
    UsageError
        An option is given that needs labels.
    LabelError
        The labels do not fit the sequence.
    SequenceError
        There is too little sequence for the folds.
    """
    if truth.labels is None and (truth.order is not None or truth.name is not None):
        raise UsageError("--order and --label belong to --labels; give the labels, or leave it out")
    if truth.labels is None:
        contigs = [contig for _, found in sources.read_contigs() for contig in found]
        labels = None
    else:
        contigs, labels = read_labelled(sources, truth.labels, truth.name)
    block = truth.block or block_length(sum(len(contig) for contig in contigs))
    pieces = cut(contigs, block, labels)
    split = truth.split or _natural_split(contigs, settings.folds)
    folds = deal(pieces, settings.folds, split == "contigs")
    return Trial(sources, truth, settings, pieces, folds, split, block)


def _natural_split(contigs: list[Contig], folds: int) -> str:
    """Return ``contigs`` where they are many and none outweighs a fold."""
    lengths = [len(contig) for contig in contigs]
    return "contigs" if max(lengths) * folds <= sum(lengths) else "blocks"
