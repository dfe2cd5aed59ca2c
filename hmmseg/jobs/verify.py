"""Check a result folder against its provenance and its files against one another."""

import json
import re
from collections.abc import Callable, Iterator
from pathlib import Path, PurePosixPath
from typing import Any
from urllib.parse import unquote

import numpy as np
import pandas as pd

from hmmseg.errors import HmmsegError, OutputError
from hmmseg.outputs import PROVENANCE, sha256_of
from hmmseg.provenance import read_provenance
from hmmseg.regions.composition import WORDS
from hmmseg.tracks.bed import BedLine, bed_lines, read_bed
from hmmseg.tracks.bigwig import summarize_track
from hmmseg.tracks.counts import read_counts, read_names
from hmmseg.tracks.records import read_record_table
from hmmseg.tracks.sizes import read_chrom_sizes
from hmmseg.tracks.table import DECIMALS, read_regions_table, region_problems

__all__ = ["verify"]

_GFF3_COLUMNS = 9
_SHA256 = re.compile("[0-9a-f]{64}")
# The score in the BED file is rounded from the exact mean, the table's mean to its decimals.
_SCORE_TOLERANCE = 0.5 + 1000 * 0.5 * 10.0 ** -DECIMALS["mean_posterior"] + 1e-9


def verify(folder: str | Path) -> list[str]:
    """Check the folder of a result.

    Every file must be listed in ``provenance.json`` and have the size and SHA-256 that stand
    there; hidden files are passed over. Then, as far as the files are there: regions lie
    inside their records, are sorted and have unique names, and are the same in BED, table,
    GFF3 and the counts of bases; posterior tracks can be read, have the records of
    ``chrom.sizes`` and values between 0 and 1; the counts in ``summary.json`` are
    those of the regions.

    Parameters
    ----------
    folder : path
        The folder.

    Returns
    -------
    list of str
        A line for each kind of check that was done and passed.

    Raises
    ------
    OutputError
        If anything is wrong: the first problem and the number of further ones, in one line.
    """
    root = Path(folder)
    if not root.is_dir():
        raise OutputError(f"{root} is not a folder; give the folder of a result")
    outputs = read_provenance(root)["outputs"]
    problems = [*_file_problems(root, outputs), *_unlisted(root, outputs)]
    done = [f"{len(outputs)} files have the recorded size and SHA-256, and no others are there"]
    for name, check in _content_checks(root):
        try:
            done.append(check(root, problems))
        except (HmmsegError, ValueError) as error:
            problems.append(f"{name}: {' '.join(str(error).split())}")
    if problems:
        more = f" (and {len(problems) - 1} more)" if len(problems) > 1 else ""
        raise OutputError(f"{root}: {problems[0]}{more}; make the result again")
    return done


_Check = Callable[[Path, list[str]], str]


def _file_problems(root: Path, outputs: list[dict[str, Any]]) -> Iterator[str]:
    for entry in outputs:
        name = PurePosixPath(entry["name"])
        path = root / name
        if name.is_absolute() or ".." in name.parts:
            yield f"{name} is listed but lies outside the folder"
        elif not path.is_file():
            yield f"{name} is listed in {PROVENANCE} but missing"
        elif path.stat().st_size != entry["bytes"]:
            yield f"{name} has {path.stat().st_size} bytes, recorded are {entry['bytes']}"
        elif sha256_of(path) != entry["sha256"]:
            yield f"{name} has been changed: its SHA-256 is not the recorded one"


def _unlisted(root: Path, outputs: list[dict[str, Any]]) -> Iterator[str]:
    listed = {entry["name"] for entry in outputs} | {PROVENANCE}
    for path in sorted(root.rglob("*")):
        name = path.relative_to(root)
        # Workflow engines and desktops leave hidden files; they are no part of a result.
        hidden = any(part.startswith(".") for part in name.parts)
        if path.is_file() and not hidden and name.as_posix() not in listed:
            yield f"{name.as_posix()} is not listed in {PROVENANCE}"


def _content_checks(root: Path) -> Iterator[tuple[str, _Check]]:
    """Give the checks for which the folder has the files, with the file each is about."""
    has_sizes = (root / "chrom.sizes").is_file()
    has_table = (root / "regions.tsv").is_file()
    if has_sizes and has_table:
        yield "regions.tsv", _check_table
        if (root / "regions.bed").is_file():
            yield "regions.bed", _check_bed
        if (root / "regions.gff3").is_file():
            yield "regions.gff3", _check_gff3
        if (root / "composition.tsv").is_file():
            yield "composition.tsv", _check_counts
    if has_sizes and (root / "records.tsv").is_file():
        yield "records.tsv", _check_records
    if has_sizes and any(root.glob("*.posterior.bw")):
        yield "posterior tracks", _check_tracks
    if has_table and (root / "summary.json").is_file():
        yield "summary.json", _check_summary


def _read(root: Path) -> tuple[pd.DataFrame, dict[str, int]]:
    return read_regions_table(root / "regions.tsv"), read_chrom_sizes(root / "chrom.sizes")


def _check_table(root: Path, problems: list[str]) -> str:
    table, lengths = _read(root)
    problems += [f"regions.tsv: {problem}" for problem in region_problems(table, lengths)]
    return f"{len(table)} regions lie inside their records, sorted, each with a name of its own"


