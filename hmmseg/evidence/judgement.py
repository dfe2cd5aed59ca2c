"""Real regions, or the boundaries between them, judged by what was found in null sequence."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.evidence.null_regions import Found, Scoring, boundary_scores
from hmmseg.evidence.nulls import Piece
from hmmseg.evidence.significance import (
    at_or_above,
    significance,
    smallest_q,
    thresholds,
    upper_counts,
)

__all__ = ["CHANCE", "Judged", "boundaries_of", "false_regions", "judge"]

CHANCE = ("expected_by_chance", "p_value", "q_value")
"""Columns that a judgement adds."""

_MEGA = 1e6


@dataclass(frozen=True, eq=False)
class Judged:
    """Regions with what chance has to say of them.

    Attributes
    ----------
    regions : DataFrame
        The table with the columns of `CHANCE`; missing where there is nothing to judge.
    boundaries : DataFrame or None
        Boundaries between regions, where these are judged instead.
    smallest_q : mapping of str to float
        Of each class that has any, what q a region could have if no null region came near.
    """

    regions: pd.DataFrame
    boundaries: pd.DataFrame | None
    smallest_q: Mapping[str, float]


def boundaries_of(table: pd.DataFrame, contigs: Sequence[Piece]) -> pd.DataFrame:
    """Return the boundaries between neighbouring regions of one contig.

    Parameters
    ----------
    table
        Regions.
    contigs
        Places of all contigs, whole.

    Returns
    -------
    DataFrame
        record, position (where the region on the right begins), left_region, right_region,
        bits; left and right, rows of the table.
    """
    found = []
    rows_of: dict[str, NDArray[np.int64]] = {
        str(name): np.asarray(rows, np.int64)
        for name, rows in table.groupby("record", sort=False).indices.items()
    }
    starts = table["start"].to_numpy(np.int64)
    bits = table["log_odds_bits"].to_numpy(np.float64)
    states = pd.factorize(table["state"])[0].astype(np.int64)
    for piece in contigs:
        contig = piece.contig
        rows = rows_of.get(contig.record, np.empty(0, np.int64))
        place = (starts[rows] - contig.start) % contig.record_length
        inside = place < piece.length
        rows = rows[inside][np.argsort(place[inside], kind="stable")]
        pairs, own = boundary_scores(states[rows], bits[rows], contig.closed)
        for (left, right), score in zip(rows[pairs].reshape(-1, 2), own, strict=True):
            found.append((contig.record, int(starts[right]), int(left), int(right), float(score)))
    frame = pd.DataFrame(found, columns=["record", "position", "left", "right", "bits"])
    names = table["region_id"].to_numpy(dtype=object)
    frame.insert(2, "left_region", names[frame["left"].to_numpy(np.int64)])
    frame.insert(3, "right_region", names[frame["right"].to_numpy(np.int64)])
    return frame


def judge(
    table: pd.DataFrame,
    contigs: Sequence[Piece],
    null: Found,
    scoring: Scoring,
    reported: Mapping[int, str],
    bases: int,
) -> Judged:
    """Judge the regions of an assembly.

    Parameters
    ----------
    table
        The regions.
    contigs
        Places of all contigs, whole.
    null
        What was found in null sequence.
    scoring
        What counts.
    reported
        Names of the reported states by their number.
    bases
        That were decoded.
    """
    ratio = bases / max(null.bases, 1)
    if scoring.boundaries:
        return _judge_boundaries(table, boundaries_of(table, contigs), null, ratio)
    columns = np.full((len(table), len(CHANCE)), np.nan)
    least = {}
    for kind, name, rows in _groups(table, scoring, reported):
        real = table["log_odds_bits"].to_numpy(np.float64)[rows]
        columns[rows] = np.column_stack(significance(real, null.of(kind), ratio))
        if len(real):
            least[name] = smallest_q(len(real), ratio)
    return Judged(_with(table, columns), None, least)


def _groups(
    table: pd.DataFrame, scoring: Scoring, reported: Mapping[int, str]
) -> list[tuple[int, str, NDArray[np.intp]]]:
    """Return number, name and rows of each class of regions."""
    if scoring.pooled:
        return [(0, "any", np.arange(len(table)))]
    states = table["state"].to_numpy(dtype=object)
    return [(kind, name, np.flatnonzero(states == name)) for kind, name in reported.items()]


def _judge_boundaries(
    table: pd.DataFrame, boundaries: pd.DataFrame, null: Found, ratio: float
) -> Judged:
    real = boundaries["bits"].to_numpy(np.float64)
    chance = np.column_stack(significance(real, null.of(0), ratio))
    # A region is as sure as the less sure of its two ends.
    columns = np.full((len(table), len(CHANCE)), np.nan)
    for side in ("left", "right"):
        rows = boundaries[side].to_numpy(np.int64)
        columns[rows] = np.fmax(columns[rows], chance)
    least = {"boundary": smallest_q(len(real), ratio)} if len(real) else {}
    shown = _with(boundaries.drop(columns=["left", "right"]), chance)
    return Judged(_with(table, columns), shown, least)


def _with(table: pd.DataFrame, columns: NDArray[np.float64]) -> pd.DataFrame:
    return table.assign(**{name: columns[:, i] for i, name in enumerate(CHANCE)})


def false_regions(
    name: str,
    judged: Judged,
    null: Found,
    scoring: Scoring,
    reported: Mapping[int, str],
) -> pd.DataFrame:
    """Return how many null regions there are at or above scores, with an upper bound.

    Parameters
    ----------
    name
        Of the null.
    judged
        Gives the real ones.
    null
        What was found in null sequence.
    scoring
        What counts.
    reported
        Names of the reported states by their number.

    Returns
    -------
    DataFrame
        null, state, score, null_regions, null_regions_per_mb, upper_per_mb (95 %),
        real_regions.
    """
    parts = []
    for kind, state, real in _real_scores(judged, scoring, reported):
        own = np.sort(null.of(kind))
        at = thresholds(real, own)
        counts = at_or_above(own, at)
        parts.append(
            pd.DataFrame(
                {
                    "null": name,
                    "state": state,
                    "score": at,
                    "null_regions": counts,
                    "null_regions_per_mb": counts * (_MEGA / max(null.bases, 1)),
                    "upper_per_mb": upper_counts(counts) * (_MEGA / max(null.bases, 1)),
                    "real_regions": at_or_above(np.sort(real), at),
                }
            )
        )
    return pd.concat(parts, ignore_index=True)


def _real_scores(
    judged: Judged, scoring: Scoring, reported: Mapping[int, str]
) -> list[tuple[int, str, NDArray[np.float64]]]:
    if judged.boundaries is not None:
        return [(0, "boundary", judged.boundaries["bits"].to_numpy(np.float64))]
    bits = judged.regions["log_odds_bits"].to_numpy(np.float64)
    groups = _groups(judged.regions, scoring, reported)
    return [(kind, name, bits[rows]) for kind, name, rows in groups]
