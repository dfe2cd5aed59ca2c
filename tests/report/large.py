"""The result folder of a large assembly, made up, to measure what its page costs."""

import shutil
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.outputs import write_json
from hmmseg.tracks.bigwig import PosteriorTrack
from hmmseg.tracks.sizes import write_chrom_sizes
from hmmseg.tracks.table import write_regions_table
from tests.report.folders import MODEL

__all__ = ["large_folder"]

_RUNS_PER_BASE = 0.03
"""Of a posterior with three decimals; those of ordinary models lie around this."""
_WINDOW = 100


def large_folder(
    folder: Path, bases: int = 100_000_000, records: int = 12_000, regions: int = 60_000
) -> Path:
    """Write the calls, tracks and model of an assembly of so many bases, records and regions."""
    random = np.random.Generator(np.random.PCG64(5))
    sizes = _lengths(random, bases, records)
    lengths = {f"scaffold_{number + 1}": int(n) for number, n in enumerate(sizes)}
    (folder / "calls").mkdir(parents=True)
    (folder / "survey").mkdir()
    shutil.copy(MODEL, folder / "model.json")
    table = _regions(random, lengths, regions)
    write_chrom_sizes(folder / "calls" / "chrom.sizes", lengths)
    write_regions_table(folder / "calls" / "regions.tsv", table)
    held = int(table["length"].sum())
    write_json(
        folder / "calls" / "summary.json",
        {
            "format": "hmmseg-calls", "version": 1, "records": records, "bases": bases,
            "circular_records": [], "skipped_records": [], "contigs": records,
            "decoded_bases": bases,
            "regions": {"island": {"count": regions, "bases": held, "share": held / bases}},
        },
    )  # fmt: skip
    by_record = dict(list(table.groupby("record", sort=False)))
    with PosteriorTrack(folder / "calls" / "island.posterior.bw", lengths) as track:
        for name, length in lengths.items():
            own = by_record.get(name, table.iloc[:0])
            track.add(name, *_posterior(random, length, own["start"].to_numpy(), own["end"]))
    with PosteriorTrack(folder / "survey" / "gc.bw", lengths) as track:
        for name, length in lengths.items():
            starts = np.arange(0, length, _WINDOW)
            values = np.round(0.42 + 0.06 * random.standard_normal(len(starts)), 2).clip(0, 1)
            track.add(name, starts, np.append(starts[1:], length), values)
    return folder


def _lengths(random: np.random.Generator, bases: int, records: int) -> NDArray[np.int64]:
    """Lengths of scaffolds: a few long ones, many short ones."""
    raw = np.exp(1.6 * random.standard_normal(records))
    lengths = np.maximum((raw / raw.sum() * bases).astype(np.int64), 500)
    lengths[np.argmax(lengths)] += bases - lengths.sum()
    return lengths


def _regions(random: np.random.Generator, lengths: dict[str, int], regions: int) -> pd.DataFrame:
    names, sizes = list(lengths), np.array(list(lengths.values()))
    ends = np.cumsum(sizes)
    at = np.sort(random.choice(int(ends[-1] // 1000), regions, replace=False)) * 1000
    record = np.searchsorted(ends, at, side="right")
    start = at - (ends[record] - sizes[record])
    width = np.minimum(random.integers(120, 900, regions), sizes[record] - start)
    start = start - np.where(width < 20, 20, 0)
    width = np.maximum(width, 20)
    start = np.maximum(start, 0)
    numbers = {
        "log_odds_bits": 80 * random.random(regions),
        "soft_masked_fraction": random.random(regions),
        "expected_wrong_bases": 9 * random.random(regions),
        "gc": 0.4 + 0.3 * random.random(regions),
        "cpg_ratio": random.random(regions),
        "q_value": random.random(regions) ** 6,
    }
    return pd.DataFrame(
        {
            "region_id": [f"island_{number + 1}" for number in range(regions)],
            "record": [names[i] for i in record],
            "start": start,
            "end": start + width,
            "length": width,
            "state": "island",
            "mean_posterior": 1 - 0.3 * random.random(regions),
            **numbers,
        }
    )


def _posterior(
    random: np.random.Generator, length: int, starts: NDArray[np.int64], ends: "pd.Series[int]"
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]]:
    """Runs that are high in the regions, low elsewhere, and nowhere quite even."""
    cuts = random.integers(1, length, max(int(length * _RUNS_PER_BASE), 1))
    cuts = np.unique(np.concatenate([[0], cuts, starts, ends.to_numpy()]))
    cuts = cuts[cuts < length]
    within = np.searchsorted(starts, cuts, side="right") - 1
    inside = (within >= 0) & (cuts < ends.to_numpy()[within]) if len(starts) else cuts < 0
    noise = random.random(len(cuts)) ** 4
    values = np.round(np.where(inside, 1 - 0.3 * noise, 0.3 * noise), 3)
    return cuts, np.append(cuts[1:], length), values
