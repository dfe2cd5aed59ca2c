"""Figures that compare assemblies."""

from collections.abc import Mapping, Sequence
from math import isfinite
from typing import Any

from hmmseg.report.colours import colour_of
from hmmseg.report.drawing import WIDE, blank, in_style, legend, logarithmic

__all__ = ["draw_composition", "draw_shares"]

_MARKS = "osD^vPX*"
_LONGEST_NAME = 30


@in_style
def draw_shares(
    names: Sequence[str], states: Sequence[str], shares: Mapping[tuple[str, str], float]
) -> Any:
    """Draw the share of each assembly in each state as bars.

    Parameters
    ----------
    names
        Of the assemblies.
    states
        Reported states.
    shares
        By assembly and state.
    """
    thick = 0.8 / len(states)
    figure, axes = blank((WIDE[0], 1.1 + 0.24 * len(names) * max(1, 0.6 * len(states))))
    for number, state in enumerate(states):
        at = [k + (number - (len(states) - 1) / 2) * thick for k in range(len(names))]
        width = [100 * shares.get((name, state), 0.0) for name in names]
        axes.barh(at, width, height=0.9 * thick, color=colour_of(number), label=state)
    axes.set_yticks(range(len(names)), [_short(name) for name in names])
    axes.invert_yaxis()
    axes.tick_params(axis="y", length=0)
    axes.set_xlabel("share in regions (%)")
    legend(axes)
    return figure


@in_style
def draw_composition(points: Sequence[tuple[str, str, float, float]]) -> Any:
    """Draw mean length against G+C of all states.

    Parameters
    ----------
    points
        Assembly, state, G+C and mean length of each.
    """
    figure, axes = blank()
    states = list(dict.fromkeys(state for _, state, _, _ in points))
    for number, state in enumerate(states):
        own = [(gc, length) for _, s, gc, length in points if s == state and isfinite(length)]
        axes.scatter(
            [gc for gc, _ in own], [length for _, length in own], color=colour_of(number),
            marker=_MARKS[number % len(_MARKS)], s=26, label=state,
        )  # fmt: skip
    logarithmic(axes, "y")
    axes.set(xlabel="G+C", ylabel="mean length (bases)")
    legend(axes)
    return figure


def _short(name: str) -> str:
    return name if len(name) <= _LONGEST_NAME else f"{name[: _LONGEST_NAME - 1]}…"
