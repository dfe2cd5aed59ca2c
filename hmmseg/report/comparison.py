"""Figures of a comparison, the same bytes from the same numbers."""

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from hmmseg.evidence.bootstrap import Interval
from hmmseg.evidence.tallies import Tally

__all__ = ["draw_accuracy", "draw_heldout"]

_COLOURS = {"hmm": "#0072b2", "classifier": "#d55e00", "chain": "#d55e00"}
"""Told apart by people with any kind of colour vision (Okabe & Ito 2008)."""

_NAMES = {"hmm": "HMM", "classifier": "chains in windows"}

_STYLE = {
    "svg.hashsalt": "hmmseg",
    "svg.fonttype": "none",
    "font.size": 9,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "figure.constrained_layout.use": True,
}
_DPI = 150


def draw_accuracy(stem: Path, tallies: Mapping[str, Tally], title: str) -> list[Path]:
    """Draw ROC, precision-recall and reliability curves as SVG and PNG.

    Parameters
    ----------
    stem
        Where the figures are to stand, without an ending.
    tallies
        By way of calling.
    title
        What the sequence is.

    Returns
    -------
    list of Path
        The files.
    """
    pyplot = _pyplot()
    with pyplot.rc_context(_STYLE):
        figure, (roc, recall, calibration) = pyplot.subplots(1, 3, figsize=(10, 3.4))
        for way, tally in tallies.items():
            look = {"color": _COLOURS[way], "label": _NAMES[way], "linewidth": 1.5}
            wrong, right, precise = tally.roc()
            roc.plot(wrong, right, **look)
            recall.plot(right, precise, **look)
            curve = tally.curve()
            calibration.plot(curve.said, curve.seen, marker="o", markersize=3, **look)
        calibration.plot([0, 1], [0, 1], color="#999999", linewidth=0.8, linestyle=":")
        for axes, across, up, name in (
            (roc, "false-positive rate", "sensitivity", "ROC"),
            (recall, "sensitivity", "precision", "Precision and recall"),
            (calibration, "probability said", "share seen true", "Reliability"),
        ):
            axes.set(xlabel=across, ylabel=up, title=name, xlim=(-0.02, 1.02), ylim=(-0.02, 1.02))
        roc.legend(frameon=False, loc="lower right")
        figure.suptitle(title)
        return _saved(pyplot, figure, stem)


def draw_heldout(stem: Path, rows: Sequence[tuple[int, int, Interval]]) -> list[Path]:
    """Draw bits per held-out base by order as SVG and PNG.

    Parameters
    ----------
    stem
        Where the figures are to stand, without an ending.
    rows
        States, order and bits per base of each model.

    Returns
    -------
    list of Path
        The files.
    """
    pyplot = _pyplot()
    with pyplot.rc_context(_STYLE):
        figure, axes = pyplot.subplots(figsize=(5.5, 3.6))
        for name, way, shift in (("chain", "chain", -0.06), ("HMM", "hmm", 0.06)):
            chosen = [row for row in rows if (row[0] > 1) == (way == "hmm")]
            orders = np.array([order for _, order, _ in chosen]) + shift
            values = np.array([bits for _, _, bits in chosen])
            errors = np.abs(values[:, 1:].T - values[:, 0])
            label = name if way == "chain" else f"HMM of {chosen[0][0]} states"
            axes.errorbar(
                orders, values[:, 0], errors, color=_COLOURS[way], label=label, marker="o",
                markersize=4, linewidth=1.2, capsize=2,
            )  # fmt: skip
        axes.set(xlabel="order", ylabel="bits per held-out base", title="Less is better")
        axes.set_xticks(range(max(order for _, order, _ in rows) + 1))
        axes.legend(frameon=False)
        return _saved(pyplot, figure, stem)


def _pyplot() -> Any:
    import matplotlib  # noqa: PLC0415 - start-up time

    matplotlib.use("Agg")
    from matplotlib import pyplot  # noqa: PLC0415

    return pyplot


def _saved(pyplot: Any, figure: Any, stem: Path) -> list[Path]:
    """Save without dates and versions."""
    paths = [stem.with_name(f"{stem.name}.svg"), stem.with_name(f"{stem.name}.png")]
    figure.savefig(paths[0], metadata={"Date": None, "Creator": None})
    figure.savefig(paths[1], dpi=_DPI, metadata={"Software": None})
    pyplot.close(figure)
    return paths
