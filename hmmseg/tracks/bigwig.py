"""Posterior tracks as bigWig: written in runs of equal values, checked before and after.

References
----------
Kent W. J., Zweig A. S., Barber G., Hinrichs A. S., Karolchik D. (2010). BigWig and BigBed:
enabling browsing of large distributed datasets. Bioinformatics 26, 2204-2207, with the file
layout in its supplement.
"""

import struct
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import numpy as np
import numpy.typing as npt

from hmmseg.errors import OutputError

__all__ = ["PosteriorTrack", "TrackSummary", "rounded_runs", "summarize_track"]

# Runs handed over at once. The layout of the file depends on it, so it is no option.
RUNS_AT_ONCE = 16_384
# Bases read at once when a track is checked: 16 MB of float32.
BASES_AT_ONCE = 4_194_304
MAX_LENGTH = 2**32 - 1
LEVELS = 1000.0

_Runs = tuple[npt.NDArray[np.int64], npt.NDArray[np.int64], npt.NDArray[np.float32]]


def rounded_runs(
    values: npt.ArrayLike,
) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.int64], npt.NDArray[np.float64]]:
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

    The index of names in the file is in input order, not sorted; programs that search it
    rather than read it need sorted names from 65,536 records on.

    Parameters
    ----------
    path : path
        The file to write.
    record_lengths : mapping
        Length of each record in bases, in the order in which runs will come.

    Raises
    ------
    OutputError
        If there are no records, or one is longer than bigWig can hold, or the file cannot be
        written.
    """

    def __init__(self, path: str | Path, record_lengths: Mapping[str, int]) -> None:
        import pyBigWig  # noqa: PLC0415  (start-up time)

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
        self._bases = 0
        self._total = 0.0
        try:
            self.path.touch()  # the library crashes where it cannot make the file
        except OSError as error:
            raise OutputError(f"cannot write {path}: {error.strerror}") from error
        self._file: Any = pyBigWig.open(str(path), "w")
        self._file.addHeader(list(self.record_lengths.items()))

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
            while len(self._pending[0]) > RUNS_AT_ONCE:
                self._hand_over(RUNS_AT_ONCE)

    def close(self) -> None:
        """Close the file, open it again and compare it with what was handed over.

        Raises
        ------
        OutputError
            If the file does not hold it.
        """
        self._hand_over(len(self._pending[0]))
        self._file.close()
        if not self._bases:
            _complete_empty(self.path)
        found = summarize_track(self.path)
        if list(found.record_lengths.items()) != list(self.record_lengths.items()):
            raise OutputError(f"{self.path}: read back, its records differ from those written")
        # Both are sums of the same float32 values in another order.
        if found.bases != self._bases or abs(found.total - self._total) > 1e-9 * self._bases:
            raise OutputError(
                f"{self.path}: read back, it differs from what was written; is the disk full?"
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
        if kind is None:
            self.close()
        else:
            self._file.close()

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
        # The library crashes on NaN and takes an end beyond the record without a word.
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
        starts, ends, values = starts[:number], ends[:number], values[:number]
        try:
            self._file.addEntries(
                [self._record] * number, starts.tolist(), ends=ends.tolist(), values=values.tolist()
            )
        except RuntimeError as error:
            raise OutputError(f"cannot write {self.path}: {error}; is the disk full?") from error
        lengths = ends - starts
        self._bases += int(lengths.sum())
        self._total += float((values.astype(np.float64) * lengths).sum())


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
    import pyBigWig  # noqa: PLC0415  (start-up time)

    bases, total, low, high = 0, 0.0, np.inf, -np.inf
    try:
        file: Any = pyBigWig.open(str(path))
        if not file.isBigWig():
            raise OutputError(f"{path}: not a bigWig file")
        record_lengths = {str(name): int(length) for name, length in file.chroms().items()}
        for name, length in record_lengths.items():
            for start in range(0, length, BASES_AT_ONCE):
                dense = file.values(name, start, min(length, start + BASES_AT_ONCE), numpy=True)
                values = dense[~np.isnan(dense)]
                if len(values):
                    bases += len(values)
                    total += float(values.sum(dtype=np.float64))
                    low, high = min(low, float(values.min())), max(high, float(values.max()))
        file.close()
    except RuntimeError as error:
        raise OutputError(f"{path}: not a readable bigWig file") from error
    if not bases:
        low = high = np.nan
    return TrackSummary(record_lengths, bases, total, low, high)


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


def _complete_empty(path: Path) -> None:
    """Give a bigWig file without values the index that its header must point to.

    pyBigWig leaves the index out and an extreme lowest value in the summary, and other readers
    then refuse the file. Layout: supplement of Kent et al. (2010), tables 5, 7, 14 and 15.
    """
    content = bytearray(path.read_bytes())
    (end_mark,) = struct.unpack_from("<I", content, len(content) - 4)
    del content[-4:]
    (summary,) = struct.unpack_from("<Q", content, 44)
    content[summary : summary + 40] = bytes(40)
    index = len(content)
    struct.pack_into("<Q", content, 24, index)
    content += struct.pack("<IIQIIIIQII", 0x2468ACE0, 256, 0, 0, 0, 0, 0, index, 512, 0)
    content += struct.pack("<BBHI", 1, 0, 0, end_mark)  # one leaf without entries
    path.write_bytes(content)
