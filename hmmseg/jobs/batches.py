"""The command ``batches``: share records out to jobs, and find which results are there already."""

import hashlib
import json
from collections import Counter
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from hmmseg.jobs.plan import Batch, Plan, PlannedRecord, write_plan
from hmmseg.jobs.sources import Sources
from hmmseg.model import load_model
from hmmseg.outputs import PROVENANCE, check_target, sha256_of, whole_folder
from hmmseg.provenance import software, write_provenance
from hmmseg.regions.composition import WORDS, Counts, counts_of_record, counts_together
from hmmseg.sequence.batching import share_out
from hmmseg.sequence.identity import checksums, record_digest
from hmmseg.tracks.counts import write_counts

__all__ = ["batches"]

_KEY_DIGITS = 32


def batches(
    sources: Sources,
    model_path: str,
    output: str,
    *,
    parts: str | None,
    batch_bases: int,
    options: Mapping[str, Any],
    force: bool,
) -> Plan:
    """Write a plan: the batches, and which records each has.

    Parameters
    ----------
    sources
        The sequence.
    model_path
        The model to decode with.
    output
        The folder to write.
    parts
        Folder of the results of batches, those of earlier runs among them; None: there are none.
    batch_bases
        A batch has about so many bases, see :func:`~hmmseg.sequence.batching.share_out`.
    options
        Everything else that bears on what is decoded.
    force
        Replace an earlier result.
    """
    check_target(output, force)
    model = load_model(model_path)
    sources = sources.with_soft_mask((model.training or {}).get("soft_mask", "use"))
    records, bases, others = _records(sources)
    decoded = [number for number, known in enumerate(bases) if known]
    shared = share_out(
        [records[number].alias[:64] for number in decoded],
        [bases[number] for number in decoded],
        batch_bases,
    )
    common = {
        "software": software(),
        "model": sha256_of(model_path),
        "gap_min": sources.gap_min,
        "soft_mask": sources.soft_mask,
        **options,
    }
    found: list[Batch] = []
    batch_of: dict[int, str] = {}
    for batch in shared:
        members = [decoded[number] for number in batch]
        key = _key(common, [records[number].alias for number in members])
        batch_of |= dict.fromkeys(members, key)
        reused = parts is not None and (Path(parts) / key / PROVENANCE).is_file()
        found.append(Batch(key, len(members), sum(bases[n] for n in members), reused))
    placed = [_placed(record, batch_of.get(number)) for number, record in enumerate(records)]
    parameters = {**sources.parameters(), "batch_bases": batch_bases, **options}
    plan = Plan(placed, sorted(found, key=lambda batch: batch.key), parameters)
    with whole_folder(output, force=force) as folder:
        written = [*write_plan(folder, plan), folder / "composition.tsv"]
        # Records without anything to decode are in no batch, but count in the genome.
        write_counts(written[-1], WORDS, *others, [])
        inputs = [*sources.files(), model_path]
        write_provenance(folder, "batches", parameters, None, inputs, written)
    return plan


def _records(sources: Sources) -> tuple[list[PlannedRecord], list[int], Counts]:
    """Return the records, without a batch as yet, and how many bases of each are decoded.

    Then the counts of those of which none are.
    """
    records: list[PlannedRecord] = []
    bases: list[int] = []
    others: list[Counts] = []
    nowhere = np.empty(0, np.int64)
    exclusions = sources.exclusions()
    times: Counter[str] = Counter()
    for record, contigs in sources.read_contigs():
        sequence = checksums(record.bases)
        alias = record_digest(record, sequence.given, exclusions.get(record.name))
        times[alias] += 1
        # Records of the same sequence stay apart, because each is counted.
        alias += f"_{times[alias]}" if times[alias] > 1 else ""
        records.append(
            PlannedRecord(record.name, len(record), record.circular, "", alias, sequence)
        )
        bases.append(sum(map(len, contigs)))
        if not contigs:
            others.append(counts_of_record(record, nowhere, nowhere))
    return records, bases, counts_together(others)


def _placed(record: PlannedRecord, key: str | None) -> PlannedRecord:
    alias = record.alias if key is not None else ""
    return PlannedRecord(
        record.name, record.length, record.circular, key or "", alias, record.sequence
    )


def _key(common: Mapping[str, Any], aliases: list[str]) -> str:
    """Return the key of a batch from all that bears on its result."""
    text = json.dumps({**common, "records": aliases}, sort_keys=True)
    return hashlib.sha256(text.encode()).hexdigest()[:_KEY_DIGITS]
