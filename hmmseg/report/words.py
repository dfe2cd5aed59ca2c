"""Numbers as one says them."""

from collections.abc import Sequence
from math import isfinite
from typing import Any

from hmmseg.evidence.findings import in_bases

__all__ = [
    "NOT_KNOWN",
    "called",
    "count",
    "decimals",
    "in_bases",
    "listed",
    "percent",
    "plural",
    "small",
]

NOT_KNOWN = "NA"


def count(number: float) -> str:
    """Return a whole number with commas between thousands."""
    return f"{int(number + 0.5):,}"


def percent(share: float | None) -> str:
    """Return a share in per cent: two digits that count, at least one decimal."""
    if share is None or not isfinite(share):
        return NOT_KNOWN
    value = 100 * share
    if value and abs(value) < 0.95:
        return f"{value:.2g} %"
    return f"{value:.1f} %"


def plural(number: int, noun: str) -> str:
    """Return a count with its noun."""
    return f"{count(number)} {noun}{'' if number == 1 else 's'}"


def decimals(number: Any, places: int) -> str:
    """Return a number with so many decimals; what is not known as ``NA``."""
    if number is None or not isfinite(number):
        return NOT_KNOWN
    return f"{number:.{places}f}"


def small(number: Any) -> str:
    """Return a number that may be very small, with three digits that count."""
    if number is None or not isfinite(number):
        return NOT_KNOWN
    return f"{number:.3g}"


def listed(words: Sequence[str]) -> str:
    """Return words as a list in a sentence."""
    if len(words) < 2:
        return "".join(words)
    return f"{', '.join(words[:-1])} and {words[-1]}"


def called(name: str, longest: int = 60) -> str:
    """Return a name, cut in its middle if it is too long for a sentence."""
    if len(name) <= longest:
        return name
    return f"{name[: longest // 2]}…{name[-(longest // 2 - 1) :]}"
