"""How short a region can be seen: the formula against its plain twin, and planted regions."""

import math

import numpy as np
import pytest

from hmmseg.evidence.planting import planted, rest_of
from hmmseg.evidence.resolution import (
    Detection,
    curve_table,
    formula,
    resolution,
    statement,
    table,
)
from hmmseg.model import Model
from hmmseg.model.contexts import joint_levels
from tests.evidence.planted import LIMIT_MODELS, island_model, plain_share_detected
from tests.strategies import parameters_of


def plain_formula(model: Model) -> float:
    """L50 of state 1 against state 0 as it stands in the docstring, word by word."""
    p = parameters_of(model)
    d_rb = d_br = 0.0
    for word in range(4 ** (p.order + 1)):
        conditional = []
        for row in p.joint:
            context = word - word % 4
            conditional.append(row[word] / row[context : context + 4].sum())
        ratio = math.log(conditional[1] / conditional[0])
        d_rb += p.joint[1, word] * ratio
        d_br -= p.joint[0, word] * ratio
    (t_bb, t_br), (t_rb, t_rr) = p.transitions
    c = 1.4427 * (1 / d_rb + 1 / d_br)
    return (math.log(t_bb * t_rr / (t_br * t_rb)) - 2 * math.log(c)) / (
        d_rb + math.log(t_rr / t_bb)
    )


@pytest.mark.parametrize("name", LIMIT_MODELS)
def test_formula_and_planted_regions_agree(name: str) -> None:
    """In an earlier trial the formula was off by at most 17 %, on the long side."""
    model = LIMIT_MODELS[name]
    (found,) = resolution(model, seed=1)
    assert found.formula.l50 == pytest.approx(plain_formula(model), rel=1e-3)
    assert found.formula.l50 == pytest.approx(found.simulated.l50, rel=0.25)
    assert found.formula.l95 == pytest.approx(found.simulated.l95, rel=0.35)
    assert found.simulated.l50 < found.simulated.l95
    assert [point.length for point in found.curve] == sorted({p.length for p in found.curve})


def test_words_of_the_formula_are_those_in_the_long_run() -> None:
    """Tables whose contexts are not those that the conditionals lead to give the same lengths."""
    model = LIMIT_MODELS["words"]
    weights = np.array([1.0, 2.0, 3.0, 4.0])[:, None]
    joint = model.joint.reshape(2, 4, 4) * weights
    skewed = Model(
        model.names, model.reported, 1, False, "stationary", model.transitions,
        (joint / joint.sum(axis=(1, 2), keepdims=True)).reshape(2, 16),
    )  # fmt: skip
    assert not np.allclose(joint_levels(skewed.joint)[0], joint_levels(model.joint)[0])
    assert formula(skewed, 1) == pytest.approx(formula(model, 1), rel=1e-9)


def test_sum_of_places_has_the_median_of_the_formula() -> None:
    """Dufresne 1990: the integral of exp(B(2 D t) - D t) is 1 / D over an exponential variable."""
    random = np.random.default_rng(5)
    drift = 0.01
    steps = random.normal(-drift, math.sqrt(2 * drift), (2000, 4000))
    sums = np.exp(np.cumsum(steps, axis=1)).sum(axis=1)
    assert np.median(sums) == pytest.approx(1.4427 / drift, rel=0.1)


def test_regions_of_that_length_are_seen_by_the_plain_twin_half_the_time() -> None:
    model = LIMIT_MODELS["strong"]
    (found,) = resolution(model, seed=1)
    short, long = (
        plain_share_detected(model, round(factor * found.simulated.l50), 120, 60, seed=7)
        for factor in (0.75, 1.25)
    )
    assert short < 0.5 < long


def test_same_seed_same_curve_on_any_threads() -> None:
    model = LIMIT_MODELS["words"]
    once, again = resolution(model, 3, threads=1), resolution(model, 3, threads=2)
    assert once == again
    assert resolution(model, 4)[0].curve != once[0].curve


def test_planted_regions_stand_where_they_are_said_to() -> None:
    model = island_model((0.1, 0.9), (1000, 100))
    random = np.random.default_rng(1)
    for bases, starts in planted(model, 1, 200, 300, 20, random):
        assert len(starts) == 20
        strong = (bases == 1) | (bases == 2)
        inside = np.zeros(len(bases), bool)
        for start in starts:
            inside[start : start + 200] = True
        assert strong[inside].mean() == pytest.approx(0.9, abs=0.03)
        assert strong[~inside].mean() == pytest.approx(0.1, abs=0.03)
        assert inside.sum() == 4000
        assert not inside[-300:].any()


def test_what_cannot_be_seen_is_said_to_be() -> None:
    model = island_model((0.40, 0.41), (10_000, 20))
    (found,) = resolution(model, 1)
    assert math.isnan(found.simulated.l50)
    assert math.isnan(found.formula.l50)
    assert "cannot be told" in statement([found], {})
    assert "at any length tried" in statement([found], {})


def test_states_with_stages_have_no_formula() -> None:
    (found,) = resolution(island_model((0.4, 0.7), (5000, 200), stages=(1, 4)), 1)
    assert math.isnan(found.formula.l50)
    assert 10 < found.simulated.l50 < 200


def test_background_of_several_states_counts_as_their_mixture() -> None:
    """Two background states of the same composition are one."""
    one = LIMIT_MODELS["strong"]
    enter, leave = one.transitions[0, 1], one.transitions[1, 0]
    two = Model(
        ("low", "other", "island"), (False, False, True), 0, True, "stationary",
        np.array([
            [0.99 - enter, 0.01, enter], [0.01, 0.99 - enter, enter],
            [leave / 2, leave / 2, 1 - leave],
        ]),
        one.joint[[0, 0, 1]],
    )  # fmt: skip
    assert rest_of(two, 2) == [0, 1]
    assert formula(two, 2) == pytest.approx(formula(one, 1), rel=1e-9)
    (merged,) = resolution(two, 1)
    assert merged.simulated.l50 == pytest.approx(resolution(one, 1)[0].simulated.l50, rel=0.15)


def test_a_model_of_domains_has_no_background() -> None:
    model = island_model((0.35, 0.45), (10_000, 10_000))
    domains = Model(
        model.names, (True, True), 0, True, "stationary", model.transitions, model.joint
    )
    found = resolution(domains, 1)
    assert [one.state for one in found] == ["background", "island"]
    assert found[0].simulated.l50 == pytest.approx(found[1].simulated.l50, rel=0.2)
    assert statement(found, {}).count("cannot be told from the other states") == 2


def test_statement_gives_the_simulated_lengths() -> None:
    (found,) = resolution(LIMIT_MODELS["strong"], 1)
    words = statement([found], {})
    assert f"shorter than about {found.simulated.l50:.2g} bp" in words
    assert f"95 % at about {found.simulated.l95:.2g} bp" in words
    assert "called" not in words
    short, long = int(found.simulated.l50) - 1, int(found.simulated.l95)
    assert "; 2 of 3 called are shorter." in statement([found], {"island": [short, short, long]})
    rows = curve_table([found])
    assert rows["trials"].sum() == sum(point.trials for point in found.curve)
    assert isinstance(found.curve[0], Detection)
    (row,) = table([found]).to_dict("records")
    assert row["simulated_l50"] == found.simulated.l50
    assert "no state" in statement([], {})
