"""What the regions have to do with known features, the option ``--features`` of ``annotate``."""

from collections.abc import Mapping, Sequence
from pathlib import Path

from hmmseg.errors import LabelError
from hmmseg.evidence.overlap import overlap
from hmmseg.jobs.results import read_summary
from hmmseg.outputs import whole_file
from hmmseg.provenance import write_provenance
from hmmseg.sequence.features import read_features
from hmmseg.sequence.intervals import BedLine
from hmmseg.tracks.sizes import read_chrom_sizes
from hmmseg.tracks.table import read_regions_table

__all__ = ["COLUMNS", "MOST_KINDS", "measure_features"]

COLUMNS = (
    "file",
    "kind",
    "state",
    "features",
    "touched",
    "half_covered",
    "feature_bases",
    "shared_bases",
    "share_of_features",
    "share_of_regions",
    "times_expected",
)
MOST_KINDS = 50
"""With more kinds than this in a file, its features are taken together."""

_TOGETHER = "all"

_Spans = dict[str, list[tuple[int, int]]]


def measure_features(calls: str | Path, files: Sequence[str], output: Path) -> list[list[str]]:
    """Write a table of how each kind of feature and each state's regions overlap.

    Parameters
    ----------
    calls
        A folder of calls.
    files
        BED or GFF3 files of features, as for :func:`~hmmseg.sequence.features.read_features`.
    output
        The table to write, tab-separated; an earlier one is replaced.

    Returns
    -------
    list of list of str
        The rows of the table, in the columns of ``COLUMNS``.

    Raises
    ------
    LabelError
        A file is malformed, or a feature lies outside its record.
    """
    folder = Path(calls)
    summary = read_summary(folder)
    lengths = read_chrom_sizes(folder / "chrom.sizes")
    circular = set(summary["circular_records"])
    table = read_regions_table(folder / "regions.tsv")
    regions: dict[str, _Spans] = {state: {} for state in summary["regions"]}
    for state, record, start, end in zip(
        table["state"], table["record"], table["start"], table["end"], strict=True
    ):
        regions[state].setdefault(record, []).append((start, end))
    rows = []
    for file in files:
        for kind, features in sorted(_by_kind(file, lengths, circular).items()):
            for state, own in regions.items():
                found = overlap(features, own, lengths)
                times = found.times_expected(summary["decoded_bases"])
                rows.append(
                    [
                        Path(file).name,
                        kind,
                        state,
                        *(str(n) for n in found[:5]),
                        _share(found.shared_bases, found.feature_bases),
                        _share(found.shared_bases, found.region_bases),
                        "NA" if times is None else f"{times:.2f}",
                    ]
                )
    with whole_file(output, force=True) as temporary:
        lines = ["\t".join(row) for row in (COLUMNS, *rows)]
        temporary.write_text("\n".join(lines) + "\n", encoding="utf-8")
    inputs: list[str | Path] = [folder / "regions.tsv", *files]
    write_provenance(
        output,
        "annotate",
        {"features": [Path(file).name for file in files]},
        None,
        inputs,
        [output],
    )
    return rows


def _share(part: int, whole: int) -> str:
    return f"{part / whole:.4f}" if whole else "NA"


def _by_kind(file: str, lengths: Mapping[str, int], circular: set[str]) -> dict[str, _Spans]:
    kinds: dict[str, _Spans] = {}
    for line in read_features(file):
        _check(line, lengths, circular)
        kinds.setdefault(line.name, {}).setdefault(line.record, []).append((line.start, line.end))
    if len(kinds) <= MOST_KINDS:
        return kinds
    together: _Spans = {}
    for spans in kinds.values():
        for record, intervals in spans.items():
            together.setdefault(record, []).extend(intervals)
    return {_TOGETHER: together}


def _check(line: BedLine, lengths: Mapping[str, int], circular: set[str]) -> None:
    if line.record not in lengths:
        raise LabelError(f"{line.where}: record {line.record} is not among those that were called")
    length = lengths[line.record]
    if line.end > (2 * length if line.record in circular else length) or line.start >= length:
        raise LabelError(
            f"{line.where}: ends at {line.end}, but record {line.record} is {length} bases long"
        )
