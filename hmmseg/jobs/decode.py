"""The command ``decode``: call regions and write posteriors."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Protocol

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.errors import ModelError, OutputError, UsageError
from hmmseg.inference.threads import aside
from hmmseg.jobs.sources import Sources
from hmmseg.model import load_model
from hmmseg.outputs import PROVENANCE, check_target, whole_folder, write_json
from hmmseg.progress import Progress, warn
from hmmseg.provenance import earlier_document, write_provenance
from hmmseg.regions.calling import PATH, POSTERIOR, Caller, Calls
from hmmseg.regions.composition import (
    WORDS,
    Counts,
    counts_of_record,
    counts_together,
    measures,
)
from hmmseg.regions.intervals import Filters
from hmmseg.regions.islands import island_criteria
from hmmseg.regions.table import Columns, regions_of_record, table_of_records
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.identity import Checksums, KnownRecord, checksums
from hmmseg.sequence.reading import Record
from hmmseg.tracks.bed import invalid_bed_names, write_regions_bed
from hmmseg.tracks.counts import write_counts
from hmmseg.tracks.gff3 import write_regions_gff3
from hmmseg.tracks.records import write_record_table
from hmmseg.tracks.sizes import write_chrom_sizes
from hmmseg.tracks.spool import SpooledTrack
from hmmseg.tracks.table import write_regions_table

__all__ = ["Run", "Summary", "decode", "decode_once", "track_name", "write_result"]

Watch = Callable[[int, NDArray[np.float64]], None]


@dataclass(frozen=True)
class Summary:
    """What a folder of calls holds, in numbers.

    Attributes
    ----------
    record_lengths : mapping
        Of every record, in order.
    sequences : mapping
        Checksums of every record's letters.
    circular : tuple of str
        Circular records.
    skipped : tuple of str
        Records without a known base outside gaps.
    contigs, decoded_bases : int
        What was decoded.
    states : tuple of str
        Reported states.
    """

    record_lengths: Mapping[str, int]
    sequences: Mapping[str, Checksums]
    circular: tuple[str, ...]
    skipped: tuple[str, ...]
    contigs: int
    decoded_bases: int
    states: tuple[str, ...]

    def to_dict(self, table: pd.DataFrame) -> dict[str, Any]:
        """Return the document ``summary.json``."""
        regions = {}
        for state in self.states:
            lengths = table.loc[table["state"] == state, "length"]
            bases = int(lengths.sum())
            regions[state] = {
                "count": len(lengths),
                "bases": bases,
                "share": bases / self.decoded_bases if self.decoded_bases else 0.0,
            }
        return {
            "format": "hmmseg-calls",
            "version": 1,
            "records": len(self.record_lengths),
            "bases": sum(self.record_lengths.values()),
            "circular_records": list(self.circular),
            "skipped_records": list(self.skipped),
            "contigs": self.contigs,
            "decoded_bases": self.decoded_bases,
            "regions": regions,
        }


def track_name(state: str) -> str:
    """Return the file name of a state's posterior track."""
    return f"{state}.posterior.bw"


def decode(  # noqa: PLR0913 - as many as the command has
    sources: Sources,
    model_path: str,
    output: str,
    *,
    decoder: str | None,
    threshold: float,
    filters: Filters,
    threads: int,
    force: bool,
    reuse: bool = False,
) -> dict[str, Any]:
    """Call regions of every record and write the folder of results.

    Parameters
    ----------
    sources
        The sequence.
    model_path
        A model document.
    output
        The folder to write.
    decoder, threshold, filters
        As of :class:`~hmmseg.regions.calling.Caller`. Without a decoder, models with stages are
        decoded by posterior and all others by path.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace an earlier result.
    reuse
        Return an earlier result if it is what would be made again.

    Returns
    -------
    dict
        The document ``summary.json``.
    """
    if not reuse:
        check_target(output, force)
    model = load_model(model_path)
    staged = max(model.stages) > 1
    decoder = decoder or (POSTERIOR if staged else PATH)
    if staged and decoder == PATH:
        warn("a best path cannot see how long states with stages last; better decode by posterior")
    if decoder == PATH and filters.end_window:
        raise UsageError("an end window goes with the posterior decoder; give --decoder posterior")
    caller = Caller(model, decoder, threshold, filters, threads)
    if not caller.states:
        raise ModelError(f"{model_path}: no state is reported; set 'reported' of one to true")
    sources = sources.with_soft_mask((model.training or {}).get("soft_mask", "use"))
    parameters = {
        **sources.parameters(),
        "model": Path(model_path),
        "decoder": decoder,
        "threshold": threshold if decoder == POSTERIOR else None,
        **filters._asdict(),
    }
    origin = ("decode", parameters, None, [*sources.files(), model_path])
    if reuse and (earlier := earlier_document("summary.json", output, *origin)) is not None:
        return earlier
    check_target(output, force)
    with whole_folder(output, force=force) as folder:
        summary = write_result(folder, *Run(caller, folder).over(sources))
        written = sorted(path for path in folder.iterdir() if path.name != PROVENANCE)
        write_provenance(folder, *origin, written)
    return summary


