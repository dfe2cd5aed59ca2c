"""The table of regions of an assembly."""

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd

from hmmseg.regions.calling import Calls
from hmmseg.sequence.contigs import Contig

__all__ = ["LIMITS", "WRONG_BASES", "number_regions", "regions_of_record"]

LIMITS = ("start_low", "start_high", "end_low", "end_high")
"""Names of the columns."""

WRONG_BASES = "expected_wrong_bases"
"""Name of the column."""

_POSTERIOR_DECIMALS = 4
_BITS_DECIMALS = 3
_BASES_DECIMALS = 2


def regions_of_record(calls: Sequence[tuple[Contig, Calls]], names: Sequence[str]) -> pd.DataFrame:
    """Return one record's regions in record coordinates, not yet numbered.

    Scores are rounded here, once, so that every file that shows them shows the same.

    Parameters
    ----------
    calls
        The record's contigs and their regions.
    names
        The states' names.

    Returns
    -------
    DataFrame
        Columns record, start, end, length, state, mean_posterior, log_odds_bits; sorted by
        start. The end of a region across the origin of a circle is start + length. Then
        expected_wrong_bases and the limits of start and end, if the calls have posteriors. On a
        circle a limit may lie below 0 or beyond the record's length.
    """
    parts = []
    for contig, found in calls:
        starts = (found.intervals.starts + contig.start) % contig.record_length
        lengths = found.intervals.ends - found.intervals.starts
        columns: dict[str, Any] = {
            "record": contig.record,
            "start": starts,
            "end": starts + lengths,
            "length": lengths,
            "state": [names[state] for state in found.intervals.states],
            "mean_posterior": np.round(found.mean_posterior, _POSTERIOR_DECIMALS),
            "log_odds_bits": np.round(found.log_odds_bits, _BITS_DECIMALS),
        }
        if found.wrong_bases is not None:
            columns[WRONG_BASES] = np.round(found.wrong_bases, _BASES_DECIMALS)
        if found.limits is not None:
            limits = found.limits + (starts - found.intervals.starts)[:, None]
            columns |= dict(zip(LIMITS, limits.T, strict=True))
        parts.append(pd.DataFrame(columns))
    table = pd.concat(parts, ignore_index=True)
    return table.sort_values(["start", "end"], kind="stable", ignore_index=True)


def number_regions(tables: Sequence[pd.DataFrame]) -> pd.DataFrame:
    """Return the regions of all records in one table, each with an identifier.

    Parameters
    ----------
    tables
        As from :func:`regions_of_record`, in the records' order; an old identifier is replaced.

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
