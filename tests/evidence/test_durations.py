"""Lengths of visits on drawn paths, beside distributions of SciPy and plain sums."""

import math

import numpy as np
import pytest
from scipy.stats import geom, kstest, nbinom

from hmmseg.evidence import durations as module
from hmmseg.evidence.durations import Durations, Sampler, Verdict, statement, survival, table
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from tests.evidence.planted import LIMIT_MODELS, island_model

GEOMETRIC = LIMIT_MODELS["strong"]
STAGED = island_model((0.3, 0.7), (5000, 75), stages=(1, 4))


def drawn(truth: Model, model: Model, lengths: list[int], seed: int) -> Durations:
    """Return the lengths that a model finds in sequence of another."""
    sampler = Sampler(model, sum(lengths), seed)
    for one in simulate(truth, lengths, seed):
        sampler.add(Contig("r", 0, one.bases, False, len(one.bases)))
    (found,) = sampler.durations()
    return found


@pytest.mark.parametrize(("model", "stages"), [(GEOMETRIC, 1), (STAGED, 4)])
def test_survival_is_that_of_waiting_times(model: Model, stages: int) -> None:
    """SciPy counts the failures before the last of so many successes."""
    leave = 1 - model.transitions[1, 1]
    for length in (0, 1, 3, 4, 5, 50, 300, 1000, 20_000):
        wanted = nbinom.sf(length - stages, stages, leave)
        assert survival(model, 1, length) == pytest.approx(wanted, rel=1e-9, abs=1e-12)


def test_survival_at_the_ends() -> None:
    never = Model(
        ("a", "b"), (True, True), 0, False, "free", np.array([[0.0, 1.0], [0.0, 1.0]]),
        np.full((2, 4), 0.25), start=np.array([1.0, 0.0]),
    )  # fmt: skip
    assert [survival(never, 0, length) for length in (0, 1, 5)] == [1.0, 0.0, 0.0]
    assert survival(never, 1, 10**9) == 1.0


@pytest.mark.parametrize("model", [GEOMETRIC, STAGED])
@pytest.mark.parametrize("lengths", [[100_000] * 15, [2_000] * 200])
def test_lengths_of_the_true_model_fit(model: Model, lengths: list[int]) -> None:
    """Short contigs cut many regions, which must not look like a misfit."""
    found = drawn(model, model, lengths, 3)
    assert found.verdict == Verdict.FIT
    assert "fit the model's" in statement([found])
    counted = sum(one.observed for one in found.bins)
    assert counted == found.visits - found.cut
    assert sum(one.expected for one in found.bins) == pytest.approx(counted, rel=0.1)


def test_even_lengths_are_told_from_geometric_ones_and_the_other_way_round() -> None:
    lengths = [100_000] * 15
    even = drawn(STAGED, GEOMETRIC, lengths, 4)
    assert even.verdict == Verdict.EVEN
    words = statement([even])
    assert "more even in length than the model assumes" in words
    assert "Stages would fit better" in words
    low, high = (geom.ppf(share, 1 - GEOMETRIC.transitions[1, 1]) for share in (0.25, 0.75))
    assert even.expected_middle == pytest.approx((low, high), rel=0.05)
    assert low < even.middle[0] < even.middle[1] < high
    uneven = drawn(GEOMETRIC, STAGED, lengths, 4)
    assert uneven.verdict == Verdict.UNEVEN
    assert "more uneven" in statement([uneven])


def test_lengths_on_clear_sequence_are_those_that_were_drawn() -> None:
    """Where states share no base the drawn path is the true one, and Kolmogorov-Smirnov agrees."""
    clear = Model(
        GEOMETRIC.names, GEOMETRIC.reported, 0, True, "stationary", GEOMETRIC.transitions,
        np.array([[0.5, 0, 0, 0.5], [0, 0.5, 0.5, 0]]),
    )  # fmt: skip
    (one,) = simulate(clear, [600_000], 5)
    edges = np.flatnonzero(np.diff(one.path, prepend=0, append=0))
    true = edges[1::2] - edges[::2]
    sampler = Sampler(clear, 1, 9)
    sampler.add(Contig("r", 0, one.bases, False, len(one.bases)))
    (found,) = sampler.durations()
    assert found.visits == len(true)
    for row in found.bins:
        assert row.observed == ((true >= row.length) & (true <= row.up_to)).sum()
    leave = 1 - clear.transitions[1, 1]
    assert kstest(true, geom(leave).cdf).pvalue > 0.01
    assert found.p_value > 0.01


def test_expected_counts_are_plain_sums_over_visits() -> None:
    room = np.array([5, 40, 40, 300, 10_000])
    whole = np.array([3, 17, 290])
    for row in module._binned(STAGED, 1, whole, room):
        wanted = 0.0
        for most in room:
            for length in range(row.length, min(row.up_to, most) + 1):
                wanted += survival(STAGED, 1, length - 1) - survival(STAGED, 1, length)
        assert row.expected == pytest.approx(wanted, abs=1e-9)


def test_a_region_across_the_origin_is_one_visit() -> None:
    bases = np.full(6000, 0, np.uint8)
    bases[:200] = bases[-300:] = 1
    bases[3000:3100] = 1
    clear = Model(
        GEOMETRIC.names, GEOMETRIC.reported, 0, True, "stationary", GEOMETRIC.transitions,
        np.array([[0.5, 0, 0, 0.5], [0, 0.5, 0.5, 0]]),
    )  # fmt: skip
    for closed, lengths in ((True, {100: 1, 500: 1}), (False, {100: 1})):
        sampler = Sampler(clear, 1, 1)
        sampler.add(Contig("r", 0, bases, closed, 6000))
        (found,) = sampler.durations()
        seen = {
            length: one.observed
            for one in found.bins
            for length in lengths
            if one.length <= length <= one.up_to
        }
        assert seen == lengths
        assert (found.visits, found.cut) == ((2, 0) if closed else (2, 1))


def test_few_regions_are_not_judged() -> None:
    found = drawn(GEOMETRIC, GEOMETRIC, [20_000], 1)
    assert found.verdict == Verdict.FEW
    assert math.isnan(found.p_value)
    assert "too few to judge" in statement([found])
    none = Sampler(GEOMETRIC, 1, 1)
    assert "0 whole regions" in statement(none.durations())
    assert table(none.durations()).empty


def test_large_assemblies_are_drawn_from_in_part(monkeypatch: pytest.MonkeyPatch) -> None:
    whole = drawn(GEOMETRIC, GEOMETRIC, [2_000_000], 2)
    monkeypatch.setattr(module, "MOST_BASES", 500_000)
    monkeypatch.setattr(module, "_PIECE", 20_000)
    found = drawn(GEOMETRIC, GEOMETRIC, [2_000_000], 2)
    assert 0.15 < found.visits / whole.visits < 0.35
    assert drawn(GEOMETRIC, GEOMETRIC, [2_000_000], 2) == found
