"""Posteriors against known paths, beside scikit-learn's measures."""

import math

import numpy as np
import pytest
from sklearn.calibration import calibration_curve
from sklearn.metrics import brier_score_loss

from hmmseg.evidence.reliability import (
    FEWEST_BASES,
    MOST_BASES,
    called_table,
    curve_table,
    drawn_lengths,
    reliability_of_states,
    statement,
)
from hmmseg.inference.posterior import posterior
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import Drawn, simulate
from tests.evidence.planted import LIMIT_MODELS, island_model

LENGTHS = [60_000, 1_000, 140_000, 17]


def said_and_true(model: Model, drawn: list[Drawn]) -> tuple[np.ndarray, np.ndarray]:
    said = [
        posterior(model, Contig("r", 0, one.bases, False, len(one.bases)))[:, 1] for one in drawn
    ]
    return np.concatenate(said), np.concatenate([one.path == 1 for one in drawn])


@pytest.mark.parametrize("name", ["mild", "words"])
def test_measures_are_those_of_scikit_learn(name: str) -> None:
    model = LIMIT_MODELS[name]
    drawn = list(simulate(model, LENGTHS, 5))
    (found,) = reliability_of_states(model, drawn)
    said, true = said_and_true(model, drawn)
    assert found.bases == len(said)
    assert found.brier == pytest.approx(brier_score_loss(true, said), abs=1e-5)
    seen, mean = calibration_curve(true, said, n_bins=10)
    assert found.curve.seen == pytest.approx(seen, abs=2e-3)
    assert found.curve.said == pytest.approx(mean, abs=2e-3)
    for at in found.called:
        called = said > at.threshold
        assert at.bases == pytest.approx(called.sum(), abs=20)
        assert at.nominal == pytest.approx((1 - said[called]).mean(), abs=1e-4)
        assert at.observed == pytest.approx((~true[called]).mean(), abs=1e-3)


def test_posteriors_of_the_true_model_are_calibrated_and_others_are_not() -> None:
    """Decoding with a model whose states differ too much promises more than it holds."""
    truth = LIMIT_MODELS["mild"]
    drawn = list(simulate(truth, [200_000] * 10, 6))
    (own,) = reliability_of_states(truth, drawn)
    eager = island_model((0.25, 0.75), (10_000, 800))
    (other,) = reliability_of_states(eager, drawn)
    assert own.called[0].observed == pytest.approx(own.called[0].nominal, rel=0.2)
    assert other.called[0].observed > 2 * other.called[0].nominal
    assert own.brier < other.brier


def test_all_reported_states_have_their_rows_on_any_threads() -> None:
    model = LIMIT_MODELS["strong"]
    both = Model(model.names, (True, True), 0, True, "stationary", model.transitions, model.joint)
    drawn = list(simulate(both, LENGTHS, 7))
    one, two = (reliability_of_states(both, drawn, threads) for threads in (1, 2))
    assert curve_table(one).equals(curve_table(two))
    assert called_table(one).equals(called_table(two))
    table = curve_table(one)
    assert list(table["state"].unique()) == ["background", "island"]
    assert (table.groupby("state")["bases"].sum() == sum(LENGTHS)).all()
    inside = table["mean_posterior"].between(table["low"] - 1e-5, table["high"] + 1e-5)
    assert inside.all()


def test_statement_says_what_it_cannot_show() -> None:
    model = LIMIT_MODELS["strong"]
    (found,) = reliability_of_states(model, simulate(model, [100_000], 8))
    words = statement([found])
    assert f"{100 * found.called[0].observed:.1f} % of the bases called island" in words
    assert "not whether the genome is as the model has it" in words
    never = island_model((0.40, 0.41), (100_000, 10))
    (blank,) = reliability_of_states(never, simulate(never, [1000], 1))
    assert math.isnan(blank.called[0].observed)
    assert "no base is called island" in statement([blank])


def test_lengths_are_those_of_the_assembly_within_bounds() -> None:
    small = [3000, 90_000, 7]
    repeated = drawn_lengths(small, 1)
    assert repeated[:3] == small
    assert sum(repeated) >= FEWEST_BASES
    assert sum(repeated) - sum(small) < FEWEST_BASES
    middle = [7_000_000, 5]
    assert drawn_lengths(middle, 1) == middle
    large = list(range(1, 10_000))
    taken = drawn_lengths(large, 1)
    assert sum(taken) == MOST_BASES
    assert set(taken[:-1]) <= set(large)
    assert taken == drawn_lengths(large, 1)
    assert drawn_lengths([40_000_000], 1) == [MOST_BASES]
