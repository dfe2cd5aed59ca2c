"""The section *Where*: a map of every record, and the table of regions beside it."""

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from math import isnan
from typing import Any

import numpy as np
import pandas as pd

from hmmseg.report.bins import LEVELS, NOTHING, Binned, Layout
from hmmseg.report.colours import colour_of
from hmmseg.report.packing import packed
from hmmseg.report.parts import Item, Map, Missing, Part, Section
from hmmseg.report.results import Results
from hmmseg.report.words import called, count, in_bases, percent, plural

__all__ = ["MOST_ROWS", "PRELOADED", "Carried", "carried", "longest_first", "where_section"]

PRELOADED = 50
"""So many of the longest records are opened with the page."""
_BLOCK_BINS = 100_000
MOST_ROWS = 200_000
"""More regions would make a page that does not open."""

_COLUMNS = {
    "region_id": ("region", 96, ""),
    "record": ("record", 80, ""),
    "start": ("start", 66, ""),
    "length": ("length", 66, ""),
    "q_value": ("q", 74, ".3g"),
    "mean_posterior": ("posterior", 88, ".4f"),
    "log_odds_bits": ("log-odds (bits)", 128, ".1f"),
    "state": ("state", 100, ""),
    "end": ("end", 66, ""),
    "expected_wrong_bases": ("expected wrong", 124, ".1f"),
    "gc": ("G+C", 68, ".3f"),
    "cpg_ratio": ("CpG of expected", 128, ".2f"),
    "soft_masked_fraction": ("lower case", 92, ".2f"),
}
"""What the table shows of ``regions.tsv``: a heading, a least width in pixels, a format of
numbers."""

_LETTER, _PADDING, _WIDEST = 8.3, 18, 240
"""Pixels of a letter, around a cell's text, and of a column at most."""

_WHOLE = ("start", "end", "length")


@dataclass(frozen=True)
class Carried:
    """What the page carries for its map.

    Attributes
    ----------
    data : dict
        Becomes JSON.
    blobs : list of (str, str)
        Packed arrays by name.
    """

    data: dict[str, Any]
    blobs: list[tuple[str, str]]


def longest_first(record_lengths: Mapping[str, int]) -> dict[str, int]:
    """Return the records by length, equals in their order."""
    return dict(sorted(record_lengths.items(), key=lambda item: -item[1]))


def where_section(results: Results, items: Sequence[Item]) -> Section:
    """Return the section.

    Parameters
    ----------
    results
        What the folder holds.
    items
        Figures of the whole assembly.
    """
    title = "Where"
    if results.regions is None or not results.tracks:
        command = f"hmmseg decode FASTA --model {results.folder.name}/model.json --output "
        return Section(
            "where", title, "There are no calls to draw a map of.",
            [Part("", [Missing("The map", f"{command}{results.folder.name}/calls")])],
        )  # fmt: skip
    return Section("where", title, _conclusion(results), [Part("", [Map(), *items])])


def _conclusion(results: Results) -> str:
    regions, lengths = results.regions, results.record_lengths
    assert regions is not None
    if not len(regions):
        return f"None of the {plural(len(lengths), 'record')} holds a region."
    held = regions.groupby("record", sort=False)["length"].sum()
    bare = len(lengths) - len(held)
    longest = next(iter(longest_first(lengths)))
    here = int((regions["record"] == longest).sum())
    text = (
        f"{count(len(held))} of {plural(len(lengths), 'record')} hold regions"
        if bare
        else f"Each of the {plural(len(lengths), 'record')} holds a region"
        if len(lengths) > 1
        else "The one record holds all regions"
    )
    if len(lengths) > 1:
        text += (
            f"; the longest, {called(longest)} ({in_bases(lengths[longest])}), has "
            f"{count(here) if here else 'none'}"
        )
        large = held[[lengths[name] >= 10_000 for name in held.index]]
        if len(large) > 1:
            shares = large / [lengths[name] for name in large.index]
            top = str(shares.idxmax())
            text += (
                f". The largest share of a record of at least 10 kb is {percent(shares.max())}, in "
                f"{called(top)}"
            )
    return text + "."


