"""Does one model fit the whole assembly? Record by record, by surprise and by composition.

A model takes the sequence for the same kind of thing from end to end. Two statistics look for
records that are another kind:

- *surprise*: the sum over bases of -ln p - H, p the probability of a base given all before it
  and H the entropy of what could have stood there, over the root of its summed variances. It is
  a sum of martingale differences, so nearly normal where the model is true.
- *composition*: how far shares of states, and of words given those, are from the assembly's, in
  units of how far blocks drawn from the model are from theirs (a parametric bootstrap).

Real genomes vary more than any model says. How much more, their own blocks tell, so both are
scaled by that, and a record is named only if it differs by much, too.
"""

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass, fields, replace
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.evidence.stretches import BLOCK, LEVELS, Ladder, Words, stretches_of
from hmmseg.evidence.tails import beyond, holm, normal_tail
from hmmseg.evidence.typical import Seen, Typical, chi_square_of_shares
from hmmseg.kernels.elementary import log_array
from hmmseg.model import Model
from hmmseg.sequence.composition import JUDGED_LENGTH
from hmmseg.sequence.contigs import Contig

__all__ = [
    "DIFFERS",
    "FITS",
    "LARGE",
    "TOO_SHORT",
    "Homogeneity",
    "Judge",
    "RecordFit",
    "statement",
    "table",
]

FITS, DIFFERS, TOO_SHORT = "fits", "differs", "too short"

LARGE = 0.1
"""Effects from here on are large: as much as some five points of GC make."""

_LEVEL = 0.05
_FEWEST_BLOCKS = 8
_MOSTLY_KNOWN = 0.8
_MEDIAN_SQUARE = 0.4549364231195736
"""Median of the square of a standard normal variable."""

_MOST_NAMED = 5
_MUCH = 2.0
_MOST_WORDS, _TELLING = 3, 1.05


@dataclass(frozen=True)
class RecordFit:
    """How one record fits.

    Attributes
    ----------
    record : str
        Its name.
    bases : int
        Known bases.
    gc, gc_rest : float
        GC fraction, and that of all other records; NaN without known bases.
    share : float
        Of the assembly's known bases.
    surprise_z : float
        Scaled by the assembly's own dispersion; NaN where not judged, like the next three.
    composition_p : float
        Chance of such a distance, scaled likewise.
    adjusted_p : float
        The smaller of both chances, adjusted for both and for all records (Holm).
    effect : float
        Root of chi-square over the number of words, less what chance adds, and per base of a
        word (Cohen 1988, Statistical Power Analysis for the Behavioral Sciences, chapter 7).
    verdict : str
        ``fits``, ``differs`` or ``too short``.
    words : str
        The words that tell most for the record against the assembly, and how many times as
        frequent they are in it.
    """

    record: str
    bases: int
    gc: float
    gc_rest: float
    share: float
    surprise_z: float = math.nan
    composition_p: float = math.nan
    adjusted_p: float = math.nan
    effect: float = math.nan
    verdict: str = TOO_SHORT
    words: str = ""


_COLUMNS = [column.name for column in fields(RecordFit)]


@dataclass(frozen=True)
class Homogeneity:
    """How the records of an assembly fit one model.

    Attributes
    ----------
    records : tuple of RecordFit
        By effect, the largest first; those too short to judge last.
    block : int
        Length of the longest blocks of which there are enough, in positions; 0 without any.
    surprise_dispersion, composition_dispersion : float
        How many times as much these blocks vary as the model says, at least 1.
    """

    records: tuple[RecordFit, ...]
    block: int
    surprise_dispersion: float
    composition_dispersion: float


