"""What each region is made of: bases and dinucleotides, counted, and measures of them.

Everything is counted first, in integers, and every measure follows from the counts. So the
measures that need the whole genome can be had from the counts of its parts.

Missing bases are in no count, nor is a dinucleotide that holds one. Soft-masked bases count like
any others, whatever the model saw.

References
----------
.. [1] Gardiner-Garden M, Frommer M (1987). CpG islands in vertebrate genomes. J. Mol. Biol.
   196:261-282.
.. [2] Karlin S, Burge C (1995). Dinucleotide relative abundance extremes: a genomic signature.
   Trends Genet. 11:283-290.
"""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.kernels.elementary import LN2, log_array
from hmmseg.kernels.pairs import count_pairs
from hmmseg.sequence.alphabet import MISSING, SYMBOLS
from hmmseg.sequence.reading import Record

__all__ = ["MEASURES", "WORDS", "Counts", "counts_of_record", "counts_together", "measures"]

WORDS = (*SYMBOLS, *(x + y for x in SYMBOLS for y in SYMBOLS))
"""The four bases and the sixteen dinucleotides."""

MEASURES = (
    "gc",
    "cpg_ratio",
    "gc_skew",
    "at_skew",
    "dinucleotide_entropy",
    "dinucleotide_distance",
)
"""Names of the columns."""

_AT_ONCE = 1 << 14


class Counts(NamedTuple):
    """How often bases and dinucleotides occur.

    Attributes
    ----------
    genome : int64[word]
        In all records; words as in `WORDS`.
    regions : int64[region, word]
        Inside each region.
    """

    genome: NDArray[np.int64]
    regions: NDArray[np.int64]


def counts_of_record(record: Record, starts: NDArray[np.int64], ends: NDArray[np.int64]) -> Counts:
    """Count one record and its regions.

    Parameters
    ----------
    record
        The record; of a circular one the last base is followed by the first.
    starts, ends
        int64[region]. An end may lie beyond the end of a circular record.
    """
    length = len(record)
    starts, ends = np.append(starts, 0), np.append(ends, length)
    pairs = np.empty((len(starts), 25), np.int64)
    count_pairs(record.bases, starts, ends, pairs)
    table = pairs.reshape(-1, 5, 5)
    words = np.concatenate(
        (table[:, :4].sum(axis=2), table[:, :4, :4].reshape(-1, 16)), axis=1, dtype=np.int64
    )
    if record.circular:
        last, first = int(record.bases[-1]), int(record.bases[0])
        if max(last, first) < MISSING:
            words[-1, 4 + 4 * last + first] += 1
    return Counts(words[-1], words[:-1])


def counts_together(parts: Sequence[Counts]) -> Counts:
    """Return the counts of several parts of a genome as those of one, regions in their order."""
    regions = np.concatenate([np.empty((0, len(WORDS)), np.int64), *(p.regions for p in parts)])
    genome = np.zeros(len(WORDS), np.int64)
    for part in parts:
        genome += part.genome
    return Counts(genome, regions)


def measures(counts: Counts) -> pd.DataFrame:
    """Return what the counts say about each region, as columns of float64.

    Parameters
    ----------
    counts
        Of bases and dinucleotides.

    Returns
    -------
    DataFrame
        The columns `MEASURES`; NaN where a base that is needed does not occur.

        - ``gc``: share of C and G;
        - ``cpg_ratio``: CpG observed over expected, CpG x bases / (C x G) [1]_;
        - ``gc_skew``, ``at_skew``: (G - C) / (G + C), (A - T) / (A + T);
        - ``dinucleotide_entropy``: Shannon entropy of the dinucleotides in bits, 4 at most;
        - ``dinucleotide_distance``: mean absolute difference from the genome of the 16 relative
          abundances of dinucleotides, both strands together (delta* of [2]_).
    """
    # Some regions at a time: what is on the way takes several times the counts' memory.
    pieces = range(0, max(len(counts.regions), 1), _AT_ONCE)
    parts = [_measured(counts.regions[at : at + _AT_ONCE], counts.genome) for at in pieces]
    columns = (np.concatenate(column) for column in zip(*parts, strict=True))
    return pd.DataFrame(dict(zip(MEASURES, columns, strict=True)))


def _measured(
    words: NDArray[np.int64], genome: NDArray[np.int64]
) -> tuple[NDArray[np.float64], ...]:
    """Return the measures of regions (int64[region, word]), each float64[region]."""
    a, c, g, t = words[:, :4].T.astype(np.float64)
    cg = words[:, WORDS.index("CG")].astype(np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        return (
            (c + g) / (a + c + g + t),
            np.where(c * g > 0, cg * (a + c + g + t) / (c * g), np.nan),
            (g - c) / (g + c),
            (a - t) / (a + t),
            _entropy(words[:, 4:]),
            _distance(_abundances(words), _abundances(genome[None, :])),
        )


def _entropy(pairs: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return float64[region] Shannon entropies of counts (int64[region, pair]), in bits."""
    numbers = pairs.astype(np.float64)
    total = numbers.sum(axis=1)
    logs = log_array(np.maximum(numbers, 1.0).ravel()).reshape(numbers.shape)
    # One column after the other: sums in one order, whatever the processor.
    weighed = np.zeros(len(pairs))
    for column in range(pairs.shape[1]):
        weighed += numbers[:, column] * logs[:, column]
    # A single dinucleotide has no entropy, and no rounding below it.
    return np.maximum((log_array(total) - weighed / total) / LN2, 0.0)


def _abundances(words: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return float64[region, pair]: f(xy) / (f(x) f(y)) over both strands; NaN if undefined."""
    bases = words[:, :4] + words[:, 3::-1]
    pairs = words[:, 4:].reshape(-1, 4, 4)
    pairs = pairs + pairs.transpose(0, 2, 1)[:, ::-1, ::-1]
    single = bases / bases.sum(axis=1, keepdims=True)
    double = pairs.reshape(-1, 16) / pairs.sum(axis=(1, 2))[:, None]
    expected = (single[:, :, None] * single[:, None, :]).reshape(-1, 16)
    return np.where(expected > 0, double / expected, np.nan)


def _distance(one: NDArray[np.float64], other: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return float64[region]: the mean absolute difference over the pairs."""
    apart = np.abs(one - other)
    total = np.zeros(len(apart))
    for column in range(apart.shape[1]):
        total += apart[:, column]
    return total / apart.shape[1]
