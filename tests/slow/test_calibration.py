"""Do q-values keep what they promise: without regions, with regions, and where GC drifts?

The smaller versions in ``tests/evidence/test_calibration_small.py`` use the same functions.
"""

import sys

import numpy as np
import pandas as pd
import pytest
from numpy.typing import NDArray

from hmmseg.evidence.assembly import Assembly
from hmmseg.evidence.judgement import judge
from hmmseg.evidence.null_regions import Scoring, call_nulls, replicates_of
from hmmseg.inference.streams import Corpus
from hmmseg.jobs.refit import Refit
from hmmseg.model import Model
from hmmseg.regions.calling import Caller
from hmmseg.regions.table import number_regions, regions_of_record
from hmmseg.sequence.contigs import Contig
from hmmseg.training.restarts import Plan, fit_restarts

pytestmark = pytest.mark.slow

MEGA = 1_000_000
ALIKE = Plan(states=2, order=0, restarts=1, tolerance=1e-6, max_iterations=200)
"""Training of assembly and nulls."""


def bases_of(gc: NDArray[np.float64], seed: int) -> Contig:
    """Draw independent bases with a GC content for each position."""
    random = np.random.default_rng(seed)
    strong, which = random.random(len(gc)) < gc, random.random(len(gc)) < 0.5
    bases = np.where(strong, np.where(which, 1, 2), np.where(which, 0, 3)).astype(np.uint8)
    return Contig("r", 0, bases, False, len(bases))


def judged(
    contig: Contig, model: Model, refit: Refit | None, null: str, bases: int, seed: int
) -> pd.DataFrame:
    """Call a contig and judge its regions as ``calibrate`` does."""
    caller = Caller(model)
    table = number_regions(
        [regions_of_record([(contig, caller.call(contig, lambda *_: None))], model.names)]
    )
    assembly = Assembly.of(model, [contig])
    nulls, _ = assembly.nulls(model)
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
    table = judged(contig, model, refit, null, replicates * length, seed)
    return int((table["q_value"] <= 0.05).sum())


if __name__ == "__main__":
    first, last, null = int(sys.argv[1]), int(sys.argv[2]), sys.argv[3]
    some = 0
    for number in range(first, last):
        count = kept_without_regions(number, MEGA, 20, null)
        some += count > 0
        print(number, count, some, flush=True)
