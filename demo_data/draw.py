"""Draw a stretch of the demo as SVG: ``python demo_data/draw.py results/demo/calls``.

Writes ``picture.svg`` beside this file: posteriors of both reported states along one scaffold, the
regions that were called, and the truth.
"""

import sys
from pathlib import Path

import numpy as np

from hmmseg.tracks.bigwig import read_track

__all__ = ["draw", "main"]

HERE = Path(__file__).resolve().parent
RECORD, START, END = "scaffold_02", 0, 126_500
WIDTH, LEFT, RIGHT, CURVE, ROW = 880, 124, 12, 54, 20
COLOURS = {"island": "#b3541e", "domain": "#23618e", "insert": "#777777"}
BINS = 380


def across(position: float) -> float:
    """Horizontal place of a position of the record."""
    return LEFT + (position - START) / (END - START) * (WIDTH - LEFT - RIGHT)


def text(x: float, y: float, words: str, anchor: str = "end") -> str:
    """Words at a place."""
    return f'<text x="{x:.1f}" y="{y:.1f}" text-anchor="{anchor}">{words}</text>'


def bars(path: Path, y: float) -> list[str]:
    """Intervals of a BED file, each in the colour of its name."""
    found = []
    for line in path.read_text(encoding="ascii").splitlines():
        record, start, end, name = line.split("\t")[:4]
        if record == RECORD:
            x, width = across(int(start)), across(int(end)) - across(int(start))
            colour = COLOURS[name.rsplit("_", 1)[0]]
            found.append(
                f'<rect x="{x:.1f}" y="{y}" width="{max(width, 1.5):.1f}" height="11" '
                f'fill="{colour}"/>'
            )
    return found


def curve(path: Path, y: float, colour: str) -> list[str]:
    """Highest posterior in each bin, as filled columns; nothing in gaps."""
    values = np.zeros(END - START)
    for record, starts, ends, levels in read_track(path):
        if record == RECORD:
            for start, end, level in zip(starts, ends, levels, strict=True):
                values[max(start - START, 0) : max(end - START, 0)] = level
    edges = np.linspace(0, len(values), BINS + 1).astype(int)
    heights = np.maximum.reduceat(values, edges[:-1])
    columns = []
    for left, right, height in zip(edges[:-1], edges[1:], heights, strict=True):
        if height:
            x, tall = across(START + left), height * CURVE
            width = across(START + right) - x
            columns.append(f"M{x:.1f} {y + CURVE:.1f}v{-tall:.1f}h{width:.1f}v{tall:.1f}z")
    line = f'<path d="M{LEFT} {y + CURVE}H{WIDTH - RIGHT}" stroke="#bbbbbb"/>'
    return [line, f'<path d="{"".join(columns)}" fill="{colour}"/>']


def draw(calls: Path) -> str:
    """Return the picture of a folder of calls as SVG.

    Parameters
    ----------
    calls
        Folder made by ``hmmseg decode``, or by the workflow, for the demo assembly.
    """
    parts, y = [], 30.0
    for state in ("island", "domain"):
        parts.append(text(LEFT - 8, y + CURVE / 2, f"{state}, posterior"))
        parts += curve(calls / f"{state}.posterior.bw", y, COLOURS[state])
        y += CURVE + 12
    for label, path in (("called", calls / "regions.bed"), ("truth", HERE / "truth.bed")):
        parts += [text(LEFT - 8, y + 10, label), *bars(path, y)]
        y += ROW
    for position in range(START, END, 20_000):
        parts.append(text(across(position), y + 16, f"{position:,}", "middle"))
    parts.append(text(LEFT, 18, f"{RECORD} of the invented demo assembly", "start"))
    head = (
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{WIDTH}" height="{y + 26:.0f}" '
        'font-family="sans-serif" font-size="12" fill="#222222">\n'
        '<rect width="100%" height="100%" fill="#ffffff"/>\n'
    )
    return head + "\n".join(parts) + "\n</svg>\n"


def main(arguments: list[str]) -> None:
    """Draw the folder of calls that the one argument names."""
    (HERE / "picture.svg").write_text(draw(Path(arguments[0])), encoding="ascii", newline="\n")


if __name__ == "__main__":
    main(sys.argv[1:])
