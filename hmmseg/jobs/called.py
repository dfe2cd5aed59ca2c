"""A folder of calls, and how they were made."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import pandas as pd

from hmmseg.errors import OutputError
from hmmseg.jobs.results import read_summary
from hmmseg.jobs.sources import Sources
from hmmseg.model import Model
from hmmseg.outputs import sha256_of
from hmmseg.provenance import is_intact, read_provenance
from hmmseg.regions.calling import PATH, POSTERIOR
from hmmseg.regions.intervals import Filters
from hmmseg.regions.odds import LogOdds
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.identity import KnownRecord, checksums
from hmmseg.sequence.reading import Record
from hmmseg.tracks.records import read_record_table
from hmmseg.tracks.table import read_regions_table

__all__ = ["Called", "read_called"]

_ENOUGH_CHECKED = 50
_BITS_TOLERANCE = 2e-3


@dataclass(frozen=True, eq=False)
class Called:
    """What a folder of calls holds, and with what settings it was made.

    Attributes
    ----------
    folder : Path
    table : DataFrame
        The regions.
    records : mapping of str to KnownRecord
        Every record by its name.
    summary : dict
        The document ``summary.json``.
    provenance : dict
        The document ``provenance.json``.
    """

    folder: Path
    table: pd.DataFrame
    records: Mapping[str, KnownRecord]
    summary: dict[str, Any]
    provenance: dict[str, Any]

    @property
    def record_lengths(self) -> dict[str, int]:
        """Length of every record in bases."""
        return {name: row.length for name, row in self.records.items()}

    @property
    def settings(self) -> dict[str, Any]:
        """How regions were called."""
        found: dict[str, Any] = self.provenance["parameters"]
        return found

    def decoder(self, model: Model) -> str:
        """Return ``path`` or ``posterior``, as it is by default where none was asked for."""
        asked = self.settings["decoder"]
        return asked or (POSTERIOR if max(model.stages) > 1 else PATH)

    @property
    def threshold(self) -> float:
        """Of the posterior decoder."""
        value = self.settings["threshold"]
        return 0.5 if value is None else float(value)

    @property
    def filters(self) -> Filters:
        """Merging, shortest length, and where ends stand."""
        return Filters(*(int(self.settings[name]) for name in Filters._fields))

    @cached_property
    def _rows(self) -> Mapping[str, list[int]]:
        """Rows of the table by their record, found once for all records."""
        indices = self.table.groupby("record", sort=False).indices
        return {str(name): [int(row) for row in rows] for name, rows in indices.items()}

    @property
    def bases(self) -> int:
        """How many were decoded."""
        return int(self.summary["decoded_bases"])

    def sources(self, fasta: Sequence[str], exclude: str | None) -> Sources:
        """Return the sequence as it was read for the calls.

        Parameters
        ----------
        fasta
            The sequence files.
        exclude
            Intervals that were left out.

        Raises
        ------
        OutputError
            The calls left out other intervals.
        """
        settings = self.settings
        given = Path(exclude).name if exclude else None
        if given != settings["exclude"]:
            wanted = f"give --exclude {settings['exclude']}" if settings["exclude"] else "leave it"
            raise self._other("other intervals left out", wanted)
        return Sources(
            tuple(fasta),
            exclude=exclude,
            circular=tuple(settings["circular"]),
            gap_min=int(settings["gap_min"]),
            soft_mask=str(settings["soft_mask"]),
        )

    def check_intact(self) -> None:
        """Raise OutputError if a file is not as it was when the calls were made."""
        if not is_intact(self.folder, self.provenance):
            raise OutputError(f"{self.folder}: changed since these calls were made; make them anew")

    def check_model(self, path: str, model: Model) -> None:
        """Raise OutputError if the calls name another model, or the model reports other states."""
        known = {entry["name"]: entry["sha256"] for entry in self.provenance["inputs"]}
        recorded = known.get(Path(path).name)
        if recorded is not None and recorded != sha256_of(path):
            raise self._other("another model", f"give the model they were made with, not {path}")
        names = [name for name, kept in zip(model.names, model.reported, strict=True) if kept]
        if names != list(self.summary["regions"]):
            raise self._other("another model", f"its reported states are {', '.join(names)}")

    def check_record(self, record: Record, contigs: list[Contig], odds: LogOdds) -> None:
        """Raise OutputError if a record or the scores of its regions are not those of the calls.

        Parameters
        ----------
        record
            One of those that were called.
        contigs
            Its contigs.
        odds
            Of the reported states, in the order of the summary.
        """
        name = record.name
        if checksums(record.bases) != self.records[name].sequence:
            raise self._other("another sequence", f"record {name} has other bases here")
        if record.circular != self.records[name].circular:
            raise self._other("another sequence", f"record {name} has another topology here")
        states = list(self.summary["regions"])
        rows = self.table.iloc[self._rows.get(name, [])[:_ENOUGH_CHECKED]]
        columns = ("region_id", "state", "start", "length", "log_odds_bits")
        for region, state, start, size, bits in zip(*(rows[c] for c in columns), strict=True):
            places = [((start - c.start) % c.record_length, c) for c in contigs]
            inside = [(at, c) for at, c in places if at + size <= len(c)]
            if not inside and not any(c.closed for c in contigs):
                raise self._other("other gaps or exclusions", f"{region} lies in no contig")
            for at, contig in inside:
                own = float(odds.window(contig, at, at + size)[states.index(state)].sum())
                if abs(own - bits) > _BITS_TOLERANCE:
                    raise self._other(
                        "another sequence or model",
                        f"{region} has {bits:.3f} bits there, {own:.3f} here",
                    )

    def check_whole(self, found: set[str], bases: int) -> None:
        """Raise OutputError if records are missing, or other bases were decoded."""
        missing = [name for name in self.records if name not in found]
        if missing:
            raise self._other("another sequence", f"record {missing[0]} is not in the one given")
        if bases != self.bases:
            raise self._other(
                "another sequence",
                f"{self.bases:,} bases were decoded, but the one given has {bases:,}",
            )

    def _other(self, what: str, detail: str) -> OutputError:
        return OutputError(f"{self.folder}: these calls were made with {what}; {detail}")


def read_called(folder: str | Path) -> Called:
    """Read a folder that ``decode`` or ``gather`` wrote.

    Raises
    ------
    OutputError
        It is none.
    """
    root = Path(folder)
    summary = read_summary(root)
    provenance = read_provenance(root)
    if provenance["command"] not in ("decode", "gather"):
        raise OutputError(
            f"{root}: made by {provenance['command']}; give a folder written by decode or gather"
        )
    return Called(
        root,
        read_regions_table(root / "regions.tsv"),
        {row.name: row for row in read_record_table(root / "records.tsv")},
        summary,
        provenance,
    )
