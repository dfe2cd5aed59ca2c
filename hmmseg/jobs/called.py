"""A folder of calls, and how they were made."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd

from hmmseg.errors import OutputError
from hmmseg.jobs.gather import read_summary
from hmmseg.jobs.sources import Sources
from hmmseg.model import Model
from hmmseg.outputs import sha256_of
from hmmseg.provenance import read_provenance
from hmmseg.regions.intervals import Filters
from hmmseg.regions.odds import LogOdds
from hmmseg.sequence.contigs import Contig
from hmmseg.tracks.sizes import read_chrom_sizes
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
    record_lengths : mapping
        Of every record.
    summary : dict
        The document ``summary.json``.
    provenance : dict
        The document ``provenance.json``.
    """

    folder: Path
    table: pd.DataFrame
    record_lengths: Mapping[str, int]
    summary: dict[str, Any]
    provenance: dict[str, Any]

    @property
    def settings(self) -> dict[str, Any]:
        """How regions were called."""
        found: dict[str, Any] = self.provenance["parameters"]
        return found

    @property
    def decoder(self) -> str:
        """``path`` or ``posterior``."""
        return str(self.settings["decoder"])

    @property
    def threshold(self) -> float:
        """Of the posterior decoder."""
        value = self.settings["threshold"]
        return 0.5 if value is None else float(value)

    @property
    def filters(self) -> Filters:
        """Merging and shortest length."""
        return Filters(int(self.settings["min_length"]), int(self.settings["merge_gap"]))

    @property
    def bases(self) -> int:
        """How many were decoded."""
        return int(self.summary["decoded_bases"])

    def sources(self, fasta: str, exclude: str | None) -> Sources:
        """Return the sequence as it was read for the calls.

        Parameters
        ----------
        fasta
            The sequence file.
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
            (fasta,),
            exclude=exclude,
            circular=tuple(self.summary["circular_records"]),
            gap_min=int(settings["gap_min"]),
            soft_mask=str(settings["soft_mask"]),
        )

    def check_files(self, fasta: str, model: str) -> None:
        """Raise OutputError if the calls name another sequence or model by their checksums."""
        known = {entry["name"]: entry["sha256"] for entry in self.provenance["inputs"]}
        for path, what in ((fasta, "sequence"), (model, "model")):
            recorded = known.get(Path(path).name)
            if path != "-" and recorded is not None and recorded != sha256_of(path):
                raise self._other(
                    f"another {what}", f"give the {what} they were made from, not {path}"
                )

    def check_record(self, name: str, length: int, contigs: list[Contig], odds: LogOdds) -> None:
        """Raise OutputError if a record or the scores of its regions are not those of the calls.

        Parameters
        ----------
        name, length
            Of the record.
        contigs
            Its contigs.
        odds
            Of the reported states, in the order of the summary.
        """
        if self.record_lengths[name] != length:
            raise self._other(
                "another sequence", f"record {name} has {length} bases, not those it had"
            )
        states = list(self.summary["regions"])
        rows = self.table[self.table["record"] == name].head(_ENOUGH_CHECKED)
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
        missing = [name for name in self.record_lengths if name not in found]
        if missing:
            raise self._other("another sequence", f"record {missing[0]} is not in the one given")
        if bases != self.bases:
            raise self._other(
                "another sequence",
                f"{self.bases:,} bases were decoded, but the one given has {bases:,}",
            )

    def check_states(self, model: Model) -> None:
        """Raise OutputError if the model reports other states."""
        names = [name for name, kept in zip(model.names, model.reported, strict=True) if kept]
        if names != list(self.summary["regions"]):
            raise self._other("another model", f"its reported states are {', '.join(names)}")

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
        read_chrom_sizes(root / "chrom.sizes"),
        summary,
        provenance,
    )
