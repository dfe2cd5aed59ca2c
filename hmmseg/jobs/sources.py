"""What a command reads: sequence files, and which records and parts of them."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import SequenceError
from hmmseg.progress import warn
from hmmseg.sequence.alphabet import MISSING
from hmmseg.sequence.contigs import GAP_MIN, Contig, split
from hmmseg.sequence.reading import Record, read_records
from hmmseg.sequence.sampling import sample_contigs
from hmmseg.sequence.selection import Selection

__all__ = ["Sources"]


@dataclass(frozen=True)
class Sources:
    """Sequence files and a selection of their records.

    Parameters
    ----------
    fasta
        FASTA or GenBank files; ``-`` is standard input.
    records
        A file that lists the records to use.
    min_record
        Shortest record to use, in bases.
    exclude
        A BED file of intervals to leave out.
    circular
        Records that are circular whatever their header says.
    gap_min
        Shortest run of N that is a gap.
    soft_mask
        ``"use"``: lower-case bases are ordinary; ``"hide"``: they are missing. None: whatever
        the model or the preset at hand says, else ``"use"``.
    without
        Records that are read but not used.
    """

    fasta: tuple[str, ...]
    records: str | None = None
    min_record: int = 0
    exclude: str | None = None
    circular: tuple[str, ...] = ()
    gap_min: int = GAP_MIN
    soft_mask: str | None = None
    without: tuple[str, ...] = ()

    def with_soft_mask(self, policy: str) -> "Sources":
        """Return the same with a policy, unless one was asked for."""
        return self if self.soft_mask is not None else replace(self, soft_mask=policy)

    def read(self) -> Iterator[Record]:
        """Yield the selected records."""
        selection = self._selection()
        yield from selection.apply(read_records(self.fasta))

    def read_contigs(self, again: bool = False) -> Iterator[tuple[Record, list[Contig]]]:
        """Yield the selected records and their contigs; the first time, warn of records without.

        Raises
        ------
        SequenceError
            No record has a known base.
        """
        selection = self._selection()
        found = False
        for record in selection.apply(read_records(self.fasta)):
            if record.name in self.without:
                continue
            seen = _hidden(record) if self.soft_mask == "hide" else record
            contigs = split(seen, self.gap_min, selection.exclude.get(record.name))
            if not contigs and not again:
                warn(f"record {record.name}: skipped, it has no known base outside gaps")
            found = found or bool(contigs)
            yield record, contigs
        if not found:
            raise SequenceError(
                f"{', '.join(self.fasta)}: no record has a known base outside gaps and "
                "exclusions; check the file or the selection"
            )

    def read_sample(self, bases: int | None, seed: int) -> tuple[list[Contig], bool]:
        """Return the contigs, or a seeded sample of about so many bases, and whether it is one."""
        everything = (contig for _, found in self.read_contigs() for contig in found)
        return (
            (list(everything), False) if bases is None else sample_contigs(everything, bases, seed)
        )

    def exclusions(self) -> Mapping[str, NDArray[np.int64]]:
        """Return the intervals of each record that are left out, int64[interval, 2]."""
        return self._selection().exclude

    def _selection(self) -> Selection:
        return Selection.from_options(self.records, self.min_record, self.exclude, self.circular)

    @property
    def selects(self) -> bool:
        """Whether some of the records may be left out."""
        return self.records is not None or self.min_record > 0 or self.exclude is not None

    def parameters(self) -> dict[str, Any]:
        """Return what is to stand in the provenance."""
        return {
            "fasta": [Path(path).name for path in self.fasta],
            "records": Path(self.records) if self.records else None,
            "min_record": self.min_record,
            "exclude": Path(self.exclude) if self.exclude else None,
            "circular": list(self.circular),
            "gap_min": self.gap_min,
            "soft_mask": self.soft_mask or "use",
            **({"without": list(self.without)} if self.without else {}),
        }

    def files(self) -> Sequence[str]:
        """Return the files that bear on the result."""
        return [*self.fasta, *(path for path in (self.records, self.exclude) if path)]


def _hidden(record: Record) -> Record:
    """Return the record with its soft-masked bases missing."""
    bases = record.bases.copy()
    for start, end in record.soft_mask:
        bases[start:end] = MISSING
    return replace(record, bases=bases)
