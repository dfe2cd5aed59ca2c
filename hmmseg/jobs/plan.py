"""A plan of batches: which records are decoded together, and under which key the result is kept."""

import csv
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

from hmmseg.errors import OutputError
from hmmseg.outputs import PROVENANCE
from hmmseg.provenance import read_provenance
from hmmseg.sequence.identity import Checksums

__all__ = ["Batch", "Plan", "PlannedRecord", "read_plan", "write_plan"]

_BATCH_COLUMNS = ("batch", "records", "bases", "reused")
_RECORD_COLUMNS = (
    "record",
    "length",
    "topology",
    "batch",
    "name_in_part",
    "sequence_sha256",
    "reverse_sha256",
)


@dataclass(frozen=True)
class PlannedRecord:
    """One record of the assembly.

    Attributes
    ----------
    name : str
        Its name in the assembly.
    length : int
        In bases.
    circular : bool
        Whether the position after the last is the first.
    batch : str
        Key of its batch; empty if there is nothing to decode in it.
    alias : str
        Its name in the batch, made from all that bears on its calls; empty without a batch.
    sequence : Checksums
        Checksums of its letters.
    """

    name: str
    length: int
    circular: bool
    batch: str
    alias: str
    sequence: Checksums


@dataclass(frozen=True)
class Batch:
    """Records that are decoded together.

    Attributes
    ----------
    key : str
        Made from everything that bears on the result, so that equal keys mean equal results.
    records, bases : int
        How many records, and bases of contigs, it has.
    reused : bool
        Whether its result was there when the plan was made.
    """

    key: str
    records: int
    bases: int
    reused: bool


@dataclass(frozen=True)
class Plan:
    """The batches of an assembly.

    Attributes
    ----------
    records : sequence of PlannedRecord
        All of them, in the order of the assembly.
    batches : sequence of Batch
        All of them, in the order of their keys.
    parameters : mapping
        As in the provenance of the plan.
    """

    records: Sequence[PlannedRecord]
    batches: Sequence[Batch]
    parameters: Mapping[str, Any]

    @cached_property
    def missing(self) -> frozenset[str]:
        """Keys of the batches that have to be decoded."""
        return frozenset(batch.key for batch in self.batches if not batch.reused)


def write_plan(folder: Path, plan: Plan) -> list[Path]:
    """Write ``batches.tsv`` and ``records.tsv`` into a folder; return their paths."""
    batches = [
        (one.key, one.records, one.bases, "yes" if one.reused else "no") for one in plan.batches
    ]
    records = [
        (
            one.name,
            one.length,
            "circular" if one.circular else "linear",
            one.batch,
            one.alias,
            *one.sequence,
        )
        for one in plan.records
    ]
    written = []
    for name, header, rows in (
        ("batches.tsv", _BATCH_COLUMNS, batches),
        ("records.tsv", _RECORD_COLUMNS, records),
    ):
        lines = ["\t".join(map(str, row)) for row in (header, *rows)]
        written.append(folder / name)
        written[-1].write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")
    return written


def read_plan(folder: str | Path) -> Plan:
    """Read what `write_plan` and the command ``batches`` have written.

    Raises
    ------
    OutputError
        The folder is no plan.
    """
    root = Path(folder)
    origin = read_provenance(root)
    if origin["command"] != "batches":
        raise OutputError(f"{root / PROVENANCE}: not of batches; give a folder written by batches")
    try:
        batches = [
            Batch(key, int(records), int(bases), reused == "yes")
            for key, records, bases, reused in _rows(root / "batches.tsv", _BATCH_COLUMNS)
        ]
        records = [_record(row) for row in _rows(root / "records.tsv", _RECORD_COLUMNS)]
    except (OSError, ValueError, TypeError):
        raise OutputError(f"{root}: its tables are damaged; make it again by batches") from None
    return Plan(records, batches, origin["parameters"])


def _rows(path: Path, columns: Sequence[str]) -> list[list[str]]:
    with path.open(encoding="utf-8", newline="") as file:
        header, *rows = csv.reader(file, delimiter="\t", quoting=csv.QUOTE_NONE)
    if tuple(header) != tuple(columns):
        raise ValueError("other columns")
    return rows


def _record(row: Sequence[str]) -> PlannedRecord:
    name, length, topology, batch, alias, *sums = row
    sequence = Checksums(*sums)
    return PlannedRecord(name, int(length), topology == "circular", batch, alias, sequence)
