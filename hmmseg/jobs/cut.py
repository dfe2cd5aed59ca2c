"""The command ``cut``: the sequence of each batch in a file of its own.

A job then reads its own batch, not the whole assembly. Records bear the names that they have in
the plan, made from their content, so that the file of a batch is the same whatever an assembly
calls its records and whichever others it has.
"""

from collections.abc import Mapping, Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import OutputError
from hmmseg.jobs.plan import PlannedRecord, read_plan
from hmmseg.jobs.sources import Sources
from hmmseg.outputs import check_target, whole_folder
from hmmseg.provenance import write_provenance
from hmmseg.sequence.alphabet import SYMBOLS
from hmmseg.sequence.identity import checksums, record_digest
from hmmseg.sequence.reading import Record

__all__ = ["cut"]

_LINE = 1 << 16
_LETTERS = np.frombuffer((SYMBOLS + "R").encode(), np.uint8)
"""Of each code. Which letter stood for an ambiguous base bears on no call, so any will do."""
_LOWER = 32


def cut(sources: Sources, planned: str, output: str, force: bool) -> int:
    """Write ``KEY.fa`` and ``KEY.bed``, what is excluded there, for each batch to be decoded.

    Parameters
    ----------
    sources
        The sequence, as it was given to ``batches``.
    planned
        The folder that ``batches`` has written.
    output
        The folder to write.
    force
        Replace an earlier result.

    Returns
    -------
    int
        How many batches were written.

    Raises
    ------
    OutputError
        The sequence is not that of the plan.
    """
    check_target(output, force)
    plan = read_plan(planned)
    missing = sorted(plan.missing)
    records = {record.name: record for record in plan.records if record.batch in plan.missing}
    seen = set()
    exclusions = sources.exclusions()
    with whole_folder(output, force=force) as folder:
        places: dict[str, dict[str, tuple[int, int]]] = {key: {} for key in missing}
        for record in sources.read():
            wanted = records.get(record.name)
            if wanted is None:
                continue
            exclude = exclusions.get(record.name)
            if not _is_that(record, wanted, exclude):
                raise OutputError(_changed(planned, record.name))
            seen.add(record.name)
            path = folder / f"{wanted.batch}.fa"
            places[wanted.batch][wanted.alias] = _append(path, record, wanted.alias)
            _append_exclusions(folder / f"{wanted.batch}.bed", wanted.alias, exclude)
        if absent := sorted(records.keys() - seen):
            raise OutputError(_changed(planned, absent[0]))
        for key in missing:
            _sort(folder / f"{key}.fa", places[key])
            _sort_lines(folder / f"{key}.bed")
        written = sorted(folder.iterdir())
        write_provenance(folder, "cut", sources.parameters(), None, sources.files(), written)
    return len(missing)


def _changed(planned: str, record: str) -> str:
    return f"{planned}: record {record} is not as it was when the batches were made; make them anew"


def _is_that(record: Record, wanted: PlannedRecord, exclude: NDArray[np.int64] | None) -> bool:
    digest = record_digest(record, checksums(record.bases).given, exclude)
    return wanted.alias.split("_")[0] == digest


def _append(path: Path, record: Record, name: str) -> tuple[int, int]:
    """Append a record to a FASTA file; return where it begins and ends there."""
    topology = " [topology=circular]" if record.circular else ""
    letters = _letters(record)
    with path.open("ab") as file:
        start = file.tell()
        file.write(f">{name}{topology}\n".encode())
        for offset in range(0, len(letters), _LINE):
            file.write(letters[offset : offset + _LINE].tobytes() + b"\n")
        return start, file.tell()


def _letters(record: Record) -> NDArray[np.uint8]:
    """Return letters that read as the record does, uint8[position]."""
    letters = _LETTERS[record.bases]
    for start, end in record.n_runs:
        letters[start:end] = ord("N")
    for start, end in record.soft_mask:
        letters[start:end] |= _LOWER
    return letters


def _append_exclusions(path: Path, name: str, exclude: NDArray[np.int64] | None) -> None:
    with path.open("a", encoding="utf-8", newline="\n") as file:
        for start, end in [] if exclude is None else exclude.tolist():
            file.write(f"{name}\t{start}\t{end}\n")


def _sort(path: Path, places: Mapping[str, tuple[int, int]]) -> None:
    """Put the records of a file in the order of their names, whatever that of the assembly."""
    ordered: Sequence[tuple[int, int]] = [places[name] for name in sorted(places)]
    if ordered == sorted(ordered):
        return
    content = path.read_bytes()
    path.write_bytes(b"".join(content[start:end] for start, end in ordered))


def _sort_lines(path: Path) -> None:
    lines = path.read_text(encoding="utf-8").splitlines(keepends=True)
    path.write_text("".join(sorted(lines)), encoding="utf-8", newline="\n")