def carried(
    results: Results, layout: Layout, tracks: Mapping[str, Binned], strong: Binned | None
) -> Carried:
    """Return what the page needs to draw the map.

    Parameters
    ----------
    results
        What the folder holds.
    layout
        Records, longest first, and their bins.
    tracks
        Posterior of each reported state.
    strong
        G+C; None if there is no such track.
    """
    assert results.regions is not None
    planes = [p for track in tracks.values() for p in (track.lowest, track.mean, track.highest)]
    planes += [] if strong is None else [strong.mean]
    holes = next(iter(tracks.values())).holes
    names = list(layout.record_lengths)
    records = {
        "names": names,
        "lengths": list(layout.record_lengths.values()),
        "holes": np.bincount(holes[:, 0], minlength=len(names)).tolist(),
    }
    blocks = _blocks(layout)
    columns, table, left_out = _table(results.regions, {n: i for i, n in enumerate(names)})
    busiest = results.regions["record"].value_counts(sort=True)
    data = {
        "bin": layout.size,
        "levels": LEVELS,
        "nothing": NOTHING,
        "gc": strong is not None,
        "states": [{"name": s, "color": colour_of(i)} for i, s in enumerate(tracks)],
        "blocks": blocks,
        "columns": columns,
        "left_out": left_out,
        # The longest record that has something to show.
        "open": next((i for i, name in enumerate(names) if name in busiest.index), 0),
    }
    ends = layout.offsets
    blobs = [
        ("records-data", packed(json.dumps(records, ensure_ascii=False).encode("utf-8"))),
        ("holes", packed(holes[:, 1:].astype("<u4").tobytes())),
        ("regions-data", packed(table.encode("utf-8"))),
    ]
    for number, block in enumerate(blocks):
        part = slice(ends[block["first"]], ends[block["first"] + block["count"]])
        blobs.append((f"bins-{number}", packed(b"".join(p[part].tobytes() for p in planes))))
    return Carried(data, blobs)


def _blocks(layout: Layout) -> list[dict[str, int]]:
    """Cut the records: the longest first, then as many as make a block of bins."""
    counts = layout.counts.tolist()
    blocks = [{"first": 0, "count": min(PRELOADED, len(counts))}]
    first, held = PRELOADED, 0
    for record in range(PRELOADED, len(counts)):
        held += counts[record]
        if held >= _BLOCK_BINS or record == len(counts) - 1:
            blocks.append({"first": first, "count": record + 1 - first})
            first, held = record + 1, 0
    return blocks


def _table(regions: pd.DataFrame, rank: Mapping[str, int]) -> tuple[list[dict[str, Any]], str, int]:
    """Return the columns, the cells column by column, and how many regions are left out."""
    left_out = max(len(regions) - MOST_ROWS, 0)
    if left_out:
        odds = regions["log_odds_bits"].fillna(-np.inf)
        kept = odds.sort_values(ascending=False, kind="stable").index[:MOST_ROWS]
        regions = regions.loc[kept.sort_values()]
    names = [name for name in _COLUMNS if name in regions.columns]
    columns, cells = [], []
    for name in names:
        label, least, form = _COLUMNS[name]
        width = max(least, _needed(regions[name], name in _WHOLE))
        number = name != "record" and pd.api.types.is_numeric_dtype(regions[name])
        columns.append(
            {"name": name, "label": label, "width": width, "number": number,
             "whole": name in _WHOLE}
        )  # fmt: skip
        cells.append("\n".join(_cells(regions[name], rank if name == "record" else None, form)))
    return columns, "\x1e".join(cells), left_out


def _needed(column: "pd.Series[Any]", whole: bool) -> int:
    """Return the pixels that show the longest cell of a column, within reason."""
    if whole:
        longest = len(f"{int(column.max()):,}") if len(column) else 0
    elif pd.api.types.is_numeric_dtype(column):
        longest = 0
    else:
        longest = int(column.astype(str).str.len().max()) if len(column) else 0
    return min(int(_LETTER * longest) + _PADDING, _WIDEST)


def _cells(column: "pd.Series[Any]", rank: Mapping[str, int] | None, form: str) -> Iterator[str]:
    """Yield the cells of a column as text: records by their place, numbers rounded."""
    if rank is not None:
        return (str(rank[name]) for name in column)
    if not pd.api.types.is_float_dtype(column):
        return (str(value) for value in column)
    return ("NA" if isnan(value) else format(value, form) for value in column.tolist())
