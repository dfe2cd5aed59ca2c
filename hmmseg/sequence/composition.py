"""Composition of records: G+C, CpG, and records that differ from the rest of an assembly.

Everything is a ratio of integer counts, or follows from such ratios by ``+ - x /`` and square
roots, so that it has the same bits on every machine.

References
----------
.. [1] Gardiner-Garden M, Frommer M (1987). CpG islands in vertebrate genomes. J. Mol. Biol.
   196:261-282.
.. [2] Karlin S, Burge C (1995). Dinucleotide relative abundance extremes: a genomic signature.
   Trends Genet. 11:283-290.
.. [3] Wallace DL (1959). Bounds on normal approximations to Student's and the chi-square
   distributions. Ann. Math. Stat. 30:1121-1130.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from statistics import NormalDist

import numpy as np
import numpy.typing as npt

from hmmseg.sequence.alphabet import CHUNK, MISSING, SYMBOLS

__all__ = [
    "FEATURES",
    "JUDGED_LENGTH",
    "JUDGED_RECORDS",
    "Contrast",
    "cpg_ratio",
    "gc_fraction",
    "pair_counts",
    "standing_out",
    "z_threshold",
]

JUDGED_LENGTH = 5_000
"""Known bases a record needs for its composition to be judged."""
JUDGED_RECORDS = 8
"""Records of that length an assembly needs for any to be judged."""

_FALSE_CALLS = 0.05
_MAD_TO_SD = 1.4826
"""Standard deviation over median absolute deviation of a normal distribution."""

_PAIRS = [(x, y) for x in range(4) for y in range(4) if (x, y) <= (3 - y, 3 - x)]
FEATURES = (
    "G+C",
    *(
        SYMBOLS[x] + SYMBOLS[y]
        if (x, y) == (3 - y, 3 - x)
        else f"{SYMBOLS[x]}{SYMBOLS[y]}/{SYMBOLS[3 - y]}{SYMBOLS[3 - x]}"
        for x, y in _PAIRS
    ),
)
"""G+C, and the ten dinucleotides that differ when strands do not matter."""


def pair_counts(bases: npt.NDArray[np.uint8], circular: bool) -> npt.NDArray[np.int64]:
    """Count ordered pairs of neighbours.

    Parameters
    ----------
    bases : uint8[position]
    circular : bool
        Whether the last base is followed by the first. In a linear sequence it is followed by
        a missing base, so that row sums are base counts either way.

    Returns
    -------
    int64[symbol, next symbol]
        5 x 5, missing bases last.
    """
    counts = np.zeros(25, dtype=np.int64)
    for offset in range(0, len(bases), CHUNK):
        piece = bases[offset : offset + CHUNK + 1]
        if offset + CHUNK >= len(bases):
            follower = bases[0] if circular else MISSING
            piece = np.append(piece, np.uint8(follower))
        counts += np.bincount(piece[:-1] * np.uint8(5) + piece[1:], minlength=25)
    return counts.reshape(5, 5)


def gc_fraction(pairs: npt.NDArray[np.int64]) -> float:
    """G+C over known bases from `pair_counts`; NaN if no base is known."""
    singles = pairs.sum(axis=1)
    known = int(singles[:4].sum())
    return int(singles[1] + singles[2]) / known if known else math.nan


def cpg_ratio(pairs: npt.NDArray[np.int64]) -> float:
    """CpG observed over expected [1]_ from `pair_counts`.

    It is the number of CpG times the number of known bases, over the number of C times that of
    G; NaN if there is no C or no G.
    """
    singles = pairs.sum(axis=1)
    known, c, g = int(singles[:4].sum()), int(singles[1]), int(singles[2])
    return int(pairs[1, 2]) * known / (c * g) if c and g else math.nan


@dataclass(frozen=True, eq=False)
class Contrast:
    """How records differ from the assembly's typical record.

    Attributes
    ----------
    z : float64[record]
        Robust z-score of the most deviating feature, with its sign; NaN where not judged.
    feature : list of str
        That feature, of `FEATURES`; empty where not judged.
    judged : int
        Number of records judged.
    threshold : float
        Size of z from which a record stands out; NaN if none is judged.
    """

    z: npt.NDArray[np.float64]
    feature: list[str]
    judged: int
    threshold: float

    @property
    def stands_out(self) -> npt.NDArray[np.bool_]:
        """Which records stand out, bool[record]."""
        return np.asarray(np.abs(self.z) >= self.threshold, dtype=np.bool_)


def z_threshold(records: int) -> float:
    """Size of z from which one of ``records`` records stands out.

    Were all features normally distributed over records, one assembly in about twenty would
    have a false call: the threshold is the quantile of Student's t distribution at 0.05 shared
    out over both tails of all features of all records (Bonferroni). Its degrees of freedom,
    half of ``records - 1``, stand for a scale that is itself estimated, and by a median;
    simulation shows the resulting rate to be between 0.01 and 0.07 for 8 records and more.
    A fixed 3.5, as often used for robust z-scores, would flag something in two of three such
    assemblies or more. The quantile is Wallace's approximation [3]_, to three decimals.
    """
    freedom = (records - 1) / 2
    normal = -NormalDist().inv_cdf(_FALSE_CALLS / (2 * len(FEATURES) * records))
    scaled = normal * (8 * freedom + 3) / (8 * freedom + 1)
    return round(math.sqrt(freedom * math.expm1(scaled * scaled / freedom)), 3)


def standing_out(pairs: Sequence[npt.NDArray[np.int64]]) -> Contrast:
    """Find records whose composition stands out.

    Features are the G+C fraction and the ten strand-symmetric dinucleotide relative abundances
    (observed over expected from the bases) [2]_. Each is compared to its median over records,
    in units of a scale whose square is the sum of two: the squared robust standard deviation
    over records (1.4826 times the median absolute deviation) and the record's own sampling
    variance (binomial for G+C, Poisson for dinucleotides). A record's z is that of its most
    deviating feature, and it stands out if the size of z reaches `z_threshold`.

    Only records of at least `JUDGED_LENGTH` known bases are judged, and only if there are
    `JUDGED_RECORDS` of them: fewer do not tell what is typical.

    Parameters
    ----------
    pairs : sequence of int64[5, 5]
        From `pair_counts`, one per record.
    """
    z = np.full(len(pairs), math.nan)
    feature = [""] * len(pairs)
    judged = [i for i, table in enumerate(pairs) if table[:4].sum() >= JUDGED_LENGTH]
    if len(judged) < JUDGED_RECORDS:
        return Contrast(z, feature, 0, math.nan)
    scores = _z_scores(*_features(np.stack([pairs[i] for i in judged])))
    largest = np.abs(scores).argmax(axis=1)
    for row, i in enumerate(judged):
        z[i] = scores[row, largest[row]]
        feature[i] = FEATURES[largest[row]]
    return Contrast(z, feature, len(judged), z_threshold(len(judged)))


def _features(
    tables: npt.NDArray[np.int64],
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
    """Features and trials of each.

    Parameters
    ----------
    tables : int64[record, 5, 5]

    Returns
    -------
    values : float64[record, feature]
        NaN for a dinucleotide of which a base does not occur.
    trials : float64[record, feature]
        Known bases for G+C, expected count for a dinucleotide.
    """
    singles = tables.sum(axis=2)[:, :4]
    known = singles.sum(axis=1)
    # Both strands together: twice the mean of a base and its complement, all integers.
    bases = singles + singles[:, ::-1]
    pairs = tables[:, :4, :4]
    pairs = pairs + pairs.transpose(0, 2, 1)[:, ::-1, ::-1]
    total = pairs.sum(axis=(1, 2))
    values = [(singles[:, 1] + singles[:, 2]) / known]
    trials = [known.astype(np.float64)]
    for x, y in _PAIRS:
        expected = (bases[:, x] / (2 * known)) * (bases[:, y] / (2 * known)) * (total / 2)
        with np.errstate(invalid="ignore"):
            values.append(np.where(expected > 0, pairs[:, x, y] / 2, math.nan) / expected)
        trials.append(expected)
    return np.column_stack(values), np.column_stack(trials)


def _z_scores(
    values: npt.NDArray[np.float64], trials: npt.NDArray[np.float64]
) -> npt.NDArray[np.float64]:
    """Robust z-scores, float64[record, feature], of `_features`; 0 where a value is undefined."""
    centre = np.array([_median(column) for column in values.T])
    away = values - centre
    spread = _MAD_TO_SD * np.array([_median(column) for column in np.abs(away).T])
    variance = centre.copy()
    variance[0] *= 1 - centre[0]
    with np.errstate(invalid="ignore", divide="ignore"):
        scale = np.sqrt(spread * spread + variance / trials)
        return np.where((scale > 0) & np.isfinite(scale), away / scale, 0.0)


def _median(column: npt.NDArray[np.float64]) -> float:
    """Median of the values that are defined; NaN if none is."""
    defined = column[~np.isnan(column)]
    return float(np.median(defined)) if len(defined) else math.nan
