"""What the model and the assembly say about the calls, computed for ``calibrate``."""

from collections.abc import Collection, Iterator
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.evidence import durations, homogeneity, reliability, resolution
from hmmseg.evidence.stretches import Words
from hmmseg.evidence.typical import DRAWN_LENGTHS, typical_blocks
from hmmseg.jobs.sources import Sources
from hmmseg.model import Model
from hmmseg.progress import Progress
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate

__all__ = ["check"]


def check(
    sources: Sources,
    model: Model,
    regions: pd.DataFrame,
    folder: Path,
    *,
    records: Collection[str] | None = None,
    seed: int = 1,
    threads: int = 1,
) -> dict[str, str]:
    """Write tables on resolution, reliability, homogeneity and lengths; return them in words.

    Parameters
    ----------
    sources
        The sequence; it is read twice.
    model
        The model that called.
    regions
        The table of called regions.
    folder
        Where the tables are to stand.
    records
        Names of the records that were called; None for all.
    seed
        Of all draws.
    threads
        Threads to use; the result does not depend on it.

    Returns
    -------
    dict
        A statement each under ``resolution``, ``reliability``, ``homogeneity``, ``lengths``.

    Raises
    ------
    SequenceError
        A contig is impossible under the model.
    """
    said = {"resolution": _resolution(model, regions, folder, seed, threads)}
    lengths, total = _surveyed(sources, model, records)
    drawn = simulate(model, reliability.drawn_lengths(lengths, seed), seed)
    found = reliability.reliability_of_states(model, drawn, threads)
    _write(folder / "reliability.tsv", reliability.curve_table(found))
    _write(folder / "false_discovery.tsv", reliability.called_table(found))
    said["reliability"] = reliability.statement(found)
    blocks = (one.bases for one in simulate(model, DRAWN_LENGTHS, seed + 1))
    judge = homogeneity.Judge(model, typical_blocks(model, blocks, threads), total, threads)
    sampler = durations.Sampler(model, sum(lengths), seed)
    with Progress(sum(lengths), "checking", "bases") as progress:
        for name, contigs in _read(sources, records):
            judge.add(name, contigs)
            for contig in contigs:
                sampler.add(contig)
            progress.advance(sum(map(len, contigs)), name)
    fit, visits = judge.judgement(), sampler.durations()
    _write(folder / "homogeneity.tsv", homogeneity.table(fit))
    _write(folder / "lengths.tsv", durations.table(visits))
    said["homogeneity"] = homogeneity.statement(fit)
    said["lengths"] = durations.statement(visits)
    return said


def _resolution(model: Model, regions: pd.DataFrame, folder: Path, seed: int, threads: int) -> str:
    found = resolution.resolution(model, seed, threads)
    _write(folder / "resolution.tsv", resolution.table(found))
    _write(folder / "detection.tsv", resolution.curve_table(found))
    called = {
        str(state): rows["length"].tolist() for state, rows in regions.groupby("state", sort=False)
    }
    return resolution.statement(found, called)


def _surveyed(
    sources: Sources, model: Model, records: Collection[str] | None
) -> tuple[list[int], NDArray[np.int64]]:
    """Return the lengths of the contigs, and int64[class] of how often words occur."""
    words, lengths = Words.of(model), []
    total = np.zeros(words.count, np.int64)
    for _, contigs in _read(sources, records):
        for contig in contigs:
            lengths.append(len(contig))
            total += words.counts(contig, 0, len(contig))
    return lengths, total


def _read(sources: Sources, records: Collection[str] | None) -> Iterator[tuple[str, list[Contig]]]:
    for record, contigs in sources.read_contigs(again=True):
        if records is None or record.name in records:
            yield record.name, contigs


def _write(path: Path, table: pd.DataFrame) -> None:
    table.to_csv(path, sep="\t", index=False, lineterminator="\n", na_rep="NA", float_format="%.6g")
