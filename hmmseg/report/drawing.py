"""Figures as SVG and PNG, with the same bytes each time."""

import io
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from functools import lru_cache, wraps
from pathlib import Path
from typing import Any

from hmmseg.report.colours import GREY, INK, STATES

__all__ = [
    "NARROW",
    "WIDE",
    "blank",
    "in_style",
    "legend",
    "logarithmic",
    "save",
    "svg_of",
]

NARROW = (4.6, 3.1)
"""Inches; two stand side by side on a page."""
WIDE = (9.4, 3.4)
_DPI = 200

_STYLE: dict[str, Any] = {
    "svg.hashsalt": "hmmseg",
    "svg.fonttype": "none",
    "font.family": "DejaVu Sans",
    "font.size": 8.5,
    "text.color": INK,
    "text.parse_math": False,
    "axes.edgecolor": GREY,
    "axes.labelcolor": INK,
    "axes.titlesize": 9,
    "axes.titlelocation": "left",
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.formatter.useoffset": False,
    "axes.linewidth": 0.8,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.direction": "out",
    "lines.linewidth": 1.6,
    "legend.frameon": False,
    "legend.fontsize": 8,
    "figure.constrained_layout.use": True,
}

_FONT = "'DejaVu Sans'"
_FONTS = "'DejaVu Sans', Verdana, sans-serif"
"""Letters are text in the file; a reader without the first font takes the next."""


def in_style(draw: Callable[..., Any]) -> Callable[..., Any]:
    """Make a function draw in the style of reports, whatever the user's own is."""

    @wraps(draw)
    def styled(*arguments: Any, **named: Any) -> Any:
        with _styled():
            return draw(*arguments, **named)

    return styled


@contextmanager
def _styled() -> Iterator[None]:
    import matplotlib as mpl  # noqa: PLC0415 - start-up time
    from cycler import cycler  # noqa: PLC0415

    style: Any = {**_STYLE, "axes.prop_cycle": cycler(color=STATES)}
    with mpl.rc_context(), warnings.catch_warnings():
        # Names of records may be in any script: letters are text in the file, and whoever shows
        # it has the fonts.
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        mpl.rcdefaults()
        mpl.rcParams.update(style)
        yield


def blank(size: tuple[float, float] = NARROW, panels: int = 1) -> tuple[Any, Any]:
    """Return a figure and its axes, one or a list.

    Parameters
    ----------
    size
        Width and height in inches.
    panels
        Axes side by side.
    """
    from matplotlib.backends.backend_svg import FigureCanvasSVG  # noqa: PLC0415 - start-up time
    from matplotlib.figure import Figure  # noqa: PLC0415

    figure = Figure(figsize=size)
    FigureCanvasSVG(figure)
    return figure, figure.subplots(1, panels)


def legend(axes: Any) -> None:
    """Name the lines above the axes, where they hide nothing."""
    axes.legend(
        loc="lower left", bbox_to_anchor=(0, 1.01), ncols=3, borderaxespad=0, handlelength=1.4,
        columnspacing=1.4,
    )  # fmt: skip


def logarithmic(axes: Any, which: str) -> None:
    """Give an axis (``x`` or ``y``) a logarithmic scale with plain numbers on it."""
    axes.set(**{f"{which}scale": "log"})
    axis = getattr(axes, f"{which}axis")
    axis.set_major_formatter(lambda value, _: f"{value:,.0f}" if value >= 1 else f"{value:g}")
    axis.set_minor_formatter(lambda value, _: "")


@lru_cache(maxsize=1)
def svg_of(drawing: Any) -> bytes:
    """Return the SVG of a figure, or the bytes of one that was drawn before.

    The one drawn last is kept: a page asks for its width and then for all of it.
    """
    if isinstance(drawing, bytes):
        return drawing
    stream = io.StringIO()
    with _styled():
        drawing.savefig(stream, format="svg", metadata={"Date": None, "Creator": None})
    return stream.getvalue().replace(_FONT, _FONTS).encode("utf-8")


def save(drawing: Any, stem: Path) -> list[Path]:
    """Write a figure as SVG and, if it was drawn here, as PNG; return the files.

    Parameters
    ----------
    drawing
        A figure, or the bytes of an SVG.
    stem
        The files, without an ending.
    """
    paths = [stem.with_name(f"{stem.name}.svg")]
    paths[0].write_bytes(svg_of(drawing))
    if not isinstance(drawing, bytes):
        paths.append(stem.with_name(f"{stem.name}.png"))
        with _styled():
            drawing.savefig(paths[1], format="png", dpi=_DPI, metadata={"Software": None})
    return paths