def _check_records(root: Path, problems: list[str]) -> str:
    rows = read_record_table(root / "records.tsv")
    lengths = read_chrom_sizes(root / "chrom.sizes")
    if [(row.name, row.length) for row in rows] != list(lengths.items()):
        problems.append("records.tsv: its records are not those of chrom.sizes")
    sums = {text for row in rows for text in row.sequence}
    problems += [
        f"records.tsv: {text!r} is no SHA-256" for text in sums if not _SHA256.fullmatch(text)
    ]
    return "records.tsv has the records of chrom.sizes, with checksums"


def _check_bed(root: Path, problems: list[str]) -> str:
    table, lengths = _read(root)
    found = [BedLine(*row) for row in read_bed(root / "regions.bed", lengths).itertuples(False)]
    means = dict(zip(table["region_id"], table["mean_posterior"], strict=True))
    known = set(table["record"]) <= set(lengths)  # else the table's own check has said so
    if known and [row[:4] for row in found] != [row[:4] for row in bed_lines(table, lengths)]:
        problems.append("regions.bed: its intervals are not those of regions.tsv")
    for row in found:
        if not re.fullmatch("[0-9]{1,4}", row.score) or int(row.score) > 1000:
            problems.append(f"regions.bed:{row.line}: score {row.score!r} is not 0 to 1000")
        elif abs(int(row.score) - 1000 * means.get(row.name, np.nan)) > _SCORE_TOLERANCE:
            problems.append(f"regions.bed:{row.line}: the score is not 1000 x the mean posterior")
        if row.strand != ".":
            problems.append(f"regions.bed:{row.line}: the strand is {row.strand!r}, not '.'")
    return "regions.bed has the intervals and scores of regions.tsv"


def _check_gff3(root: Path, problems: list[str]) -> str:
    table, _ = _read(root)
    columns = ("record", "start", "end", "region_id")
    expected = list(zip(*(table[name].tolist() for name in columns), strict=True))
    if list(_gff3_regions(root / "regions.gff3")) != expected:
        problems.append("regions.gff3: its features are not those of regions.tsv")
    return "regions.gff3 has the features of regions.tsv"


def _check_counts(root: Path, problems: list[str]) -> str:
    table, lengths = _read(root)
    path = root / "composition.tsv"
    genome, regions = read_counts(path, WORDS)
    bases = regions[:, :4].sum(axis=1)
    if read_names(path) != table["region_id"].tolist():
        problems.append("composition.tsv: its regions are not those of regions.tsv")
    elif (bases > table["length"].to_numpy()).any():
        name = table["region_id"][int(np.argmax(bases > table["length"].to_numpy()))]
        problems.append(f"composition.tsv: region {name} has more bases than its length")
    if genome[:4].sum() > sum(lengths.values()):
        problems.append("composition.tsv: the genome has more bases than the records")
    return "composition.tsv counts the regions of regions.tsv"


def _gff3_regions(path: Path) -> Iterator[tuple[str, int, int, str]]:
    with open(path, encoding="utf-8", newline="\n") as file:
        for number, line in enumerate(file, start=1):
            if line.startswith("#") or not line.strip():
                continue
            fields = line.rstrip("\n").split("\t")
            if len(fields) != _GFF3_COLUMNS:
                raise OutputError(f"line {number}: {len(fields)} columns, not {_GFF3_COLUMNS}")
            attributes = dict(item.partition("=")[::2] for item in fields[8].split(";"))
            if attributes.get("Is_circular") != "true":  # else the record itself
                name = unquote(attributes.get("ID", ""))
                yield unquote(fields[0]), int(fields[3]) - 1, int(fields[4]), name


def _check_tracks(root: Path, problems: list[str]) -> str:
    lengths = read_chrom_sizes(root / "chrom.sizes")
    paths = sorted(root.glob("*.posterior.bw"))
    for path in paths:
        track = summarize_track(path)
        if list(track.record_lengths.items()) != list(lengths.items()):
            problems.append(f"{path.name}: its records are not those of chrom.sizes")
        if track.bases and not (track.lowest >= 0 and track.highest <= 1):
            problems.append(
                f"{path.name}: posteriors from {track.lowest:g} to {track.highest:g}, "
                "not between 0 and 1"
            )
    return f"{len(paths)} posterior tracks have the records of chrom.sizes and values in [0, 1]"


def _check_summary(root: Path, problems: list[str]) -> str:
    table = read_regions_table(root / "regions.tsv")
    summary = json.loads((root / "summary.json").read_bytes())
    regions = summary.get("regions") if isinstance(summary, dict) else None
    if not isinstance(regions, dict):
        raise OutputError('it has no counts under "regions"')
    absent = sorted(set(table["state"]) - set(regions))
    problems += [f"summary.json: state {state} is not counted" for state in absent]
    for state, counted in regions.items():
        lengths = table["length"][table["state"] == state]
        expected = {"count": len(lengths), "bases": int(lengths.sum())}
        found = {key: counted.get(key) for key in expected} if isinstance(counted, dict) else None
        if found != expected:
            problems.append(f"summary.json: {state} has {found}, regions.tsv has {expected}")
    return "summary.json counts the regions of regions.tsv"
