"""The command ``gather``: put the calls of an assembly's batches together."""

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from hmmseg.errors import OutputError
from hmmseg.inference.threads import ahead
from hmmseg.jobs.decode import Summary, track_name, write_result
from hmmseg.jobs.plan import Plan, read_plan
from hmmseg.jobs.results import read_summary
from hmmseg.outputs import PROVENANCE, check_target, whole_folder
from hmmseg.provenance import is_intact, read_provenance, write_provenance
from hmmseg.regions.composition import WORDS, Counts, counts_together
from hmmseg.regions.table import number_regions
from hmmseg.tracks.bigwig import PosteriorTrack
from hmmseg.tracks.counts import read_counts
from hmmseg.tracks.packed import PackedTrack
from hmmseg.tracks.table import read_regions_table

__all__ = ["gather"]

_OF_ONE_BATCH = frozenset({"fasta", "exclude"})
"""Parameters in which the parts of one assembly differ."""


def gather(
    planned: str, parts: str, output: str, *, threads: int = 1, force: bool
) -> dict[str, Any]:
    """Write one folder of calls from those of batches, as if the assembly had been decoded whole.

    Parameters
    ----------
    planned
        The folder that ``batches`` has written.
    parts
        The folder that holds the results of its batches, each under its key.
    output
        The folder to write.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace an earlier result.

    Returns
    -------
    dict
        The document ``summary.json``.

    Raises
    ------
    OutputError
        The result of a batch is missing or damaged, or two do not belong together.
    """
    check_target(output, force)
    plan = read_plan(planned)
    folders = {batch.key: Path(parts) / batch.key for batch in plan.batches}
    model = _common_model(list(folders.values()), planned, threads)
    summaries = [read_summary(folder) for folder in folders.values()]
    lengths = {record.name: record.length for record in plan.records}
    states = tuple(summaries[0]["regions"])
    result = Summary(
        record_lengths=lengths,
        sequences={record.name: record.sequence for record in plan.records},
        circular=tuple(record.name for record in plan.records if record.circular),
        skipped=tuple(record.name for record in plan.records if not record.batch),
        contigs=sum(one["contigs"] for one in summaries),
        decoded_bases=sum(one["decoded_bases"] for one in summaries),
        states=states,
    )
    table, counts = _regions(plan, list(folders.values()), Path(planned))
    with whole_folder(output, force=force) as folder:
        for state in states:
            _join_tracks(plan, folders, track_name(state), folder / track_name(state), threads)
        summary = write_result(folder, result, table, counts)
        written = sorted(path for path in folder.iterdir() if path.name != PROVENANCE)
        inputs = [one / PROVENANCE for one in (Path(planned), *folders.values())]
        parameters = {**plan.parameters, "model": model}
        write_provenance(folder, "gather", parameters, None, inputs, written)
    return summary


def _regions(plan: Plan, folders: Sequence[Path], planned: Path) -> tuple[pd.DataFrame, Counts]:
    """Return the regions of all batches by the names and in the order of the records.

    The parts know their own counts; what a region's distance to the genome is shows only here.
    """
    table = number_regions([read_regions_table(folder / "regions.tsv") for folder in folders])
    counts = counts_together([_counts(folder) for folder in (*folders, planned)])
    placed = [record for record in plan.records if record.batch]
    rank = {record.alias: number for number, record in enumerate(placed)}
    ranks = np.array([rank[alias] for alias in table["record"]], dtype=np.int64)
    order = np.argsort(ranks, kind="stable")
    table = table.iloc[order].reset_index(drop=True)
    table["record"] = [placed[number].name for number in ranks[order]]
    return number_regions([table]), Counts(counts.genome, counts.regions[order])


def _counts(folder: Path) -> Counts:
    return Counts(*read_counts(folder / "composition.tsv", WORDS))


def _join_tracks(
    plan: Plan, folders: Mapping[str, Path], name: str, output: Path, threads: int
) -> None:
    lengths = {record.name: record.length for record in plan.records}
    parts = {key: PackedTrack(folder / name) for key, folder in folders.items()}
    with PosteriorTrack(output, lengths, threads) as track:
        for part in parts.values():
            track.expect(part)
        for record in plan.records:
            if record.batch:
                track.copy(record.name, parts[record.batch], record.alias)


def _common_model(folders: Sequence[Path], planned: str, threads: int) -> str:
    """Return the name of the model, and raise if parts are absent, damaged or not alike."""

    def origin(folder: Path) -> dict[str, Any]:
        if not folder.is_dir():
            raise OutputError(
                f"{folder}: the result of this batch is gone; remove {planned} and give the "
                "command again"
            )
        document = read_provenance(folder)
        if not is_intact(folder, document):
            raise OutputError(
                f"{folder}: damaged; remove it and {planned}, and give the command again"
            )
        return document

    first: Mapping[str, Any] = {}
    for folder, document in zip(folders, ahead(origin, folders, threads), strict=True):
        if document["command"] != "decode":
            raise OutputError(f"{folder}: made by {document['command']}, not by decode")
        shared = {k: v for k, v in document["parameters"].items() if k not in _OF_ONE_BATCH}
        model = [one for one in document["inputs"] if one["name"] == shared.get("model")]
        described = {**shared, "model_file": model}
        first = first or described
        for key, value in described.items():
            if first.get(key) != value:
                raise OutputError(
                    f"{folder}: made with another {key} than {folders[0]}; decode both alike"
                )
    return str(first["model"])
