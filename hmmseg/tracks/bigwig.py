"""Posterior tracks as bigWig: written in runs of equal values, checked before and after.

The package writes the file itself. pyBigWig 0.3, the usual library, takes time that grows with
the square of the number of records (a minute for 20,000 when tried), crashes or runs for ever
when the disk is full, and makes a file that others cannot read if there are no values. The
tests read what is written here by pyBigWig and by pybigtools.
"""

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from math import isclose
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import numpy as np
import numpy.typing as npt

from hmmseg.errors import OutputError
from hmmseg.tracks.bbi import RUN
from hmmseg.tracks.bigwig_file import RUNS_IN_BLOCK, BigWigWriter
from hmmseg.tracks.bigwig_reader import BigWigReader, explained_reading
from hmmseg.tracks.blocks import NO_SUMS, sums_of
from hmmseg.tracks.packed import PackedTrack

__all__ = [
    "PosteriorTrack",
    "TrackSummary",
    "read_batches",
    "read_track",
    "rounded_runs",
    "summarize_track",
]

MAX_LENGTH = 2**32 - 1
LEVELS = 1000.0

_Integers = npt.NDArray[np.int64]
_Numbers = npt.NDArray[np.float64]
_Runs = tuple[_Integers, _Integers, npt.NDArray[np.float32]]


def rounded_runs(values: npt.ArrayLike) -> tuple[_Integers, _Integers, _Numbers]:
    """Round values to three decimals and join neighbours that are then equal.

    Parameters
    ----------
    values : float64[position]
        Posterior of consecutive positions.

    Returns
    -------
    starts, ends : int64[run]
        Half-open runs, counted from the first position.
    values : float64[run]
        ``floor(1000 x + 0.5) / 1000``: a half is rounded up.

    Raises
    ------
    OutputError
        If a value is NaN or infinite.
    """
    given = np.asarray(values, dtype=np.float64)
    _check_finite(given, "posterior")
    levels = np.floor(given * LEVELS + 0.5)
    changes = np.flatnonzero(levels[1:] != levels[:-1]) + 1
    starts = np.concatenate([np.zeros(min(1, len(levels)), dtype=np.int64), changes])
    ends = np.append(starts[1:], len(levels))[: len(starts)]
    return starts, ends, levels[starts] / LEVELS


