"""What a command reads: sequence files, and which records and parts of them."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hmmseg.errors import SequenceError
from hmmseg.progress import warn
from hmmseg.sequence.contigs import GAP_MIN, Contig, split
from hmmseg.sequence.reading import Record, read_records
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
    """

    fasta: tuple[str, ...]
    records: str | None = None
    min_record: int = 0
    exclude: str | None = None
    circular: tuple[str, ...] = ()
    gap_min: int = GAP_MIN

    def read(self) -> Iterator[Record]:
        """Yield the selected records."""
        selection = self._selection()
        yield from selection.apply(read_records(self.fasta))

    def read_contigs(self) -> Iterator[tuple[Record, list[Contig]]]:
        """Yield the selected records and their contigs; warn of records without any.

        Raises
        ------
        SequenceError
            No record has a known base.
        """
        selection = self._selection()
        found = False
        for record in selection.apply(read_records(self.fasta)):
            contigs = split(record, self.gap_min, selection.exclude.get(record.name))
            if not contigs:
                warn(f"record {record.name}: skipped, it has no known base outside gaps")
            found = found or bool(contigs)
            yield record, contigs
        if not found:
            raise SequenceError(
                f"{', '.join(self.fasta)}: no record has a known base outside gaps and "
                "exclusions; check the file or the selection"
            )

    def _selection(self) -> Selection:
        return Selection.from_options(self.records, self.min_record, self.exclude, self.circular)

    def parameters(self) -> dict[str, Any]:
        """Return what is to stand in the provenance."""
        return {
            "fasta": [Path(path).name for path in self.fasta],
            "records": Path(self.records) if self.records else None,
            "min_record": self.min_record,
            "exclude": Path(self.exclude) if self.exclude else None,
            "circular": list(self.circular),
            "gap_min": self.gap_min,
        }

    def files(self) -> Sequence[str]:
        """Return the files that bear on the result."""
        return [*self.fasta, *(path for path in (self.records, self.exclude) if path)]
