"""The command ``gather``: put the calls of several batches together."""

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from hmmseg.errors import OutputError
from hmmseg.jobs.decode import Summary, track_name, write_result
from hmmseg.outputs import PROVENANCE, check_target, whole_folder
from hmmseg.provenance import read_provenance, write_provenance
from hmmseg.regions.composition import WORDS, Counts, counts_together
from hmmseg.regions.table import number_regions
from hmmseg.tracks.bigwig import PosteriorTrack, read_track
from hmmseg.tracks.counts import read_counts
from hmmseg.tracks.sizes import read_chrom_sizes
from hmmseg.tracks.table import read_regions_table

__all__ = ["gather", "read_summary"]


def gather(parts: Sequence[str], output: str, force: bool) -> dict[str, Any]:
    """Write one folder of calls from those of batches, as if they had been decoded together.

    Parameters
    ----------
    parts
        Folders written by ``decode`` with one model and one set of options, in the order of
        their records.
    output
        The folder to write.
    force
        Replace an earlier result.

    Returns
    -------
    dict
        The document ``summary.json``.

    Raises
    ------
    OutputError
        A folder is no result of ``decode``, or two do not belong together.
    """
    check_target(output, force)
    folders = [Path(part) for part in parts]
    parameters = _common_parameters(folders)
    summaries = [read_summary(folder) for folder in folders]
    lengths = _record_lengths(folders)
    states = tuple(summaries[0]["regions"])
    result = Summary(
        record_lengths=lengths,
        circular=tuple(name for one in summaries for name in one["circular_records"]),
        skipped=tuple(name for one in summaries for name in one["skipped_records"]),
        contigs=sum(one["contigs"] for one in summaries),
        decoded_bases=sum(one["decoded_bases"] for one in summaries),
        states=states,
    )
    table = number_regions([read_regions_table(folder / "regions.tsv") for folder in folders])
    # The parts know their own counts; what a region's distance to the genome is shows only here.
    counts = counts_together(
        [Counts(*read_counts(folder / "composition.tsv", WORDS)) for folder in folders]
    )
    with whole_folder(output, force=force) as folder:
        for state in states:
            with PosteriorTrack(folder / track_name(state), lengths) as track:
                for part in folders:
                    for record, starts, ends, values in read_track(part / track_name(state)):
                        track.add(record, starts, ends, values)
        summary = write_result(folder, result, table, counts)
        written = sorted(path for path in folder.iterdir() if path.name != PROVENANCE)
        inputs = [part / PROVENANCE for part in folders]
        write_provenance(folder, "gather", parameters, None, inputs, written)
    return summary


def read_summary(folder: Path) -> dict[str, Any]:
    """Return the document ``summary.json`` of a folder of calls.

    Raises
    ------
    OutputError
        There is none, or it is not one.
    """
    path = folder / "summary.json"
    try:
        document = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        raise OutputError(f"{path}: cannot be read; give a folder written by decode") from None
    if not isinstance(document, dict) or document.get("format") != "hmmseg-calls":
        raise OutputError(f"{path}: not a summary of calls; give a folder written by decode")
    return document


def _common_parameters(folders: Sequence[Path]) -> dict[str, Any]:
    """Return the parameters that all parts share, and raise if they differ in what matters."""
    if not folders:
        raise OutputError("gather: no folder given; name those written by decode")
    first: Mapping[str, Any] = {}
    for number, folder in enumerate(folders):
        document = read_provenance(folder)
        shared = {key: value for key, value in document["parameters"].items() if key != "records"}
        model = [one for one in document["inputs"] if one["name"] == shared.get("model")]
        described = {**shared, "command": document["command"], "model_file": model}
        if number == 0:
            first = described
        for key, value in described.items():
            if first.get(key) != value:
                raise OutputError(
                    f"{folder}: made with another {key} than {folders[0]}; decode both alike"
                )
    if first["command"] != "decode":
        raise OutputError(f"{folders[0]}: made by {first['command']}, not by decode")
    return {key: value for key, value in first.items() if key not in ("command", "model_file")}


def _record_lengths(folders: Sequence[Path]) -> dict[str, int]:
    lengths: dict[str, int] = {}
    for folder in folders:
        for record, length in read_chrom_sizes(folder / "chrom.sizes").items():
            if record in lengths:
                raise OutputError(f"{folder}: record {record} is in an earlier folder, too")
            lengths[record] = length
    return lengths
