"""Figures of how sure one can be: chance, q-values, calibration, resolution, lengths."""

from collections.abc import Iterator
from typing import Any

import numpy as np
import pandas as pd

from hmmseg.report.colours import GREY, INK, colour_of
from hmmseg.report.drawing import blank, in_style, legend, logarithmic

__all__ = [
    "draw_detection",
    "draw_discovery",
    "draw_lengths",
    "draw_null",
    "draw_q",
    "draw_reliability",
]


@in_style
def draw_null(table: pd.DataFrame, megabases: float) -> list[tuple[str, Any]]:
    """Draw how many regions reach each score, found and expected by chance, for each state.

    Parameters
    ----------
    table
        ``false_regions.tsv``.
    megabases
        Of the sequence that was decoded.
    """
    drawn = []
    for state, own in _by_state(table, "score"):
        figure, axes = blank()
        nulls = list(dict.fromkeys(own["null"]))
        first = own[own["null"] == nulls[0]]
        axes.step(first["score"], first["real_regions"], where="pre", color=INK, label="found")
        for number, null in enumerate(nulls):
            drawn_null = own[own["null"] == null]
            expected = drawn_null["null_regions_per_mb"] * megabases
            upper = drawn_null["upper_per_mb"] * megabases
            look = {"color": colour_of(number), "where": "pre"}
            axes.step(drawn_null["score"], expected.where(expected > 0), label=null, **look)
            axes.step(
                drawn_null["score"], upper.where(upper > 0), linewidth=0.8, linestyle=":", **look
            )
        logarithmic(axes, "y")
        if own["score"].min() > 0 and own["score"].max() > 30 * own["score"].min():
            logarithmic(axes, "x")
        axes.set(xlabel="score at least (bits)", ylabel="regions")
        legend(axes)
        drawn.append((state, figure))
    return drawn


@in_style
def draw_q(values: "pd.Series[Any]") -> Any:
    """Draw how many regions have at most each q-value."""
    figure, axes = blank()
    known = np.sort(values.dropna().to_numpy(dtype=float))
    most = max([0.1, *(1.05 * known[-1:])])
    axes.step(
        np.concatenate([[0.0], known, [most]]),
        np.concatenate([[0], np.arange(1, len(known) + 1), [len(known)]]),
        where="post", color=colour_of(0),
    )  # fmt: skip
    axes.axvline(0.05, color=GREY, linewidth=0.9, linestyle=":")
    axes.annotate("0.05", (0.05, 0), xytext=(3, 3), textcoords="offset points", color=GREY)
    axes.set(xlabel="q-value at most", ylabel="regions", xlim=(0, most))
    axes.set_ylim(bottom=0)
    return figure


@in_style
def draw_reliability(table: pd.DataFrame) -> Any:
    """Draw the share of bases that truly are in a state against the posterior that was said."""
    figure, axes = blank()
    axes.plot([0, 1], [0, 1], color=GREY, linewidth=0.9, linestyle=":")
    for number, (state, own) in enumerate(_by_state(table, "low")):
        seen = own[own["bases"] > 0]
        axes.plot(
            seen["mean_posterior"], seen["observed_fraction"], color=colour_of(number),
            marker="o", markersize=3.5, label=state,
        )  # fmt: skip
    axes.set(
        xlabel="posterior", ylabel="share that is right", xlim=(-0.02, 1.02), ylim=(-0.02, 1.02)
    )
    legend(axes)
    return figure


@in_style
def draw_discovery(table: pd.DataFrame) -> Any:
    """Draw the false share of bases above a threshold: seen against said."""
    figure, axes = blank()
    most = float(np.nanmax([table["nominal_fdr"].max(), table["observed_fdr"].max(), 0.05]))
    axes.plot([0, most], [0, most], color=GREY, linewidth=0.9, linestyle=":")
    for number, (state, own) in enumerate(_by_state(table, "nominal_fdr")):
        axes.plot(
            own["nominal_fdr"], own["observed_fdr"], color=colour_of(number), marker="o",
            markersize=3.5, label=state,
        )  # fmt: skip
    axes.set(xlabel="false share, by the posterior", ylabel="false share, seen")
    axes.set_xlim(left=0)
    axes.set_ylim(bottom=0)
    legend(axes)
    return figure


@in_style
def draw_detection(table: pd.DataFrame) -> Any:
    """Draw the share of inserted regions that were found, against their length."""
    figure, axes = blank()
    for number, (state, own) in enumerate(_by_state(table, "length")):
        axes.plot(
            own["length"], own["detected"] / own["trials"], color=colour_of(number), marker="o",
            markersize=3.5, label=state,
        )  # fmt: skip
    for level in (0.5, 0.95):
        axes.axhline(level, color=GREY, linewidth=0.8, linestyle=":")
    logarithmic(axes, "x")
    axes.set(xlabel="length (bases)", ylabel="share found", ylim=(-0.02, 1.04))
    legend(axes)
    return figure


@in_style
def draw_lengths(table: pd.DataFrame) -> list[tuple[str, Any]]:
    """Draw observed and expected lengths of regions, a figure for each state."""
    drawn = []
    for number, (state, own) in enumerate(_by_state(table, "length")):
        figure, axes = blank()
        axes.plot(
            own["length"], own["observed"], color=colour_of(number), marker="o", markersize=3.5,
            linestyle="none", label="observed",
        )  # fmt: skip
        axes.step(
            own["length"], own["expected"], where="mid", color=INK, linewidth=1.2, label="expected"
        )
        if len(own) and own["length"].min() > 0:
            logarithmic(axes, "x")
        axes.set(xlabel="length (bases)", ylabel="regions")
        # Beside the legend, which is on the left.
        axes.set_title(state, loc="right")
        axes.set_ylim(bottom=0)
        legend(axes)
        drawn.append((state, figure))
    return drawn


def _by_state(table: pd.DataFrame, key: str) -> Iterator[tuple[str, pd.DataFrame]]:
    """Yield the rows of each state, states in the order of the table, rows in that of a column."""
    for state, own in table.groupby("state", sort=False):
        yield str(state), own.sort_values(key, kind="stable")
