"""Contigs with the labels that lie on them, as several commands read them."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hmmseg.jobs.sources import Sources
from hmmseg.regions.labels import Labels
from hmmseg.sequence.contigs import Contig

__all__ = ["read_labelled"]


def read_labelled(
    sources: Sources, path: str, name: str | None = None
) -> tuple[list[Contig], Sequence[NDArray[np.int64]]]:
    """Return all contigs, and int64[interval, 2] labelled regions of each.

    Parameters
    ----------
    sources
        The sequence.
    path
        Known regions as BED.
    name
        Use only intervals of this name, or of this name with a number.

    Raises
    ------
    LabelError
        The labels do not fit the sequence.
    """
    labels = Labels.read(path, name)
    lengths: dict[str, int] = {}
    contigs: list[Contig] = []
    for record, found in sources.read_contigs():
        lengths[record.name] = len(record)
        contigs += found
    labels.check(lengths, sources.selects)
    return contigs, [labels.on(contig) for contig in contigs]
