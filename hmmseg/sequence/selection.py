"""Which records, and which parts of them, a command works on."""

from collections.abc import Collection, Iterable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
import numpy.typing as npt

from hmmseg.errors import LabelError, SequenceError, UsageError
from hmmseg.sequence.intervals import BedLine, merge, read_bed
from hmmseg.sequence.reading import Record
from hmmseg.sequence.source import open_text

__all__ = ["Selection"]


@dataclass(frozen=True, eq=False)
class Selection:
    """A choice of records.

    Attributes
    ----------
    names : frozenset of str, optional
        Records to keep; all if None.
    min_length : int
        Shortest record to keep, in bases.
    exclude : mapping of str to int64[interval, 2]
        Per record the intervals to leave out, merged; `hmmseg.sequence.contigs.split` takes
        them.
    circular : frozenset of str
        Records that are circular whatever their header says.
    origins : mapping of str to BedLine
        Per record the exclusion that reaches furthest, for messages.
    listed : mapping of str to str
        Per name in ``names`` the file and line it was read from, for messages.
    """

    names: frozenset[str] | None = None
    min_length: int = 0
    exclude: Mapping[str, npt.NDArray[np.int64]] = field(default_factory=dict)
    circular: frozenset[str] = frozenset()
    origins: Mapping[str, BedLine] = field(default_factory=dict)
    listed: Mapping[str, str] = field(default_factory=dict)

    @classmethod
    def from_options(
        cls,
        records_file: str | Path | None = None,
        min_record: int = 0,
        exclude_bed: str | Path | None = None,
        circular_names: Collection[str] = (),
    ) -> "Selection":
        """Build a selection from what a command was given.

        Parameters
        ----------
        records_file : path, optional
            One record name per line; blank lines and those that begin with ``#`` are ignored.
        min_record : int
            Shortest record to keep, in bases.
        exclude_bed : path, optional
            Intervals to leave out.
        circular_names : collection of str

        Raises
        ------
        LabelError
            A file cannot be read or a line of it is malformed; the message names both.
        UsageError
            ``min_record`` is negative.
        """
        if min_record < 0:
            raise UsageError(f"--min-record must be 0 or more, not {min_record}")
        listed = _read_names(records_file) if records_file is not None else {}
        exclude, origins = _read_exclusions(exclude_bed) if exclude_bed is not None else ({}, {})
        return cls(
            names=None if records_file is None else frozenset(listed),
            min_length=min_record,
            exclude=exclude,
            circular=frozenset(circular_names),
            origins=origins,
            listed=listed,
        )

    def apply(self, records: Iterable[Record]) -> Iterator[Record]:
        """Pass on the selected records, those named circular made so.

        Parameters
        ----------
        records : iterable of Record

        Yields
        ------
        Record

        Raises
        ------
        LabelError
            An exclusion reaches past its record's end; once the records are used up, a record
            was asked for that is not among them.
        SequenceError
            Once the records are used up: none was selected.
        """
        seen: set[str] = set()
        kept = 0
        for record in records:
            seen.add(record.name)
            self._check_bounds(record)
            if self.names is not None and record.name not in self.names:
                continue
            if len(record) < self.min_length:
                continue
            kept += 1
            if record.name in self.circular and not record.circular:
                yield replace(record, circular=True)
            else:
                yield record
        self._check_seen(seen)
        if kept == 0:
            raise SequenceError(
                f"none of {len(seen)} records is selected (shortest record to keep: "
                f"{self.min_length} bases); widen the selection"
            )

    def _check_bounds(self, record: Record) -> None:
        """Raise if an excluded interval reaches past the record's end."""
        intervals = self.exclude.get(record.name)
        if intervals is None:
            return
        line = self.origins.get(record.name)
        end = line.end if line else int(intervals.max(initial=0))
        if end > len(record):
            raise LabelError(
                f"{line.where if line else '--exclude'}: interval ends at {end} but record "
                f"{record.name} is {len(record)} bases long; use intervals of this assembly"
            )

    def _check_seen(self, seen: set[str]) -> None:
        """Raise if a record was asked for that was not among those read."""
        advice = "is not in the sequence; check the name"
        for name in sorted((self.names or frozenset()) - seen):
            raise LabelError(f"{self.listed.get(name, '--records')}: record {name} {advice}")
        for name in sorted(self.exclude.keys() - seen):
            line = self.origins.get(name)
            raise LabelError(f"{line.where if line else '--exclude'}: record {name} {advice}")
        for name in sorted(self.circular - seen):
            raise LabelError(f"--circular: record {name} {advice}")


def _read_names(path: str | Path) -> dict[str, str]:
    """Read a list of record names; each name's value is its file and line."""
    names: dict[str, str] = {}
    with open_text(path, LabelError) as text:
        for number, line in enumerate(text.lines(), 1):
            name = line.strip()
            if not name or name.startswith("#"):
                continue
            where = f"{text.name}:{number}"
            if len(name.split()) > 1:
                raise LabelError(f"{where}: one record name per line, without spaces")
            names.setdefault(name, where)
    if not names:
        raise LabelError(f"{path}: no record name in it; list one per line")
    return names


def _read_exclusions(
    path: str | Path,
) -> tuple[dict[str, npt.NDArray[np.int64]], dict[str, BedLine]]:
    """Read intervals to exclude, merged, and per record the line that reaches furthest."""
    spans: dict[str, list[tuple[int, int]]] = {}
    furthest: dict[str, BedLine] = {}
    for line in read_bed(path):
        spans.setdefault(line.record, []).append((line.start, line.end))
        if line.record not in furthest or line.end > furthest[line.record].end:
            furthest[line.record] = line
    merged = {name: merge(np.array(pairs, dtype=np.int64)) for name, pairs in spans.items()}
    return merged, furthest
