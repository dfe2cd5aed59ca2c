"""Telomere-like repeats at the ends of linear records.

No list of known motifs is used: any short unit in tandem at an end is reported, so that the
motif of an unstudied clade shows as well. A simple repeat that happens to lie at a scaffold's
end is reported too; a telomere shows by one unit at many ends.
"""

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from hmmseg.sequence.alphabet import MISSING, decode

__all__ = [
    "TERMINAL",
    "UNIT_LENGTHS",
    "TandemRepeat",
    "canonical_unit",
    "end_repeats",
    "tandem_repeat",
]

Bases = npt.NDArray[np.uint8]

TERMINAL = 300
"""Bases of an end that are searched."""
UNIT_LENGTHS = (5, 6, 7, 8)

_MISMATCH = -3
_MIN_SCORE = 30


class TandemRepeat(NamedTuple):
    """A tandem repeat."""

    unit: str
    """Its canonical unit, see `canonical_unit`."""
    copies: float
    """Its length over the unit's."""


def canonical_unit(unit: str) -> str:
    """Return the alphabetically first of all rotations of a unit and of its other strand.

    ``TTAGGG``, ``GGTTAG`` and ``CCCTAA`` all give ``AACCCT``.
    """
    complement = unit.translate(str.maketrans("ACGT", "TGCA"))[::-1]
    return min(text[i:] + text[:i] for text in (unit, complement) for i in range(len(unit)))


def tandem_repeat(bases: Bases) -> TandemRepeat | None:
    """Find the best tandem repeat in a stretch, mostly the `TERMINAL` bases of an end.

    For each unit length p each base is compared to the one p further on: 1 for a match, -3 for
    a mismatch or a missing base. The stretch of comparisons with the largest sum is the repeat
    of that length; the unit is the most frequent base at each of its p places. Units that are
    repeats of a shorter one (single letters, two, three or four) are not reported, nor are
    sums below 30, which for a unit of six means six perfect copies. Of several unit lengths
    the one of largest sum is taken, then the shortest.

    Parameters
    ----------
    bases : uint8[position]

    Returns
    -------
    TandemRepeat or None
    """
    best: TandemRepeat | None = None
    best_score = _MIN_SCORE - 1
    for length in UNIT_LENGTHS:
        score, start, end = _best_stretch(bases, length)
        if score <= best_score:
            continue
        unit = _consensus(bases[start:end], length)
        if not _is_repeat(unit):
            best = TandemRepeat(canonical_unit(unit), (end - start) / length)
            best_score = score
    return best


def _best_stretch(bases: Bases, length: int) -> tuple[int, int, int]:
    """Score, start and end of the stretch that repeats best with a unit of ``length``."""
    if len(bases) <= length:
        return 0, 0, 0
    same = (bases[:-length] == bases[length:]) & (bases[length:] != MISSING)
    sums = np.concatenate(([0], np.cumsum(np.where(same, 1, _MISMATCH))))
    gain = sums - np.minimum.accumulate(sums)
    last = int(gain.argmax())
    score = int(gain[last])
    first = int(np.flatnonzero(sums[: last + 1] == sums[last] - score)[-1])
    return score, first, last + length


def _consensus(bases: Bases, length: int) -> str:
    """Most frequent base at each place of the unit; the alphabetically first of equals."""
    counts = [np.bincount(bases[place::length], minlength=5)[:4] for place in range(length)]
    return decode(np.array([count.argmax() for count in counts], dtype=np.uint8))


def _is_repeat(unit: str) -> bool:
    """Whether a unit is itself a shorter one repeated."""
    return unit in (unit + unit)[1:-1]


def end_repeats(bases: Bases) -> tuple[TandemRepeat | None, TandemRepeat | None]:
    """Find the tandem repeats at the start and at the end of a linear record."""
    return tandem_repeat(bases[:TERMINAL]), tandem_repeat(bases[-TERMINAL:])
