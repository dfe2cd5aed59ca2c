"""Figures of a model and of how it was trained and chosen."""

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence.findings import words_beside
from hmmseg.model import Model
from hmmseg.model.logarithm import LN2, logarithms
from hmmseg.report.colours import GREY, INK, colour_of
from hmmseg.report.drawing import NARROW, WIDE, blank, in_style, legend

__all__ = ["against_background", "draw_emissions", "draw_overview", "draw_traces"]

_MOST_WORDS = 16
_ROWS = 20
_COLUMNS = 700


def against_background(model: Model, state: int) -> list[tuple[str, float]]:
    """Return the log-ratio of each telling word to the background, in bits.

    Parameters
    ----------
    model
        The model.
    state
        Index of the state.

    Returns
    -------
    list of (str, float)
        Words of ``order + 1`` bases, a word and its reverse complement as one where the model is
        symmetric; at most 16, those that tell most, highest ratio first. A state that is
        background is compared with the whole sequence.
    """
    names, own, rest = words_beside(model, state, model.shares)
    bits = logarithms(own / rest) / LN2
    most = np.argsort(-(own - rest) * bits, kind="stable")[:_MOST_WORDS]
    ordered = most[np.argsort(-bits[most], kind="stable")]
    return [(names[i], float(bits[i])) for i in ordered]


@in_style
def draw_emissions(model: Model, state: int, colour: str) -> Any:
    """Draw the words of a state as bars of log-ratio to the background.

    Parameters
    ----------
    model
        The model.
    state
        Index of the state.
    colour
        Of the bars.
    """
    ratios = against_background(model, state)
    height = 0.9 + 0.17 * max(len(ratios), 3)
    figure, axes = blank((NARROW[0], height))
    at = np.arange(len(ratios))
    values = [bits for _, bits in ratios]
    axes.barh(at, values, color=[colour if bits >= 0 else GREY for bits in values], height=0.7)
    axes.set_yticks(at, [name for name, _ in ratios], family="DejaVu Sans")
    axes.invert_yaxis()
    axes.axvline(0, color=INK, linewidth=0.8)
    axes.spines["left"].set_visible(False)
    axes.tick_params(axis="y", length=0)
    against = "the background" if model.reported[state] else "the whole"
    axes.set(xlabel=f"log-ratio to {against} (bits)", title=model.names[state])
    most = max([0.1, *(abs(bits) for bits in values)]) * 1.08
    axes.set_xlim(-most, most)
    return figure


@in_style
def draw_traces(traces: Sequence[Sequence[float]], bases: int, best: int) -> Any:
    """Draw bits per base of every start, iteration by iteration.

    Parameters
    ----------
    traces
        Log-likelihood (nats) after each iteration, of each start.
    bases
        What the model was trained on.
    best
        The start that was kept.
    """
    figure, axes = blank()
    # The kept one is drawn last, over the others.
    for number in sorted(range(len(traces)), key=lambda n: n == best):
        bits = [-value / (bases * LN2) for value in traces[number]]
        kept = number == best
        axes.plot(
            range(len(bits)), bits, color=colour_of(0) if kept else GREY, marker="o",
            markersize=2.5, linewidth=1.8 if kept else 1.0, zorder=3 if kept else 2,
            label="kept" if kept else "others" if number == (best == 0) else None,
        )  # fmt: skip
    axes.set(xlabel="iteration", ylabel="bits per base")
    axes.margins(x=0.03)
    axes.xaxis.get_major_locator().set_params(integer=True)
    if len(traces) > 1:
        legend(axes)
    return figure


@in_style
def draw_overview(
    records: Sequence[tuple[str, int, Sequence[NDArray[np.float64]]]], colours: Sequence[str]
) -> Any:
    """Draw the posterior along the longest records, a strip for each state.

    Parameters
    ----------
    records
        Name, length in bases, and the mean posterior in bins of each state (NaN in gaps).
    colours
        One for each state.
    """
    shown = records[:_ROWS]
    lanes = len(colours)
    longest = max(length for _, length, _ in shown)
    image = np.ones((len(shown) * (lanes + 1), _COLUMNS, 3))
    for row, (_, length, tracks) in enumerate(shown):
        width = max(1, int(_COLUMNS * length / longest))
        for lane, track in enumerate(tracks):
            image[row * (lanes + 1) + lane, :width] = _strip(track, width, colours[lane])
    high = 0.6 + 0.17 * len(shown) + 0.07 * len(shown) * (lanes - 1)
    figure, axes = blank((WIDE[0], max(high, 1.1)))
    rows = len(image)
    axes.imshow(
        image, aspect="auto", interpolation="nearest", extent=(0, longest, rows, 0),
    )  # fmt: skip
    at = [row * (lanes + 1) + lanes / 2 for row in range(len(shown))]
    axes.set_yticks(at, [_short(name) for name, _, _ in shown])
    axes.set_ylim(rows - 1 + 0.3, -0.3)
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    unit, name = (1e6, "Mb") if longest >= 2e6 else (1e3, "kb")
    axes.xaxis.set_major_formatter(lambda value, _: f"{value / unit:g}")
    axes.set_xlabel(f"position ({name})")
    return figure


def _strip(track: NDArray[np.float64], width: int, colour: str) -> NDArray[np.float64]:
    """Return float64[column, 3]: from pale to the state's colour; gaps stay white."""
    edges = np.linspace(0, len(track), width + 1).astype(np.int64)
    known = np.isfinite(track)
    sums = np.concatenate([[0.0], np.cumsum(np.where(known, track, 0.0))])
    counts = np.concatenate([[0], np.cumsum(known)])
    right = np.maximum(edges[1:], edges[:-1] + 1).clip(max=len(track))
    left = np.minimum(edges[:-1], right - 1)
    number = counts[right] - counts[left]
    mean = (sums[right] - sums[left]) / np.maximum(number, 1)
    full = np.array([int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)])
    pale = np.array([0.925, 0.933, 0.945])
    strip = pale + (full - pale) * mean[:, None]
    strip[number == 0] = 1.0
    return np.asarray(strip)


def _short(name: str) -> str:
    return name if len(name) <= 22 else f"{name[:11]}…{name[-10:]}"
