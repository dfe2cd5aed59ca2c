"""A path of states from the intervals of a BED file."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import LabelError
from hmmseg.regions.labels import without_serial
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.intervals import read_bed

__all__ = ["StatedPath"]


@dataclass(frozen=True, eq=False)
class StatedPath:
    """Intervals of states; what they leave out is background.

    Parameters
    ----------
    names
        The states' names.
    background
        The state of all positions in no interval, None if that is not clear.
    spans
        By record: int64[interval, 3], start, end and state, sorted and apart.
    lines
        By record: file and line of the interval that reaches furthest, and where it ends.
    path
        The file.
    """

    names: tuple[str, ...]
    background: int | None
    spans: Mapping[str, NDArray[np.int64]]
    lines: Mapping[str, tuple[str, int]]
    path: str

    @classmethod
    def read(
        cls, path: str | Path, names: Sequence[str], background: Sequence[int]
    ) -> "StatedPath":
        """Read a BED file whose fourth column names states, with or without a number.

        Parameters
        ----------
        path
            The file.
        names
            The states' names.
        background
            States that are not reported; a single one fills the rest.

        Raises
        ------
        LabelError
            A name is no state, or intervals overlap; the message names file and line.
        """
        found: dict[str, list[tuple[int, int, int, str]]] = {}
        for line in read_bed(path):
            name = line.name if line.name in names else without_serial(line.name)
            if name not in names:
                raise LabelError(
                    f"{line.where}: '{line.name}' is no state of the model, which has "
                    f"{', '.join(names)}"
                )
            found.setdefault(line.record, []).append(
                (line.start, line.end, list(names).index(name), line.where)
            )
        lines = {}
        for record, spans in found.items():
            spans.sort()
            for one, other in pairwise(spans):
                if other[0] < one[1]:
                    raise LabelError(f"{other[3]}: overlaps the interval of {one[3]}")
            lines[record] = (spans[-1][3], spans[-1][1])
        arrays = {r: np.array([s[:3] for s in spans], np.int64) for r, spans in found.items()}
        rest = background[0] if len(background) == 1 else None
        return cls(tuple(names), rest, arrays, lines, str(path))

    def check(self, record_lengths: Mapping[str, int], others_too: bool = False) -> None:
        """Raise LabelError if an interval lies outside the records that were read.

        Parameters
        ----------
        record_lengths
            Lengths of the records in bases.
        others_too
            Pass over intervals of other records, because only some were selected.
        """
        for record, (where, end) in self.lines.items():
            if record not in record_lengths:
                if others_too:
                    continue
                raise LabelError(f"{where}: record {record} is not in the sequence")
            if end > record_lengths[record]:
                raise LabelError(
                    f"{where}: ends at {end}, but record {record} has "
                    f"{record_lengths[record]} bases"
                )

    def on(self, contig: Contig) -> NDArray[np.uint8]:
        """Return uint8[position]: the state of every position of a contig.

        Raises
        ------
        LabelError
            A position is in no interval, and the model has not exactly one background state.
        """
        unknown = len(self.names)
        rest = unknown if self.background is None else self.background
        states = np.full(len(contig), rest, np.uint8)
        for start, end, state in self.spans.get(contig.record, np.empty((0, 3), np.int64)):
            for shift in (contig.start, contig.start - contig.record_length):
                first, last = np.clip((start - shift, end - shift), 0, len(contig))
                states[first:last] = state
        if self.background is None and (states == unknown).any():
            at = (contig.start + int(np.argmax(states == unknown))) % contig.record_length
            raise LabelError(
                f"{self.path}: position {at} of record {contig.record} is in no interval, and the "
                "model has not exactly one background state to fill it with; name every position"
            )
        return states
