"""The command ``diff``: what became of an assembly's records and regions."""

from collections import Counter, defaultdict
from collections.abc import Sequence
from pathlib import Path
from typing import Any, NamedTuple

from hmmseg.evidence.revision import (
    ADDED,
    CHANGED,
    GAINED,
    KEPT,
    LOST,
    MOVED,
    REMOVED,
    RENAMED,
    REVERSED,
    SAME,
    Placed,
    RecordPair,
    RegionPair,
    match_regions,
    pair_records,
)
from hmmseg.outputs import PROVENANCE, check_target, whole_folder, write_json
from hmmseg.provenance import write_provenance
from hmmseg.sequence.identity import KnownRecord
from hmmseg.tracks.records import read_record_table
from hmmseg.tracks.table import read_regions_table

__all__ = ["diff"]

_OF_RECORDS = (SAME, RENAMED, REVERSED, CHANGED, ADDED, REMOVED)
_OF_REGIONS = (KEPT, MOVED, GAINED, LOST)
_RECORD_COLUMNS = ("status", "old_record", "new_record", "old_length", "new_length")
_REGION_COLUMNS = (
    "status",
    "state",
    "record_status",
    *(f"{side}_{what}" for side in ("old", "new") for what in ("region", "record", "start", "end")),
    "shared_bases",
)
_NONE = "NA"


class _Result(NamedTuple):
    """One of the two results: its folder of calls, its records, and the regions of each."""

    folder: Path
    records: list[KnownRecord]
    regions: dict[str, list[Placed]]


def diff(old: str, new: str, output: str, force: bool) -> str:
    """Compare two folders of results, and write ``records.tsv``, ``regions.tsv`` and a summary.

    Parameters
    ----------
    old, new
        Folders written by ``decode``, ``gather`` or ``annotate``, or by the workflow for an
        assembly.
    output
        The folder to write.
    force
        Replace an earlier result.

    Returns
    -------
    str
        What changed, in a paragraph.

    Raises
    ------
    OutputError
        A folder is no such result.
    """
    check_target(output, force)
    before, after = _read(old), _read(new)
    records = pair_records(before.records, after.records)
    regions: list[tuple[RecordPair, RegionPair]] = []
    for pair in records:
        own = before.regions.get(pair.old.name, []) if pair.old else []
        other = after.regions.get(pair.new.name, []) if pair.new else []
        regions += [(pair, found) for found in match_regions(pair, own, other)]
    document = _document(records, [found for _, found in regions])
    with whole_folder(output, force=force) as folder:
        rows = [[_record_row(pair) for pair in records], [_region_row(*both) for both in regions]]
        _write(folder / "records.tsv", _RECORD_COLUMNS, rows[0])
        _write(folder / "regions.tsv", _REGION_COLUMNS, rows[1])
        write_json(folder / "diff.json", document)
        written = sorted(folder.iterdir())
        parameters = {"old": Path(old), "new": Path(new)}
        inputs = [side.folder / PROVENANCE for side in (before, after)]
        write_provenance(folder, "diff", parameters, None, inputs, written)
    return str(document["statement"])


def _read(given: str) -> _Result:
    folder = Path(given)
    if (folder / "calls").is_dir():
        folder = folder / "calls"
    records = read_record_table(folder / "records.tsv")
    table = read_regions_table(folder / "regions.tsv")
    regions: dict[str, list[Placed]] = defaultdict(list)
    columns = ("record", "region_id", "state", "start", "end")
    for record, *rest in zip(*(table[name].tolist() for name in columns), strict=True):
        regions[record].append(Placed(*rest))
    return _Result(folder, records, regions)


def _record_row(pair: RecordPair) -> list[object]:
    sides = (pair.old, pair.new)
    names = [side.name if side else _NONE for side in sides]
    return [pair.status, *names, *(side.length if side else _NONE for side in sides)]


def _region_row(records: RecordPair, regions: RegionPair) -> list[object]:
    row: list[object] = []
    for record, region in ((records.old, regions.old), (records.new, regions.new)):
        if record is None or region is None:
            row += [_NONE] * 4
        else:
            row += [region.name, record.name, region.start, region.end]
    region = regions.new or regions.old
    state = region.state if region else _NONE
    return [regions.status, state, records.status, *row, regions.shared]


def _write(path: Path, columns: Sequence[str], rows: Sequence[Sequence[object]]) -> None:
    lines = ["\t".join(map(str, row)) for row in (columns, *rows)]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


def _document(records: Sequence[RecordPair], regions: Sequence[RegionPair]) -> dict[str, Any]:
    """Return the document ``diff.json``."""
    counted = Counter(pair.status for pair in records)
    by_state: dict[str, Counter[str]] = defaultdict(Counter)
    for pair in regions:
        region = pair.new or pair.old
        by_state[region.state if region else _NONE][pair.status] += 1
    bases = {
        "old": sum(pair.old.end - pair.old.start for pair in regions if pair.old),
        "new": sum(pair.new.end - pair.new.start for pair in regions if pair.new),
        "shared": sum(pair.shared for pair in regions),
    }
    document: dict[str, Any] = {
        "format": "hmmseg-diff",
        "version": 1,
        "records": {status: counted[status] for status in _OF_RECORDS},
        "regions": {
            state: {status: by_state[state][status] for status in _OF_REGIONS}
            for state in sorted(by_state)
        },
        "region_bases": bases,
    }
    return {**document, "statement": _statement(document)}


def _statement(document: dict[str, Any]) -> str:
    records = document["records"]
    total = Counter[str]()
    for counts in document["regions"].values():
        total.update(counts)
    bases = document["region_bases"]
    return (
        f"Of {sum(records.values()) - records[ADDED]} records {_listed(records, REMOVED)}; "
        f"{records[ADDED]} {_are(records[ADDED])} new. "
        f"Of {total[KEPT] + total[MOVED] + total[LOST]} regions {total[KEPT]} kept their ends, "
        f"{total[MOVED]} moved and {total[LOST]} {_are(total[LOST])} lost; {total[GAINED]} "
        f"{_are(total[GAINED])} gained. Regions held {bases['old']:,} bases and hold "
        f"{bases['new']:,}, {bases['shared']:,} of them the same."
    )


def _listed(records: dict[str, int], last: str) -> str:
    words = [
        f"{records[status]} {_are(records[status])} {'the same' if status == SAME else status}"
        for status in (SAME, RENAMED, REVERSED, CHANGED)
        if records[status] or status == SAME
    ]
    return f"{', '.join(words)} and {records[last]} {_are(records[last])} gone"


def _are(number: int) -> str:
    return "is" if number == 1 else "are"
