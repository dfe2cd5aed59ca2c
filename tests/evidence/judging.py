"""Sequence with and without planted regions, called and judged as ``calibrate`` does it."""

from dataclasses import replace
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.evidence.assembly import Assembly
from hmmseg.evidence.judgement import judge
from hmmseg.evidence.null_regions import Scoring, call_nulls, replicates_of
from hmmseg.inference.streams import Corpus
from hmmseg.jobs.refit import Refit
from hmmseg.model import Model
from hmmseg.regions.calling import POSTERIOR, Caller
from hmmseg.sequence.contigs import Contig
from hmmseg.training.restarts import Plan, fit_restarts

__all__ = [
    "CASES",
    "MEGA",
    "bases_of",
    "false_by_null",
    "judged",
    "kept_without_regions",
    "made_for",
    "plant",
    "rates_of_trained",
]

MEGA = 1_000_000
ALIKE = Plan(states=2, order=0, restarts=2, tolerance=1e-7, max_iterations=200)
"""Training of assembly and nulls."""


def bases_of(gc: NDArray[np.float64], seed: int) -> Contig:
    """Draw independent bases with a GC content for each position."""
    random = np.random.default_rng(seed)
    strong, which = random.random(len(gc)) < gc, random.random(len(gc)) < 0.5
    bases = np.where(strong, np.where(which, 1, 2), np.where(which, 0, 3)).astype(np.uint8)
    return Contig("r", 0, bases, False, len(bases))


def judged(
    contig: Contig,
    model: Model,
    refit: Refit | None,
    null: str,
    bases: int,
    seed: int,
    decoder: str = "path",
) -> pd.DataFrame:
    """Call a contig and judge its regions as ``calibrate`` does."""
    caller = Caller(model, decoder)
    (starts, ends, states), bits = caller.scores(contig)
    table = pd.DataFrame(
        {
            "region_id": [f"region_{i + 1}" for i in range(len(starts))],
            "record": contig.record,
            "start": starts,
            "end": ends,
            "state": np.array(model.names, dtype=object)[states],
            "log_odds_bits": bits.round(3),
        }
    )
    assembly = Assembly.of(model, [contig])
    nulls = assembly.nulls(model)
    scoring = Scoring(False, refit is not None and refit.by_chance)
    replicates = replicates_of(assembly.pieces, bases, seed, whole=refit is not None)
    found = call_nulls(nulls[null], replicates, caller, scoring, [seed, 0], refit=refit)
    reported = {i: name for i, name in enumerate(model.names) if model.reported[i]}
    return judge(table, assembly.contigs, found, scoring, reported, assembly.bases).regions


def kept_without_regions(seed: int, length: int, replicates: int, null: str) -> int:
    """Count the regions kept at q <= 0.05 in sequence without any, model and nulls trained."""
    contig = bases_of(np.full(length, 0.42), seed)
    model = fit_restarts(ALIKE, Corpus([contig], 0, False)).model
    refit = Refit(ALIKE, None, None, frozenset(), by_chance=True)
    table = judged(contig, model, refit, null, replicates * length, seed, POSTERIOR)
    return int((table["q_value"] <= 0.05).sum())


class Planted(NamedTuple):
    """Sequence with regions of one length planted in it.

    Attributes
    ----------
    contig : Contig
    starts : int64[region]
    size : int
        Of the regions, in bases.
    """

    contig: Contig
    starts: NDArray[np.int64]
    size: int

    def rates(self, table: pd.DataFrame, q: float) -> tuple[float, float]:
        """Return which share of the kept regions is false, and which of the planted is kept."""
        kept = table[table["q_value"] <= q]
        first = kept["start"].to_numpy()[:, None]
        last = kept["end"].to_numpy()[:, None]
        touching = (self.starts < last) & (self.starts + self.size > first)
        false = 1 - touching.any(axis=1).mean() if len(kept) else 0.0
        return float(false), float(touching.any(axis=0).mean())


def plant(seed: int, count: int, size: int, contrast: float, drift: float = 0.0) -> Planted:
    """Plant regions whose GC exceeds that of their surroundings by the contrast.

    The surroundings have 40 % GC, and around it a drift of that standard deviation which is
    forgotten over 150 kb: an autoregressive process at every 10 kb, with straight lines between.
    """
    random = np.random.default_rng([seed, 7])
    knots = np.arange(0, MEGA + 20_000, 10_000)
    levels = random.standard_normal(len(knots))
    memory = np.exp(-10_000 / 150_000)
    for i in range(1, len(knots)):
        levels[i] = memory * levels[i - 1] + np.sqrt(1 - memory**2) * levels[i]
    gc = 0.4 + drift * np.interp(np.arange(MEGA), knots, levels)
    step = MEGA // count
    starts = np.arange(count) * step + random.integers(0, step - size, count)
    for start in starts:
        gc[start : start + size] += contrast
    return Planted(bases_of(np.clip(gc, 0.02, 0.98), seed), starts, size)


def made_for(count: int, size: int, contrast: float) -> Model:
    """Return the model that knows what was planted."""
    out, back = count / MEGA, 1 / size
    levels = np.array([0.4, 0.4 + contrast])
    return Model(
        names=("plain", "rich"),
        reported=(False, True),
        order=0,
        symmetric=True,
        start_kind="stationary",
        transitions=np.array([[1 - out, out], [back, 1 - back]]),
        joint=np.stack([1 - levels, levels, levels, 1 - levels], axis=1) / 2,
    )


CASES = [(100, 160, 0.24), (100, 400, 0.15), (60, 1500, 0.085)]
"""Regions, their length, and by how much their GC differs."""


def rates_of_trained(count: int, size: int, contrast: float, seed: int) -> tuple[float, float]:
    """Plant, train, call and judge; return what is false and what is found."""
    sequence = plant(seed, count, size, contrast)
    plan = replace(ALIKE, init=made_for(count, size, contrast), restarts=1)
    model = fit_restarts(plan, Corpus([sequence.contig], 0, False)).model
    refit = Refit(plan, None, None, frozenset(), by_chance=False)
    table = judged(sequence.contig, model, refit, "drift", 20 * MEGA, seed, POSTERIOR)
    return sequence.rates(table, 0.1)


DRIFT = 0.075


def false_by_null(count: int, size: int, contrast: float, seeds: range) -> dict[str, float]:
    """Judge regions where GC drifts, called by a model that knows of no drift."""
    model = made_for(count, size, contrast)
    shares: dict[str, list[float]] = {"chain": [], "drift": []}
    for seed in seeds:
        sequence = plant(seed, count, size, contrast, DRIFT)
        for null, own in shares.items():
            table = judged(sequence.contig, model, None, null, 10 * MEGA, seed)
            own.append(sequence.rates(table, 0.1)[0])
    return {null: float(np.mean(own)) for null, own in shares.items()}
