"""The colours of reports, told apart by people with any kind of colour vision."""

__all__ = ["GREY", "INK", "LIGHT", "STATES", "colour_of"]

INK = "#1c2530"
GREY = "#8a929c"
LIGHT = "#e4e7eb"

STATES = (
    "#1f5f8b",
    "#d98324",
    "#7a3e78",
    "#37a39a",
    "#b5433c",
    "#e2c044",
    "#4d5866",
    "#8db8dd",
)
"""One for each state. Neighbours differ in lightness, too, so that they survive a grey print."""


def colour_of(number: int) -> str:
    """Return the colour of a reported state by its place."""
    return STATES[number % len(STATES)]
