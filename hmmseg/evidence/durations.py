"""Do the lengths of regions fit? Visits on paths drawn from the posterior, against the model's.

If the model is true, such paths are distributed as its own are. Where the sequence says little
about a region's ends the model's assumption speaks for itself, so a misfit that is found is real,
and one that is not found may still be there.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.evidence.findings import in_bases
from hmmseg.evidence.tails import chi_square_tail
from hmmseg.inference.path import runs_of
from hmmseg.inference.sampling import sample_path
from hmmseg.kernels.elementary import exp, log
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig

__all__ = ["Bin", "Durations", "Sampler", "Verdict", "statement", "survival", "table"]

MOST_BASES = 20_000_000
"""Paths are drawn for so many bases, in pieces taken by chance."""

_PIECE = 1 << 20
_STEPS_PER_OCTAVE = 4
_FEWEST_VISITS = 30
_FEWEST_EXPECTED = 5.0
_LEVEL = 0.01
_MUCH = 0.1
_LIKE = 0.1


class Bin(NamedTuple):
    """Visits of some lengths.

    Attributes
    ----------
    length, up_to : int
        Shortest and longest of them.
    observed : int
        On the drawn paths.
    expected : float
        By the model, which knows where visits begin and where contigs end.
    """

    length: int
    up_to: int
    observed: int
    expected: float


class Verdict:
    """What lengths are like beside those that the model assumes."""

    FIT = "fit"
    EVEN = "more even"
    UNEVEN = "more uneven"
    OTHER = "different"
    LITTLE = "a little different"
    FEW = "too few"


@dataclass(frozen=True)
class Durations:
    """Lengths of the visits to one state.

    Attributes
    ----------
    state : str
        Its name.
    stages : int
        Of the state; with one, lengths are geometric.
    visits, cut : int
        That begin within a contig, and those of them that a contig's end cuts.
    p_value : float
        Chance of such a misfit (chi-square over bins, cut visits a bin of their own); NaN if
        there are too few.
    misplaced : float
        Share of the visits that would need another length.
    middle, expected_middle : (float, float)
        Lengths between which half of the whole visits are, and those that the model expects.
    bins : tuple of Bin
        The whole visits, by length.
    verdict : str
        One of :class:`Verdict`.
    """

    state: str
    stages: int
    visits: int
    cut: int
    p_value: float
    misplaced: float
    middle: tuple[float, float]
    expected_middle: tuple[float, float]
    bins: tuple[Bin, ...]
    verdict: str


class Sampler:
    """Draws paths of contigs; compares their visits with the model at the end.

    Parameters
    ----------
    model
        The model.
    bases
        Of the whole assembly, so that pieces of it are taken evenly where it is large.
    seed
        Of the paths, and of the choice of pieces.
    """

    def __init__(self, model: Model, bases: int, seed: int) -> None:
        self._model = model
        self._share = MOST_BASES / max(bases, 1)
        self._random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed])))
        self._states = [i for i, reported in enumerate(model.reported) if reported]
        self._visits: list[list[NDArray[np.int64]]] = [[] for _ in self._states]

    def add(self, contig: Contig) -> None:
        """Draw a path of a contig, or of some pieces of it.

        Raises
        ------
        SequenceError
            It is impossible under the model.
        """
        if self._share >= 1:
            self._draw(contig)
            return
        for begin in range(0, len(contig), _PIECE):
            if self._random.random() < self._share:
                piece = contig.bases[begin : begin + _PIECE]
                self._draw(Contig(contig.record, contig.start + begin, piece, False, len(contig)))

    def _draw(self, contig: Contig) -> None:
        path = sample_path(self._model, contig, self._random)
        if contig.closed:
            path = _opened(path)
        runs = runs_of(path)
        starts, ends = runs.edges[:-1], runs.edges[1:]
        # How long a visit can be and still be seen to end; the last one on a circle is whole.
        room = len(path) - 1 - starts + (contig.closed & (ends == len(path)))
        began = starts >= (0 if contig.closed and len(starts) > 1 else 1)
        for found, state in zip(self._visits, self._states, strict=True):
            own = began & (runs.states == state)
            found.append(np.column_stack((ends - starts, room))[own])

    def durations(self) -> list[Durations]:
        """Return the lengths of each reported state's visits."""
        return [
            _compared(self._model, state, np.concatenate([np.empty((0, 2), np.int64), *found]))
            for state, found in zip(self._states, self._visits, strict=True)
        ]