class PosteriorTrack:
    """A bigWig file of one value per base, written as a context manager.

    Runs that touch and have equal values are joined, within one call of `add` and across
    calls, so the bytes depend on the values alone and not on how they were handed over.
    Positions without a run, such as gaps, have no value. When the block ends the file is
    closed, opened again and compared with what was handed over.

    Parameters
    ----------
    path : path
        The file to write.
    record_lengths : mapping
        Length of each record in bases, in the order in which runs will come.
    threads : int
        Threads to use; the bytes do not depend on it.

    Raises
    ------
    OutputError
        If there are no records, or one is longer than bigWig can hold, or the file cannot be
        written.
    """

    def __init__(
        self, path: str | Path, record_lengths: Mapping[str, int], threads: int = 1
    ) -> None:
        for name, length in record_lengths.items():
            if not 1 <= length <= MAX_LENGTH:
                raise OutputError(f"{path}: bigWig cannot hold {name} of {length} bases")
        if not record_lengths:
            raise OutputError(f"{path}: a bigWig track needs at least one record")
        self.path = Path(path)
        self.record_lengths = dict(record_lengths)
        self._rank = {name: i for i, name in enumerate(self.record_lengths)}
        self._record = ""
        self._pending = _no_runs()
        with self._explained():
            self._file = BigWigWriter(path, self.record_lengths, threads)

    def add(
        self,
        record: str,
        starts: npt.ArrayLike,
        ends: npt.ArrayLike,
        values: npt.ArrayLike,
    ) -> None:
        """Add runs of one record, after all runs added before.

        Parameters
        ----------
        record : str
            Name of the record: the one before or one that stands later in `record_lengths`.
        starts, ends : int64[run]
            Half-open intervals in ascending order that do not overlap.
        values : float64[run]
            Value of every base of the run; kept as float32.

        Raises
        ------
        OutputError
            If a run is empty, out of order or outside the record, or a value is not finite.
        """
        runs: _Runs = (
            np.asarray(starts, dtype=np.int64),
            np.asarray(ends, dtype=np.int64),
            np.asarray(values, dtype=np.float32),
        )
        if not runs[0].shape == runs[1].shape == runs[2].shape or runs[0].ndim != 1:
            raise OutputError(f"{self.path}: starts, ends and values on {record} differ in number")
        self._turn_to(record)
        if len(runs[0]):
            self._check(runs)
            self._pending = _joined(self._pending, runs)
            # The last run stays behind: the next call may continue it.
            while len(self._pending[0]) > RUNS_IN_BLOCK:
                self._hand_over(RUNS_IN_BLOCK)

    def expect(self, part: PackedTrack) -> None:
        """Take note of what another track holds, of which every record will be copied."""
        self._file.count_in(*part.sums)

    def copy(self, record: str, part: PackedTrack, alias: str) -> None:
        """Take over all runs of a record from another track, without unpacking them.

        Parameters
        ----------
        record : str
            Name of the record: one that stands later in `record_lengths` than those before.
        part : PackedTrack
            The other track.
        alias : str
            What the record is called there.

        Raises
        ------
        OutputError
            If the other track cannot be read or does not have the record, or if runs of the record
            are there already.
        """
        if record == self._record:
            raise OutputError(f"{self.path}: there are runs of {record} already")
        self._turn_to(record)
        if part.record_lengths.get(alias) != self.record_lengths[record]:
            raise OutputError(f"{part.path}: record {alias} is not in it, or of another length")
        with explained_reading(part.path):
            for blocks, packed in part.blocks_of(alias):
                with self._explained():
                    self._file.copy_blocks(self._rank[record], blocks, packed)

    def close(self) -> None:
        """Close the file, open it again and compare it with what was handed over.

        Raises
        ------
        OutputError
            If the file does not hold it.
        """
        self._hand_over(len(self._pending[0]))
        with self._explained(), explained_reading(self.path):
            index = self._file.finish()
            with BigWigReader(self.path) as file:
                lengths, same_index = file.record_lengths, np.array_equal(file.blocks, index)
        found = self._file.found
        if lengths != self.record_lengths:
            raise OutputError(f"{self.path}: read back, its records differ from those written")
        # The total has been summed up in another order.
        same_total = isclose(found.total, self._file.total, rel_tol=1e-9, abs_tol=1e-9)
        if not (same_index and found.bases == self._file.bases and same_total):
            raise OutputError(
                f"{self.path}: read back, it differs from what was written; is the disk sound?"
            )

    def __enter__(self) -> Self:
        """Return the track itself."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        traceback: TracebackType | None,
    ) -> None:
        """Close and check the file, or only let go of it if the block failed."""
        try:
            if kind is None:
                self.close()
        finally:
            self._file.abandon()

    def _turn_to(self, record: str) -> None:
        if record == self._record:
            return
        if record not in self._rank:
            raise OutputError(f"{self.path}: {record} is not among the records of the track")
        if self._record and self._rank[record] < self._rank[self._record]:
            raise OutputError(f"{self.path}: {record} comes after {self._record}, out of order")
        self._hand_over(len(self._pending[0]))
        self._record = record

    def _check(self, runs: _Runs) -> None:
        # Nobody who reads the file would see an end beyond the record.
        starts, ends, values = runs
        where = f"{self.path}: {self._record}"
        _check_finite(values, where)
        last = int(self._pending[1][-1]) if len(self._pending[1]) else 0
        before = np.concatenate([[last], ends[:-1]])
        length = self.record_lengths[self._record]
        for rule, broken in (
            ("is empty", ends <= starts),
            ("begins before the end of the run before it", starts < before),
            (f"ends beyond the record's {length} bases", ends > length),
        ):
            if broken.any():
                at = int(np.argmax(broken))
                raise OutputError(f"{where}: run {starts[at]}-{ends[at]} {rule}")

    def _hand_over(self, number: int) -> None:
        if not number:
            return
        starts, ends, values = self._pending
        self._pending = starts[number:], ends[number:], values[number:]
        runs = np.empty(number, dtype=RUN)
        runs["start"], runs["end"], runs["value"] = starts[:number], ends[:number], values[:number]
        with self._explained():
            self._file.write_runs(self._rank[self._record], runs)

    @contextmanager
    def _explained(self) -> Iterator[None]:
        try:
            yield
        except OSError as error:
            raise OutputError(
                f"cannot write {self.path}: {error.strerror}; make room or choose another place"
            ) from error


@dataclass(frozen=True)
class TrackSummary:
    """What a bigWig file holds: records, bases with a value, their sum, lowest and highest."""

    record_lengths: dict[str, int]
    bases: int
    total: float
    lowest: float
    highest: float


def summarize_track(path: str | Path) -> TrackSummary:
    """Read every value of a bigWig file, in pieces.

    Returns
    -------
    TrackSummary
        `lowest` and `highest` are NaN if no base has a value.

    Raises
    ------
    OutputError
        If the file is no readable bigWig.
    """
    found = NO_SUMS
    with explained_reading(path), BigWigReader(path) as file:
        record_lengths = file.record_lengths
        lengths = np.array(list(record_lengths.values()), dtype=np.int64)
        for records, runs in file.batches(size=max(map(int, lengths), default=1)):
            found = found.and_of(sums_of(records, runs, lengths))
    low, high = (found.lowest, found.highest) if found.bases else (np.nan, np.nan)
    return TrackSummary(record_lengths, found.bases, found.total, low, high)


def read_track(path: str | Path) -> Iterator[tuple[str, _Integers, _Integers, _Numbers]]:
    """Read the runs of a bigWig file written by `PosteriorTrack`, in its order.

    Yields
    ------
    record : str
        Name of the record.
    starts, ends : int64[run]
        Half-open intervals; a record comes in several pieces if it has many runs.
    values : float64[run]
        Value of every base of the run.

    Raises
    ------
    OutputError
        If the file is no readable bigWig.
    """
    with explained_reading(path), BigWigReader(path) as file:
        names = list(file.record_lengths)
        for record, runs in file.runs():
            starts, ends = runs["start"].astype(np.int64), runs["end"].astype(np.int64)
            yield names[record], starts, ends, runs["value"].astype(np.float64)


def read_batches(
    path: str | Path, record_lengths: Mapping[str, int], size: int
) -> Iterator[tuple[_Integers, npt.NDArray[np.void]]]:
    """Read the runs of a bigWig file in batches that span many records.

    Parameters
    ----------
    path : path
        Written by `PosteriorTrack`.
    record_lengths : mapping
        Length of each record in bases; what the file holds of other records is left out.
    size : int
        Bases to the bins into which the runs will be cut.

    Yields
    ------
    records : int64[run]
        Place of each run's record in `record_lengths`.
    runs : RUN[run]
        Ordered by record and position, as in the file.

    Raises
    ------
    OutputError
        If the file is no readable bigWig, or a record has another length in it.
    """
    rank = {name: number for number, name in enumerate(record_lengths)}
    with explained_reading(path), BigWigReader(path) as file:
        for name, length in file.record_lengths.items():
            if record_lengths.get(name, length) != length:
                raise OutputError(f"{path}: {name} has another length there; make it again")
        ranks = np.array([rank.get(name, -1) for name in file.record_lengths], dtype=np.int64)
        for numbers, runs in file.batches(size):
            places = ranks[numbers]
            wanted = places >= 0
            yield (places, runs) if wanted.all() else (places[wanted], runs[wanted])


def _no_runs() -> _Runs:
    return np.empty(0, np.int64), np.empty(0, np.int64), np.empty(0, np.float32)


def _joined(first: _Runs, second: _Runs) -> _Runs:
    """Put runs one after the other, those that touch and have equal values as one."""
    starts = np.concatenate([first[0], second[0]])
    ends = np.concatenate([first[1], second[1]])
    values = np.concatenate([first[2], second[2]])
    continues = (starts[1:] == ends[:-1]) & (values[1:] == values[:-1])
    opening = np.concatenate([[True], ~continues])
    closing = np.concatenate([~continues, [True]])
    return starts[opening], ends[closing], values[opening]


def _check_finite(values: npt.NDArray[Any], where: str) -> None:
    finite = np.isfinite(values)
    if not finite.all():
        at = int(np.argmin(finite))
        raise OutputError(f"{where}: value {at} is {values[at]}, not a finite number")
