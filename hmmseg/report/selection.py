"""The picture of a model selection, with the same bytes each time."""

from collections.abc import Sequence
from pathlib import Path
from typing import Any

from hmmseg.evidence.selection import Comparison

__all__ = ["draw_selection"]

_COLOURS = ("#000000", "#0072b2", "#d55e00", "#009e73", "#cc79a7", "#e69f00", "#56b4e9", "#888888")
"""Okabe & Ito 2008, which people who see colours differently can tell apart."""


def draw_selection(path: str | Path, compared: Sequence[Comparison]) -> None:
    """Draw held-out bits per base against the order, a line for each number of states.

    Parameters
    ----------
    path
        The SVG file to write.
    compared
        The models.
    """
    import matplotlib as mpl  # noqa: PLC0415 - start-up time
    from matplotlib.backends.backend_svg import FigureCanvasSVG  # noqa: PLC0415
    from matplotlib.figure import Figure  # noqa: PLC0415
    from matplotlib.ticker import MaxNLocator  # noqa: PLC0415

    # Names of elements come from a salt, texts stay texts, and there is no date.
    settings: Any = {"svg.hashsalt": "hmmseg", "svg.fonttype": "none", "font.family": "DejaVu Sans"}
    with mpl.rc_context(settings):
        figure = Figure(figsize=(7, 4.2))
        FigureCanvasSVG(figure)
        axes = figure.add_axes((0.13, 0.13, 0.66, 0.78))
        for number, states in enumerate(sorted({c.cell.states for c in compared})):
            own = sorted((c for c in compared if c.cell.states == states), key=_order)
            label = "1 state: a chain" if states == 1 else f"{states} states"
            axes.errorbar(
                [_order(c) for c in own],
                [c.bits_per_base for c in own],
                yerr=[c.standard_error for c in own],
                color=_COLOURS[number % len(_COLOURS)],
                marker="o",
                markersize=4,
                capsize=3,
                linewidth=1.2,
                label=label,
            )
        for c in compared:
            if c.recommended:
                axes.plot(
                    [_order(c)], [c.bits_per_base], "o", markersize=12, fillstyle="none",
                    color="black", label="recommended",
                )  # fmt: skip
        axes.set_xlabel("order")
        axes.set_ylabel("held-out bits per base")
        axes.set_title("bars: standard error of the difference from the best", fontsize=9)
        axes.xaxis.set_major_locator(MaxNLocator(integer=True))
        axes.ticklabel_format(axis="y", useOffset=False)
        for side in ("top", "right"):
            axes.spines[side].set_visible(False)
        axes.legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), frameon=False, fontsize=8)
        figure.savefig(path, format="svg", metadata={"Date": None, "Creator": None})


def _order(compared: Comparison) -> int:
    return compared.cell.order