def _opened(path: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Return a circle's path from a change of state on."""
    changes = np.flatnonzero(path != np.roll(path, 1))
    return np.roll(path, -int(changes[0])) if len(changes) else path


def survival(model: Model, state: int, length: int) -> float:
    """Return P(a visit is longer than so many bases).

    A visit ends with the last of its stages, each of which ends at a base by a chance of its
    own, so it is longer where fewer chances than stages have come: a sum of binomial terms.

    Parameters
    ----------
    model
        The model.
    state
        The state visited.
    length
        From 0 up.
    """
    stay, stages = float(model.transitions[state, state]), model.stages[state]
    if stay >= 1:
        return 1.0
    if stay <= 0:
        return 1.0 if length < stages else 0.0
    term = exp(length * log(stay))
    total = 0.0
    for ended in range(min(stages, length + 1)):
        total += term
        term *= (length - ended) / (ended + 1) * ((1 - stay) / stay)
    return min(total, 1.0)


def _compared(model: Model, state: int, visits: NDArray[np.int64]) -> Durations:
    lengths, room = visits.T
    whole = lengths[lengths <= room]
    bins = _binned(model, state, whole, room)
    cut = len(lengths) - len(whole)
    expected_cut = sum(survival(model, state, int(most)) for most in room)
    name, stages = model.names[state], model.stages[state]
    middle = _quarters(whole)
    wanted = _expected_quarters(bins)
    observed = np.array([*(one.observed for one in bins), cut], np.float64)
    expected = np.array([*(one.expected for one in bins), expected_cut])
    chance = _chance(observed, expected) if len(whole) >= _FEWEST_VISITS else math.nan
    misplaced = float(np.abs(observed - expected).sum()) / 2 / max(len(lengths), 1)
    verdict = _verdict(chance, misplaced, bins)
    return Durations(
        name, stages, len(lengths), cut, chance, misplaced, middle, wanted, bins, verdict
    )


def _binned(
    model: Model, state: int, whole: NDArray[np.int64], room: NDArray[np.int64]
) -> tuple[Bin, ...]:
    """Count visits in bins whose edges grow by a fourth root of two.

    A visit with room for h bases is seen to end in a bin from a to b with the chance
    S(a - 1) - S(b), where neither is beyond h.
    """
    if not len(room):
        return ()
    edges, value = [1], 1.0
    while edges[-1] <= int(room.max()) and survival(model, state, edges[-1] - 1) > 1e-6:
        value *= exp(log(2.0) / _STEPS_PER_OCTAVE)
        edges.append(max(int(value), edges[-1] + 1))
    edges.append(max(int(whole.max(initial=0)), edges[-1]) + 1)
    ordered = np.sort(room)
    # Sums of S(h) over the visits that have room for less than each edge.
    tails = np.array([survival(model, state, int(most)) for most in ordered])
    behind = np.concatenate(([0.0], np.cumsum(tails)))
    reach = []
    for edge in edges:
        shorter = int(np.searchsorted(ordered, edge - 1, "left"))
        longer = len(ordered) - shorter
        reach.append(behind[shorter] + longer * survival(model, state, edge - 1))
    counts = np.histogram(whole, bins=np.array(edges))[0]
    return tuple(
        Bin(low, high - 1, int(count), max(float(more - less), 0.0))
        for low, high, count, more, less in zip(
            edges[:-1], edges[1:], counts, reach[:-1], reach[1:], strict=True
        )
    )


def _chance(observed: NDArray[np.float64], expected: NDArray[np.float64]) -> float:
    """Return the p-value of Pearson's chi-square, neighbours joined until enough are expected."""
    cells: list[tuple[float, float]] = []
    seen = wanted = 0.0
    for one, other in zip(observed.tolist(), expected.tolist(), strict=True):
        seen, wanted = seen + one, wanted + other
        if wanted >= _FEWEST_EXPECTED:
            cells.append((seen, wanted))
            seen = wanted = 0.0
    if not cells:
        return math.nan
    cells[-1] = (cells[-1][0] + seen, cells[-1][1] + wanted)
    if len(cells) < 3:
        return math.nan
    value = sum((one - other) ** 2 / other for one, other in cells)
    return chi_square_tail(value, len(cells) - 1)


def _verdict(chance: float, misplaced: float, bins: Sequence[Bin]) -> str:
    if math.isnan(chance):
        return Verdict.FEW
    if chance >= _LEVEL:
        return Verdict.FIT
    if misplaced < _MUCH:
        return Verdict.LITTLE
    middles = np.array([(one.length + one.up_to) / 2 for one in bins])
    found, wanted = (
        _variation(middles, np.array([one[column] for one in bins], np.float64))
        for column in (2, 3)
    )
    if found < (1 - _LIKE) * wanted:
        return Verdict.EVEN
    return Verdict.UNEVEN if found > (1 + _LIKE) * wanted else Verdict.OTHER


def _variation(values: NDArray[np.float64], weights: NDArray[np.float64]) -> float:
    """Return standard deviation over mean."""
    mean = float((weights * values).sum() / weights.sum())
    return math.sqrt(float((weights * (values - mean) ** 2).sum() / weights.sum())) / mean


def _quarters(whole: NDArray[np.int64]) -> tuple[float, float]:
    if not len(whole):
        return math.nan, math.nan
    low, high = np.quantile(whole, [0.25, 0.75])
    return float(low), float(high)


def _expected_quarters(bins: Sequence[Bin]) -> tuple[float, float]:
    sums = np.cumsum([one.expected for one in bins])
    if not len(sums) or sums[-1] <= 0:
        return math.nan, math.nan
    ends = [one.up_to for one in bins]
    low, high = np.interp([0.25 * sums[-1], 0.75 * sums[-1]], sums, ends)
    return float(low), float(high)


def table(found: Sequence[Durations]) -> pd.DataFrame:
    """Return one row for each bin of each state."""
    return pd.DataFrame(
        [(one.state, *row) for one in found for row in one.bins],
        columns=["state", "length", "up_to", "observed", "expected"],
    )


def statement(found: Sequence[Durations]) -> str:
    """Return in words whether lengths are as the model assumes."""
    return " ".join(_sentence(one) for one in found) or "The model reports no state."


def _sentence(one: Durations) -> str:
    whole = one.visits - one.cut
    kind = "geometric" if one.stages == 1 else f"of {one.stages} stages"
    if one.verdict == Verdict.FEW:
        seen = f"{whole} whole region{'' if whole == 1 else 's'}"
        return f"State {one.state}: {seen} on a drawn path, too few to judge lengths."
    if one.verdict == Verdict.FIT:
        return f"Lengths of {whole:,} regions of state {one.state} fit the model's ({kind})."
    ranges = (
        f"half of {whole:,} are {in_bases(one.middle[0])} to {in_bases(one.middle[1])} long, where "
        f"it expects {in_bases(one.expected_middle[0])} to {in_bases(one.expected_middle[1])} "
        f"({kind})"
    )
    if one.verdict == Verdict.LITTLE:
        return (
            f"Lengths of regions of state {one.state} differ from the model's by little, beyond "
            f"chance: {ranges}."
        )
    advice = " Stages would fit better." if one.verdict == Verdict.EVEN and one.stages == 1 else ""
    how = "otherwise distributed" if one.verdict == Verdict.OTHER else one.verdict
    return (
        f"Regions of state {one.state} are {how} in length than the model assumes: {ranges}."
        f"{advice}"
    )
