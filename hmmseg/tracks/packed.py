"""Posterior tracks in many files, read record by record in any order."""

from collections import OrderedDict
from collections.abc import Iterator
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import numpy as np
import numpy.typing as npt

from hmmseg.errors import OutputError
from hmmseg.tracks.bigwig import explained_reading
from hmmseg.tracks.bigwig_file import BigWigReader

__all__ = ["TrackCollection"]

_OPEN_AT_ONCE = 100
"""Systems let a process open some hundreds of files; a large assembly has more batches."""

_Runs = tuple[npt.NDArray[np.int64], npt.NDArray[np.int64], npt.NDArray[np.float64]]


class TrackCollection:
    """Hands out the runs of single records; used as a context manager, which closes the files."""

    def __init__(self) -> None:
        self._open: OrderedDict[Path, tuple[BigWigReader, dict[str, int]]] = OrderedDict()

    def runs(self, path: Path, record: str) -> Iterator[_Runs]:
        """Yield the runs of a record in a file: starts, ends, values, in pieces.

        Raises
        ------
        OutputError
            The file is no readable bigWig, or does not have the record.
        """
        with explained_reading(path):
            reader, numbers = self._reader(path)
            if record not in numbers:
                raise OutputError(f"{path}: record {record} is not in it")
            for runs in reader.runs_of(numbers[record]):
                starts, ends = runs["start"].astype(np.int64), runs["end"].astype(np.int64)
                yield starts, ends, runs["value"].astype(np.float64)

    def _reader(self, path: Path) -> tuple[BigWigReader, dict[str, int]]:
        if path not in self._open:
            if len(self._open) >= _OPEN_AT_ONCE:
                _, (oldest, _) = self._open.popitem(last=False)
                oldest.close()
            reader = BigWigReader(path)
            numbers = {name: number for number, name in enumerate(reader.record_lengths)}
            self._open[path] = reader, numbers
        self._open.move_to_end(path)
        return self._open[path]

    def __enter__(self) -> Self:
        """Return the collection itself."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        traceback: TracebackType | None,
    ) -> Any:
        """Close all files."""
        for reader, _ in self._open.values():
            reader.close()
        self._open.clear()