def decode_once(
    sources: Sources, model_path: str, output: str, *, force: bool, **options: Any
) -> dict[str, Any]:
    """Do as :func:`decode` does, unless an earlier result, or one made meanwhile, is the same.

    Parameters
    ----------
    sources, model_path, output
        As of :func:`decode`.
    force
        Not needed: a result that would not come out the same is damaged, and replaced.
    options
        As of :func:`decode`.
    """
    try:
        return decode(sources, model_path, output, force=force, reuse=True, **options)
    except OutputError:
        if not (Path(output) / PROVENANCE).is_file():
            raise
    return decode(sources, model_path, output, force=True, reuse=True, **options)


def write_result(
    folder: Path, result: Summary, table: pd.DataFrame, counts: Counts
) -> dict[str, Any]:
    """Write everything but the tracks and the provenance; return the summary.

    Parameters
    ----------
    folder
        Where to.
    result
        What was decoded.
    table
        The regions, with or without the columns that follow from the counts.
    counts
        Of the genome and of each region.
    """
    lengths = result.record_lengths
    if names := invalid_bed_names(lengths):
        warn(
            f"{len(names)} record names, {names[0]} first, hold other characters than the BED "
            "specification's A-Z a-z 0-9 _; most programs read them all the same"
        )
    for columns in (measures(counts), island_criteria(counts.regions)):
        table = table.assign(**columns)
    write_chrom_sizes(folder / "chrom.sizes", lengths)
    write_counts(
        folder / "composition.tsv", WORDS, counts.genome, counts.regions, table["region_id"]
    )
    circular = set(result.circular)
    rows = (
        KnownRecord(name, length, name in circular, result.sequences[name])
        for name, length in lengths.items()
    )
    write_record_table(folder / "records.tsv", rows)
    write_regions_bed(folder / "regions.bed", table, lengths)
    write_regions_table(folder / "regions.tsv", table)
    write_regions_gff3(folder / "regions.gff3", table, lengths, circular)
    summary = result.to_dict(table)
    write_json(folder / "summary.json", summary)
    return summary


class RegionCaller(Protocol):
    """Whatever calls the regions of a contig."""

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the states."""

    @property
    def states(self) -> list[int]:
        """Indices of the reported states."""

    @property
    def threads(self) -> int:
        """Threads to use."""

    def call(self, contig: Contig, watch: Watch) -> Calls | None:
        """Call regions, and hand posteriors to ``watch``; None if the contig cannot be called."""


class Run:
    """One run over all records, which collects what the result needs.

    Parameters
    ----------
    caller
        Calls the regions.
    folder
        Where the tracks are to stand.
    """

    def __init__(self, caller: RegionCaller, folder: Path) -> None:
        self._caller = caller
        self._tracks = {
            state: SpooledTrack(folder / track_name(caller.names[state])) for state in caller.states
        }
        self._lengths: dict[str, int] = {}
        self._sequences: dict[str, Checksums] = {}
        self._circular: list[str] = []
        self._skipped: list[str] = []
        self._contigs = 0
        self._decoded = 0
        self._tables: list[Columns] = []
        self._counts: list[Counts] = []
        self.not_called = 0
        """Contigs that the caller could not call."""

    def over(self, sources: Sources) -> tuple[Summary, pd.DataFrame, Counts]:
        """Call all records; write the tracks; return what was found, and what it is made of."""
        with Progress(0, "decoding", "bases") as progress:
            for record, contigs in sources.read_contigs():
                self._record(record, contigs)
                progress.advance(len(record), record.name)
        for track in self._tracks.values():
            track.finish(self._lengths, self._caller.threads)
        result = Summary(
            record_lengths=self._lengths,
            sequences=self._sequences,
            circular=tuple(self._circular),
            skipped=tuple(self._skipped),
            contigs=self._contigs,
            decoded_bases=self._decoded,
            states=tuple(self._caller.names[state] for state in self._caller.states),
        )
        return result, table_of_records(self._tables), counts_together(self._counts)

    def _record(self, record: Record, contigs: list[Contig]) -> None:
        self._lengths[record.name] = len(record)
        sequence = aside(checksums, record.bases, self._caller.threads)
        if record.circular:
            self._circular.append(record.name)
        if not contigs:
            self._skipped.append(record.name)
        calls: list[tuple[Contig, Calls]] = []
        for contig in contigs:
            found = self._caller.call(contig, self._follower(contig))
            if found is None:
                self.not_called += 1
                continue
            calls.append((contig, found))
            self._contigs += 1
            self._decoded += len(contig)
        starts = ends = np.empty(0, np.int64)
        if calls:
            table = regions_of_record(record, calls, self._caller.names)
            starts, ends = table["start"], table["end"]
            self._tables.append(table)
        self._counts.append(counts_of_record(record, starts, ends))
        self._sequences[record.name] = sequence()

    def _follower(self, contig: Contig) -> Watch:
        """Return what takes the posteriors of a contig to the tracks."""

        def follow(begin: int, posterior: NDArray[np.float64]) -> None:
            start = contig.start + begin
            # A contig across the origin goes on at the record's first position.
            cut = min(max(contig.record_length - start, 0), len(posterior))
            for state, track in self._tracks.items():
                values = np.ascontiguousarray(posterior[:, state])
                if cut > 0:
                    track.add(contig.record, start, values[:cut])
                if cut < len(values):
                    beyond = start + cut - contig.record_length
                    track.add(contig.record, beyond, values[cut:])

        return follow
