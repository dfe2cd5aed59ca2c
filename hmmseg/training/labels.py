"""Labels: intervals of which the state is known."""

import itertools
from collections.abc import Mapping, Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import LabelError
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.intervals import BedLine, read_bed

__all__ = ["label_names", "labels_of_contigs", "read_labels"]

UNLABELLED = 0


def read_labels(
    path: str | Path, record_lengths: Mapping[str, int], others_too: bool = False
) -> list[BedLine]:
    """Read labels, checked against the records and each other.

    Parameters
    ----------
    path
        A BED file whose fourth column names the state.
    record_lengths
        Lengths of the records in bases.
    others_too
        Pass over labels of other records, because only some were selected.

    Returns
    -------
    list of BedLine
        Sorted by record and start.

    Raises
    ------
    LabelError
        A line has no name, names no record, reaches beyond one, or overlaps another.
    """
    lines = list(read_bed(path))
    if not lines:
        raise LabelError(f"{path}: no label in it; give a BED file with states in column 4")
    if others_too:
        lines = [line for line in lines if line.record in record_lengths]
    for line in lines:
        if line.record not in record_lengths:
            raise LabelError(f"{line.where}: record {line.record} is not in the sequence")
        if line.end > record_lengths[line.record]:
            raise LabelError(
                f"{line.where}: ends at {line.end}, but record {line.record} is "
                f"{record_lengths[line.record]} bases long"
            )
        if not line.name:
            raise LabelError(f"{line.where}: no state in column 4")
    lines.sort(key=lambda line: (line.record, line.start, line.end))
    for one, other in itertools.pairwise(lines):
        if one.record == other.record and other.start < one.end:
            raise LabelError(f"{other.where}: overlaps the label of {one.where}; keep one of them")
    return lines


def label_names(lines: Sequence[BedLine]) -> list[str]:
    """Return the states that are named, in alphabetical order."""
    return sorted({line.name for line in lines})


def labels_of_contigs(
    lines: Sequence[BedLine], contigs: Sequence[Contig], names: Sequence[str]
) -> list[NDArray[np.uint8]]:
    """Return the labels of every position.

    Parameters
    ----------
    lines
        As from :func:`read_labels`.
    contigs
        The sequence.
    names
        The states' names.

    Returns
    -------
    list of uint8[position]
        For each contig 0 where nothing is known, ``s + 1`` where the state is ``s``.

    Raises
    ------
    LabelError
        A label names no state, or lies in a gap or in a part that is left out.
    """
    result = [np.zeros(len(contig), np.uint8) for contig in contigs]
    of_record: dict[str, list[int]] = {}
    for number, contig in enumerate(contigs):
        of_record.setdefault(contig.record, []).append(number)
    numbers = {name: number for number, name in enumerate(names)}
    for line in lines:
        if line.name not in numbers:
            raise LabelError(
                f"{line.where}: '{line.name}' is no state of the model, which has "
                f"{', '.join(names)}"
            )
        if line.record not in of_record:
            continue  # not selected
        placed = sum(
            _place(line, contigs[number], result[number], numbers[line.name] + 1)
            for number in of_record[line.record]
        )
        if placed < line.end - line.start:
            raise LabelError(
                f"{line.where}: lies in a gap or in a part that is left out; cut the label there"
            )
    return result


def _place(line: BedLine, contig: Contig, labels: NDArray[np.uint8], label: int) -> int:
    """Label the part of an interval that lies on a contig; return its length."""
    placed = 0
    # A contig across the origin holds the record's first bases behind its last ones.
    for offset in (contig.start, contig.start - contig.record_length):
        begin, stop = max(line.start - offset, 0), min(line.end - offset, len(contig))
        if begin < stop:
            labels[begin:stop] = label
            placed += stop - begin
    return placed
