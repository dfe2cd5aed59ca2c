"""The colours of reports, told apart by people with any kind of colour vision."""

__all__ = ["GREY", "INK", "LIGHT", "STATES", "colour_of"]

INK = "#1c2530"
GREY = "#8a929c"
LIGHT = "#e4e7eb"

STATES = (
    "#1f5f8b",
    "#d98324",
    "#5cc4c4",
    "#4c361f",
    "#b060d0",
    "#bfcc99",
    "#8c7b69",
    "#8c5823",
)
"""One for each state. Neighbours differ in lightness, too, so that they survive a grey print."""


def colour_of(number: int) -> str:
    """Return the colour of a reported state by its place."""
    return STATES[number % len(STATES)]