class Judge:
    """Takes in an assembly record by record; judges at the end.

    Parameters
    ----------
    model
        The model.
    typical
        What blocks drawn from it are like.
    total
        int64[class]: the words of the whole assembly.
    threads
        Threads to use; the result does not depend on it.
    """

    def __init__(
        self,
        model: Model,
        typical: Sequence[Typical],
        total: NDArray[np.int64],
        threads: int = 1,
    ) -> None:
        self._model, self._typical, self._threads = model, typical, threads
        self._words = Words.of(model)
        self._centre = total / max(int(total.sum()), 1)
        self._blocks: list[list[Seen]] = [[] for _ in range(LEVELS)]
        self._records: list[_Record] = []
        self._states = np.zeros(model.states)

    def add(self, name: str, contigs: Sequence[Contig]) -> None:
        """Take in a record.

        Raises
        ------
        SequenceError
            It is impossible under the model.
        """
        ladder, whole = Ladder(), None
        for filled, block in stretches_of(self._model, self._words, contigs, self._threads):
            whole = block.plus(whole)
            if filled == BLOCK:
                for level, sums in ladder.climb(block):
                    if sums.known >= _MOSTLY_KNOWN * (BLOCK << level):
                        self._blocks[level].append(self._typical[level].seen(sums, self._centre))
        counts = np.zeros(5, np.int64)
        for contig in contigs:
            counts += np.bincount(contig.bases, minlength=5)
        seen: tuple[Seen, ...] = ()
        square, telling = math.nan, ""
        if whole is not None and whole.known >= JUDGED_LENGTH:
            seen = tuple(typical.seen(whole, self._centre) for typical in self._typical)
            square = chi_square_of_shares(whole.word_shares, self._centre)
            telling = self._telling(whole.word_shares)
        known, strong = int(counts[:4].sum()), int(counts[1] + counts[2])
        self._records.append(_Record(name, known, strong, seen, square, telling))
        if whole is not None:
            self._states += whole.states

    def _telling(self, shares: NDArray[np.float64]) -> str:
        used = (shares > 0) & (self._centre > 0)
        ratio = np.where(used, shares, 1.0) / np.where(used, self._centre, 1.0)
        weight = np.where(used, shares, 0.0) * log_array(ratio)
        most = np.argsort(-weight, kind="stable")[:_MOST_WORDS]
        return ", ".join(
            f"{self._words.name(int(at))} x{ratio[at]:.2f}" for at in most if ratio[at] >= _TELLING
        )

    def judgement(self) -> Homogeneity:
        """Return how the records taken in so far fit."""
        scales = self._scales()
        judged = [one for one in self._records if one.seen]
        raw = [scales.of(one, self._typical) for one in judged]
        adjusted = holm([chance for z, p in raw for chance in (normal_tail(abs(z)), p)])
        known = sum(one.known for one in self._records)
        strong = sum(one.strong for one in self._records)
        found = [_described_by(one, known, strong) for one in self._records if not one.seen]
        for row, (one, (z, p)) in enumerate(zip(judged, raw, strict=True)):
            lowest, effect = (
                min(adjusted[2 * row : 2 * row + 2]),
                self._effect(one, one.known / known),
            )
            verdict = DIFFERS if lowest <= _LEVEL and effect >= LARGE else FITS
            found.append(
                replace(
                    _described_by(one, known, strong),
                    surprise_z=z,
                    composition_p=p,
                    adjusted_p=lowest,
                    effect=effect,
                    verdict=verdict,
                )
            )
        found.sort(key=lambda one: (one.verdict == TOO_SHORT, -_or_zero(one.effect)))
        return Homogeneity(tuple(found), *scales.longest())

    def _effect(self, record: "_Record", share: float) -> float:
        """Return the effect without what chance adds, which shrinks with length.

        Words are taken from those of the whole assembly, of which the record is a part. Unless it
        is the larger one, it is the rest that it is to be compared with.
        """
        level = _level_of(record.known)
        noise = self._typical[level].noise * min((BLOCK << level) / record.known, 1.0)
        rest = 1 - share if share < 0.5 else 1.0
        return math.sqrt(max(record.square - noise, 0.0) / self._words.length) / rest

    def _scales(self) -> "_Scales":
        """Return by how much blocks of the assembly vary more than blocks drawn."""
        enough, surprise, composition = [], [], []
        states = self._states / max(sum(one.known for one in self._records), 1)
        for blocks, typical in zip(self._blocks, self._typical, strict=True):
            enough.append(len(blocks) >= _FEWEST_BLOCKS)
            squares, distances, usual = _MEDIAN_SQUARE, 1.0, 1.0
            if enough[-1]:
                squares = float(np.median([seen.z * seen.z for seen in blocks]))
                distances = float(np.median([typical.distance(seen, states) for seen in blocks]))
                usual = float(np.median(typical.distances))
            surprise.append(max(squares / _MEDIAN_SQUARE, 1.0))
            composition.append(max(distances / usual, 1.0))
        return _Scales(states, tuple(enough), tuple(surprise), tuple(composition))


