"""The table of regions of an assembly."""

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.regions.calling import Calls
from hmmseg.regions.masking import SOFT_MASKED, soft_masked_fraction
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.reading import Record

__all__ = [
    "LIMITS",
    "WRONG_BASES",
    "Columns",
    "number_regions",
    "regions_of_record",
    "table_of_records",
]

Columns = dict[str, NDArray[Any]]
"""Columns of a table of regions, by name; quicker than a table for every record."""

LIMITS = ("start_low", "start_high", "end_low", "end_high")
"""Names of the columns."""

WRONG_BASES = "expected_wrong_bases"
"""Name of the column."""

_DECIMALS = {"mean_posterior": 4, "log_odds_bits": 3, WRONG_BASES: 2}


def regions_of_record(
    record: Record, calls: Sequence[tuple[Contig, Calls]], names: Sequence[str]
) -> Columns:
    """Return one record's regions in record coordinates.

    Parameters
    ----------
    record
        The record.
    calls
        The record's contigs and their regions.
    names
        The states' names.

    Returns
    -------
    dict of array[region]
        Columns record, start, end, length, state, mean_posterior, log_odds_bits,
        soft_masked_fraction; sorted by start. The end of a region across the origin of a circle
        is start + length. Then
        expected_wrong_bases and the limits of start and end, if the calls have posteriors. On a
        circle a limit may lie below 0 or beyond the record's length.
    """
    named = np.array(names, dtype=object)
    parts: list[Columns] = []
    for contig, found in calls:
        starts = (found.intervals.starts + contig.start) % contig.record_length
        lengths = found.intervals.ends - found.intervals.starts
        columns: Columns = {
            "record": np.full(len(starts), contig.record, dtype=object),
            "start": starts,
            "end": starts + lengths,
            "length": lengths,
            "state": named[found.intervals.states],
            "mean_posterior": found.mean_posterior,
            "log_odds_bits": found.log_odds_bits,
            SOFT_MASKED: soft_masked_fraction(record, starts, starts + lengths),
        }
        if found.wrong_bases is not None:
            columns[WRONG_BASES] = found.wrong_bases
        if found.limits is not None:
            limits = found.limits + (starts - found.intervals.starts)[:, None]
            columns |= dict(zip(LIMITS, limits.T, strict=True))
        parts.append(columns)
    together = _together(parts)
    order = np.lexsort((together["end"], together["start"]))
    return {name: values[order] for name, values in together.items()}


def table_of_records(parts: Sequence[Columns]) -> pd.DataFrame:
    """Return the regions of all records in one table, numbered.

    Scores are rounded here, once, so that every file that shows them shows the same.

    Parameters
    ----------
    parts
        As from :func:`regions_of_record`, in the records' order.
    """
    if not parts:
        return pd.DataFrame()
    columns = _together(parts)
    for name, decimals in _DECIMALS.items():
        if name in columns:
            columns[name] = np.round(columns[name], decimals)
    return number_regions([pd.DataFrame(columns)])


def _together(parts: Sequence[Columns]) -> Columns:
    return {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}


def number_regions(tables: Sequence[pd.DataFrame]) -> pd.DataFrame:
    """Return the regions of all records in one table, each with an identifier.

    Parameters
    ----------
    tables
        Tables of regions, in the records' order; an old identifier is replaced.

    Returns
    -------
    DataFrame
        With ``region_id`` first: the state's name and a number that counts its regions from 1.
    """
    table = pd.concat([t for t in tables if len(t)] or tables[:1], ignore_index=True)
    serial = table.groupby("state", sort=False).cumcount() + 1
    identifiers = table["state"].astype(str) + "_" + serial.astype(str)
    table = table.drop(columns="region_id", errors="ignore")
    table.insert(0, "region_id", identifiers)
    return table
