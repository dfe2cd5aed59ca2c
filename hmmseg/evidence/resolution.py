"""How short a region a model can see at all: by a formula, and by planting regions.

A region is seen where the evidence of its bases outweighs the price of entering and leaving its
state. Its edges may be anywhere near, which helps: the posterior adds up all of them.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.evidence.calibration import fitted_scale
from hmmseg.evidence.planting import planted
from hmmseg.inference.posterior import posterior
from hmmseg.kernels.elementary import LN2, exp, log, log_array
from hmmseg.model import Model
from hmmseg.model.chain import ChainMachine
from hmmseg.model.contexts import code_offset, missing_code
from hmmseg.regions.odds import LogOdds, rest_of
from hmmseg.sequence.contigs import Contig

__all__ = [
    "Detection",
    "Limits",
    "Resolution",
    "curve_table",
    "formula",
    "resolution",
    "statement",
    "table",
]

SEEN = 0.5
"""Highest posterior within a region from which it counts as detected."""

_Z95 = 1.645
_BITS_95 = 4.247927513443585
"""log2 of 0.95 over 0.05."""

_SHORTEST, _LONGEST = 1, 1 << 20
_SCOUTS, _CLEAR = 50, 0.9
_TRIALS, _LENGTHS = 200, 12
_MOST_BASES = 2_000_000
"""Planted and decoded for one length."""

_APART = 15.0
"""Nats by which two regions are better told apart than joined."""
_RARE = 1e-9
_NARROWEST, _WIDEST = 100, 200_000


class Limits(NamedTuple):
    """Lengths of a region, in bases; NaN where there is none.

    Attributes
    ----------
    l50, l95 : float
        Half, and 95 %, of the regions of this length are detected.
    """

    l50: float
    l95: float


class Detection(NamedTuple):
    """Planted regions of one length.

    Attributes
    ----------
    length : int
        In bases.
    trials, detected : int
        How many were planted, and in how many the posterior of the state reaches one half.
    """

    length: int
    trials: int
    detected: int


@dataclass(frozen=True)
class Resolution:
    """How short a region of one state can be seen.

    Attributes
    ----------
    state : str
        Its name.
    formula, simulated : Limits
        From the formula, and from planted regions, which is the one to believe.
    curve : tuple of Detection
        The planted regions, by length.
    rest : str
        What the region is told from, in words.
    """

    state: str
    formula: Limits
    simulated: Limits
    curve: tuple[Detection, ...]
    rest: str = "background"


def resolution(model: Model, seed: int, threads: int = 1) -> list[Resolution]:
    """Return how short a region of each reported state can be seen.

    Parameters
    ----------
    model
        The model.
    seed
        Of the planted regions and the sequence between them.
    threads
        Threads to use; the result does not depend on it.
    """
    found = []
    for state, name in enumerate(model.names):
        if model.reported[state] and rest_of(model, state):
            curve = _curve(model, state, seed, threads)
            rest = "background" if model.background else "the other states"
            found.append(Resolution(name, formula(model, state), _fitted(curve), curve, rest))
    return found


def table(found: Sequence[Resolution]) -> pd.DataFrame:
    """Return one row for each state."""
    return pd.DataFrame(
        [(one.state, *one.formula, *one.simulated) for one in found],
        columns=["state", "formula_l50", "formula_l95", "simulated_l50", "simulated_l95"],
    )


def curve_table(found: Sequence[Resolution]) -> pd.DataFrame:
    """Return the planted regions, one row for each state and length."""
    return pd.DataFrame(
        [(one.state, *point) for one in found for point in one.curve],
        columns=["state", "length", "trials", "detected"],
    )


def statement(found: Sequence[Resolution], called: Mapping[str, Sequence[int]]) -> str:
    """Return the simulated lengths in words, and how many regions are shorter.

    Parameters
    ----------
    found
        Of each state.
    called
        Lengths of the regions that were called, by state; may be empty.
    """
    lines = []
    for one in found:
        if math.isnan(one.simulated.l50):
            lines.append(
                f"Regions of state {one.state} cannot be told from {one.rest} with this model at "
                f"any length tried, up to {max(point.length for point in one.curve):,} bp."
            )
            continue
        l50, lengths = one.simulated.l50, called.get(one.state, ())
        shorter = sum(length < l50 for length in lengths)
        lines.append(
            f"Regions of state {one.state} shorter than about {_two_digits(l50)} bp cannot be told "
            f"from {one.rest} with this model: half of them are seen at that length, 95 % at about "
            f"{_two_digits(one.simulated.l95)} bp"
            + (f"; {shorter} of {len(lengths)} called are shorter." if shorter else ".")
        )
    return " ".join(lines) or "The model reports no state that could be told from another."


def _two_digits(length: float) -> str:
    return f"{float(f'{length:.2g}'):,.0f}"


# By formula


def formula(model: Model, state: int) -> Limits:
    """Return the lengths at which evidence and price balance.

    The price of a region is ln(T_bb T_rr / (T_br T_rb)), and ln(T_bb / T_rr) for each base of
    it. Its bases are worth D_rb nats each on average. Each edge may be at several places: going
    away from the true one, the log-odds are nearly a Brownian motion of drift -D and variance
    2 D a base, the integral of whose exponential is 1 / D over an exponential variable [1]_, so
    its median is 1 / (D ln 2). Both directions add up to c places for an edge. Hence

        L50 = [ln(T_bb T_rr / (T_br T_rb)) - 2 ln c] / [D_rb + ln(T_rr / T_bb)],
        c = (1 / D_rb + 1 / D_br) / ln 2, at least 1,

    and L95 lies where the evidence exceeds the price by 1.645 of its standard deviations.

    Parameters
    ----------
    model
        Several background states count as their mixture, by their shares.
    state
        The region's state.

    Returns
    -------
    Limits
        NaN for a state with stages, whose lengths are not geometric, and where no region is
        long enough, or none is ever entered or left.

    References
    ----------
    .. [1] Dufresne 1990, Scandinavian Actuarial Journal 1990: 39-79.
    """
    others = rest_of(model, state)
    weights = model.shares[others]
    if model.stages[state] > 1 or not weights.sum() > 0:
        return Limits(math.nan, math.nan)
    weights = weights / weights.sum()
    steps = model.transitions
    enter = float((weights * steps[others, state]).sum())
    stay_out = float((weights[:, None] * steps[np.ix_(others, others)]).sum())
    leave, stay = float(steps[state, others].sum()), float(steps[state, state])
    if min(enter, leave, stay, stay_out) <= 0:
        return Limits(math.nan, math.nan)
    inside, spread, outside = _information(model, state, others, weights)
    if min(inside, outside) <= 0:
        return Limits(math.nan, math.nan)
    places = max((1 / inside + 1 / outside) / LN2, 1.0)
    price = log(stay_out * stay / (enter * leave)) - 2 * log(places)
    gain = inside + log(stay / stay_out)
    if gain <= 0:
        return Limits(math.nan, math.nan)
    price = max(price, 0.0)
    wide = _Z95 * math.sqrt(spread)
    root = (wide + math.sqrt(wide * wide + 4 * gain * price)) / (2 * gain)
    return Limits(max(price / gain, 1.0), max(root * root, 1.0))


def _information(
    model: Model, state: int, others: list[int], weights: NDArray[np.float64]
) -> tuple[float, float, float]:
    """Return D_rb, the variance of the log-odds in the region, and D_br; nats a base."""
    words = slice(code_offset(model.order), missing_code(model.order))
    odds = LogOdds(model, [state]).bits[0, words] * LN2
    own = _stationary_words(model, state)
    rest = np.zeros_like(own)
    for weight, other in zip(weights.tolist(), others, strict=True):
        rest += weight * _stationary_words(model, other)
    inside = float((own * odds).sum())
    spread = float((own * (odds - inside) ** 2).sum())
    return inside, spread, -float((rest * odds).sum())


def _stationary_words(model: Model, state: int) -> NDArray[np.float64]:
    """Return float64[word]: the long-run shares of words of order + 1 bases in one state."""
    words = slice(code_offset(model.order), missing_code(model.order))
    table = model.emissions[state, words].reshape(-1, 4)
    counted = model.joint[state].reshape(-1, 4)
    guess = (counted[:, 0] + counted[:, 1]) + (counted[:, 2] + counted[:, 3])
    try:
        contexts = ChainMachine(model.order, table, guess).stationary
    except ModelError:  # not unique: what was counted is as good as any
        contexts = guess
    return (contexts[:, None] * table).reshape(-1)


# By planting regions


def _curve(model: Model, state: int, seed: int, threads: int) -> tuple[Detection, ...]:
    """Plant regions: a few of every octave first, then many around those that are just seen."""
    flank = _flank(model, state)

    def at(length: int, trials: int) -> Detection:
        trials = min(trials, max(_MOST_BASES // (length + flank), 1))
        return _detected(model, state, (length, flank, trials), seed, threads)

    points = [at(_SHORTEST, _SCOUTS)]
    while points[-1].detected < _CLEAR * points[-1].trials and points[-1].length < _LONGEST:
        points.append(at(2 * points[-1].length, _SCOUTS))
    rough = _fitted(tuple(points))
    if math.isnan(rough.l50):
        return tuple(points)
    low, high = rough.l50 / 2, min(1.5 * rough.l95, 1.0 * _LONGEST)
    ratio = log(high / low) / (_LENGTHS - 1)
    lengths = {max(round(low * exp(ratio * step)), _SHORTEST) for step in range(_LENGTHS)}
    known = {point.length for point in points}
    points += [at(length, _TRIALS) for length in sorted(lengths - known)]
    return tuple(sorted(points))


def _flank(model: Model, state: int) -> int:
    """Return how much background parts two regions, so that they do not help each other."""
    others = rest_of(model, state)
    weights = model.shares[others]
    weights = weights / weights.sum() if weights.sum() > 0 else np.full(len(others), 1.0)
    outside = _information(model, state, others, weights)[2]
    enter = float((weights * model.transitions[others, state]).sum())
    leave = float(model.transitions[state, others].sum())
    price = -log(max(enter, _RARE)) - log(max(leave, _RARE))
    return min(max(int((price + _APART) / max(outside, _RARE)), _NARROWEST), _WIDEST)


def _detected(
    model: Model, state: int, design: tuple[int, int, int], seed: int, threads: int
) -> Detection:
    length, flank, trials = design
    random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, state, length])))
    seen = 0
    for bases, starts in planted(model, state, length, flank, trials, random):
        contig = Contig("planted", 0, bases, False, len(bases))
        own = np.ascontiguousarray(posterior(model, contig, threads)[:, state])
        edges = np.column_stack((starts, starts + length)).ravel()
        seen += int(np.count_nonzero(np.maximum.reduceat(own, edges)[::2] >= SEEN))
    return Detection(length, trials, seen)


def _fitted(curve: tuple[Detection, ...]) -> Limits:
    """Return where a logistic curve over the logarithm of the length reaches 0.5 and 0.95."""
    lengths, trials, detected = np.array(curve, np.int64).T
    share = detected / trials
    if share.max() < SEEN:
        return Limits(math.nan, math.nan)
    if share.min() == 1:
        return Limits(1.0 * _SHORTEST, 1.0 * _SHORTEST)
    scale = fitted_scale(log_array(lengths.astype(np.float64)), detected, trials - detected)
    if scale.slope <= 0:
        return Limits(math.nan, math.nan)
    l50, l95 = (exp((bits - scale.offset) / scale.slope) for bits in (0.0, _BITS_95))
    return Limits(max(l50, 1.0), max(l95, 1.0))
