"""Posterior tracks of records whose number and lengths are not known before they have been read.

A bigWig begins with the lengths of all records, but records may come from standard input, one
at a time. Runs therefore wait in a plain temporary file until the last record has been seen.
"""

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.tracks.bigwig import LEVELS, PosteriorTrack, rounded_runs

__all__ = ["SpooledTrack"]

_RUN = np.dtype([("start", "<i8"), ("end", "<i8"), ("level", "<u4")])
_AT_ONCE = 1 << 20


class _Segment(NamedTuple):
    record: str
    start: int
    first: int
    runs: int


class SpooledTrack:
    """Collects posteriors in any order, and writes them as a bigWig in the order of records.

    Parameters
    ----------
    path
        The bigWig to be; the temporary file stands beside it until :meth:`finish`.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._spool = path.with_name(f".{path.name}.runs")
        self._spool.write_bytes(b"")
        self._segments: list[_Segment] = []
        self._written = 0

    def add(self, record: str, start: int, posterior: NDArray[np.float64]) -> None:
        """Add the posterior of consecutive positions of a record, from ``start`` on.

        Parameters
        ----------
        record
            Its name.
        start
            Position of the first value.
        posterior
            float64[position].
        """
        starts, ends, values = rounded_runs(posterior)
        self.add_runs(record, starts + start, ends + start, values)

    def add_runs(
        self,
        record: str,
        starts: NDArray[np.int64],
        ends: NDArray[np.int64],
        values: NDArray[np.float64],
    ) -> None:
        """Add runs of a record, of which none overlap.

        Parameters
        ----------
        record
            Its name.
        starts, ends
            int64[run]: half-open, in ascending order.
        values
            float64[run]: from 0 up, rounded to three decimals.
        """
        runs = np.empty(len(starts), _RUN)
        runs["start"], runs["end"] = starts, ends
        runs["level"] = np.floor(values * LEVELS + 0.5)
        if not len(runs):
            return
        with self._spool.open("ab") as file:
            file.write(runs.tobytes())
        self._segments.append(_Segment(record, int(starts[0]), self._written, len(runs)))
        self._written += len(runs)

    def finish(self, record_lengths: Mapping[str, int], threads: int = 1) -> None:
        """Write the bigWig.

        Parameters
        ----------
        record_lengths
            Length of every record in bases, in order.
        threads
            Threads to use; the bytes do not depend on it.

        Raises
        ------
        OutputError
            The track cannot be written, or does not read back.
        """
        rank = {name: number for number, name in enumerate(record_lengths)}
        ordered = sorted(self._segments, key=lambda segment: (rank[segment.record], segment.start))
        with PosteriorTrack(self._path, record_lengths, threads) as track:
            for record, runs in self._pieces(ordered):
                track.add(record, runs["start"], runs["end"], runs["level"] / LEVELS)
        self._spool.unlink()

    def _pieces(self, segments: list[_Segment]) -> Iterator[tuple[str, NDArray[np.void]]]:
        with self._spool.open("rb") as file:
            for segment in segments:
                for skipped in range(0, segment.runs, _AT_ONCE):
                    file.seek((segment.first + skipped) * _RUN.itemsize)
                    count = min(_AT_ONCE, segment.runs - skipped)
                    yield segment.record, np.fromfile(file, _RUN, count)