def _or_zero(value: float) -> float:
    return 0.0 if math.isnan(value) else value


class _Record(NamedTuple):
    """What is kept of a record; ``seen`` has an entry for each level if it can be judged."""

    name: str
    known: int
    strong: int
    seen: tuple[Seen, ...]
    square: float
    words: str


def _described_by(one: _Record, known: int, strong: int) -> RecordFit:
    """Return a record with its composition beside that of all known bases, not judged yet."""
    return RecordFit(
        one.name,
        one.known,
        one.strong / one.known if one.known else math.nan,
        (strong - one.strong) / (known - one.known) if known > one.known else math.nan,
        one.known / max(known, 1),
        words=one.words,
    )


class _Scales(NamedTuple):
    """The assembly's own dispersion at each level, of which ``enough`` tells if it is known."""

    states: NDArray[np.float64]
    enough: tuple[bool, ...]
    surprise: tuple[float, ...]
    composition: tuple[float, ...]

    def of(self, record: _Record, typical: Sequence[Typical]) -> tuple[float, float]:
        """Return the scaled surprise of a record, and the chance of its composition.

        A record longer than the longest blocks is taken for one of these: its own composition
        is a mean over many, so that is to be on the safe side.
        """
        level = _level_of(record.known)
        while level and not self.enough[level]:
            level -= 1
        times = max(record.known / (BLOCK << level), 1.0)
        z = record.seen[level].z / math.sqrt(1 + (self.surprise[level] - 1) * times)
        distance = typical[level].distance(record.seen[level], self.states)
        return z, beyond(typical[level].distances, distance / self.composition[level])

    def longest(self) -> tuple[int, float, float]:
        """Return length and dispersions of the longest blocks of which there are enough."""
        known = [level for level in range(LEVELS) if self.enough[level]]
        if not known:
            return 0, math.nan, math.nan
        return BLOCK << known[-1], self.surprise[known[-1]], self.composition[known[-1]]


def _level_of(known: int) -> int:
    """Return the level of the longest blocks that are not longer than a record."""
    return max(level for level in range(LEVELS) if level == 0 or BLOCK << level <= known)


def table(found: Homogeneity) -> pd.DataFrame:
    """Return one row for each record."""
    return pd.DataFrame([asdict(one) for one in found.records], columns=_COLUMNS)


def statement(found: Homogeneity) -> str:
    """Return in words which records differ, and how much the assembly varies."""
    judged = [one for one in found.records if one.verdict != TOO_SHORT]
    short = len(found.records) - len(judged)
    named = [one for one in judged if one.verdict == DIFFERS]
    lines = []
    if not judged:
        lines.append(f"No record is long enough to judge ({JUDGED_LENGTH:,} known bases).")
    elif len(judged) == 1:
        lines.append(
            "Only one record is long enough to judge, so there is none to compare it with."
        )
    elif not named:
        lines.append(f"None of {len(judged)} records judged differs from the others by much.")
    else:
        which = "; ".join(_described(one) for one in named[:_MOST_NAMED])
        more = f"; and {len(named) - _MOST_NAMED} more" if len(named) > _MOST_NAMED else ""
        verb = "differs" if len(named) == 1 else "differ"
        lines.append(
            f"{len(named)} of {len(judged)} records judged {verb} from the others: {which}{more}."
        )
    if short and judged:
        lines.append(f"{short} {'is' if short == 1 else 'are'} too short to judge.")
    if found.block and found.composition_dispersion >= _MUCH:
        lines.append(
            f"Blocks of {found.block // 1000} kb vary {found.composition_dispersion:.2g} times as "
            "much in composition as the model says (variance), so one model fits the assembly "
            "only roughly."
        )
    return " ".join(lines)


def _described(one: RecordFit) -> str:
    return (
        f"{one.record} (GC {100 * one.gc:.1f} % against {100 * one.gc_rest:.1f} %, "
        f"{100 * one.share:.2g} % of the assembly, effect {one.effect:.2f})"
    )
