"""Measures against scikit-learn, and by hand where it has none."""

import numpy as np
import pytest
from sklearn import calibration
from sklearn import metrics as peer
from sklearn.linear_model import LogisticRegression

from hmmseg.evidence import metrics
from hmmseg.evidence.bootstrap import interval_of, resampled
from hmmseg.evidence.calibration import fitted_scale
from hmmseg.evidence.matching import match_regions
from hmmseg.evidence.tallies import (
    LEVEL_COUNT,
    BlockTally,
    Tally,
    level_probabilities,
    levels_of_bits,
    log_odds_of,
)

CASES = [(seed, ties) for seed in range(4) for ties in (False, True)]


def example(seed: int, ties: bool) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    truth = rng.random(2000) < 0.2 + 0.1 * seed
    scores = np.clip(rng.normal(0.3 + 0.3 * truth, 0.2), 0, 1)
    return truth, np.round(scores, 1) if ties else scores


@pytest.mark.parametrize(("seed", "ties"), CASES)
def test_against_scikit_learn(seed: int, ties: bool) -> None:
    truth, scores = example(seed, ties)
    called = scores > 0.45
    tn, fp, fn, tp = peer.confusion_matrix(truth, called).ravel()
    assert metrics.sensitivity(tp, fn) == pytest.approx(peer.recall_score(truth, called))
    assert metrics.precision(tp, fp) == pytest.approx(peer.precision_score(truth, called))
    assert metrics.f1_score(tp, fp, fn) == pytest.approx(peer.f1_score(truth, called))
    assert metrics.matthews_correlation(tp, fp, fn, tn) == pytest.approx(
        peer.matthews_corrcoef(truth, called)
    )
    positives, negatives, values = metrics.level_counts(truth, scores)
    assert metrics.roc_area(positives, negatives) == pytest.approx(
        peer.roc_auc_score(truth, scores)
    )
    assert metrics.average_precision(positives, negatives) == pytest.approx(
        peer.average_precision_score(truth, scores)
    )
    assert metrics.brier_score(positives, negatives, values) == pytest.approx(
        peer.brier_score_loss(truth, scores)
    )
    seen, said = calibration.calibration_curve(truth, scores, n_bins=10)
    curve = metrics.reliability(positives, negatives, values)
    assert curve.said == pytest.approx(said)
    assert curve.seen == pytest.approx(seen)
    assert curve.bases.sum() == len(truth)


def test_measures_that_are_not_defined() -> None:
    assert np.isnan(metrics.sensitivity(0, 0))
    assert np.isnan(metrics.precision(0, 0))
    assert np.isnan(metrics.roc_area(np.array([0, 0]), np.array([1, 2])))
    assert metrics.matthews_correlation(0, 0, 5, 5) == 0


def test_measures_work_along_the_last_axis() -> None:
    truth, scores = example(1, ties=True)
    one = metrics.level_counts(truth, scores)[:2]
    both = [np.stack([counts, 3 * counts]) for counts in one]
    assert metrics.roc_area(*both) == pytest.approx([float(metrics.roc_area(*one))] * 2)


def test_regions_by_hand() -> None:
    """Hit well, hit by a long call, missed, cut by the end; and one call beside all of them."""
    true = np.array([[10, 20], [40, 50], [70, 80], [95, 100]])
    called = np.array([[12, 21], [30, 60], [85, 90], [93, 100]])
    found = match_regions(true, called, 100)
    assert (found.true, found.called, found.hit, found.false) == (4, 4, 3, 1)
    # 8 of 10 and of 9; 10 of 10 but of 30; 5 of 5 and of 7.
    assert found.hit_by_half == 2
    # The last region's end is the end of the stretch, so it is no edge.
    assert sorted(found.distances.tolist()) == [1, 2, 2, 10, 10]


def test_two_calls_on_one_region() -> None:
    found = match_regions(np.array([[10, 50]]), np.array([[8, 15], [20, 48]]), 100)
    assert (found.hit, found.hit_by_half, found.false) == (1, 1, 0)
    assert found.distances.tolist() == [10, 2]


@pytest.mark.parametrize(("true", "called"), [(2, 0), (0, 2), (0, 0)])
def test_nothing_true_or_nothing_called(true: int, called: int) -> None:
    spans = np.array([[10, 20], [30, 40]])
    found = match_regions(spans[:true], spans[:called], 100)
    assert found[:5] == (true, called, 0, 0, called)


def test_levels_keep_the_order_and_the_probability() -> None:
    posterior = np.array([0.0, 1e-12, 0.25, 0.5, 0.75, 1.0])
    levels = levels_of_bits(log_odds_of(posterior))
    assert levels.tolist() == sorted(levels.tolist())
    assert (levels[0], levels[-1]) == (0, LEVEL_COUNT - 1)
    assert level_probabilities()[levels] == pytest.approx(posterior, abs=0.006)
    assert level_probabilities()[levels[3]] == 0.5


def test_tally_equals_measures_of_all_bases() -> None:
    """Two blocks counted apart give what all their bases give together."""
    rng = np.random.default_rng(4)
    blocks, truths, scores, calls = [], [], [], []
    for _ in range(2):
        truth = np.zeros(1000, bool)
        truth[100:300] = truth[600:650] = True
        bits = np.round(rng.normal(np.where(truth, 2, -2), 2) * 16) / 16
        called = np.zeros(1000, bool)
        called[150:320] = True
        pairs = [np.array([[100, 300], [600, 650]]), np.array([[150, 320]])]
        halves = iter([(0, bits[:400]), (400, bits[400:])])
        blocks.append(BlockTally.of(pairs[0], pairs[1], 1000, halves))
        truths.append(truth), scores.append(bits), calls.append(called)
    truth, bits, called = (np.concatenate(x) for x in (truths, scores, calls))
    found = {name: float(value[0]) for name, value in Tally.of(blocks).measures().items()}
    assert found["f1"] == pytest.approx(peer.f1_score(truth, called))
    assert found["mcc"] == pytest.approx(peer.matthews_corrcoef(truth, called))
    assert found["roc_area"] == pytest.approx(peer.roc_auc_score(truth, bits))
    assert found["pr_area"] == pytest.approx(peer.average_precision_score(truth, bits))
    assert found["brier"] == pytest.approx(peer.brier_score_loss(truth, 1 / (1 + 2.0**-bits)))
    assert (found["regions_hit"], found["regions_hit_half"]) == (0.5, 0.5)
    assert (found["edge_median"], found["edge_p90"], found["false_per_mb"]) == (20, 50, 0)


def test_weights_count_blocks_again() -> None:
    rng = np.random.default_rng(5)
    blocks = []
    for start in (100, 200, 300):
        spans = np.array([[start, start + 50]])
        scores = iter([(0, rng.normal(size=1000))])
        blocks.append(BlockTally.of(spans, spans + start // 20, 1000, scores))
    weighted = Tally.of(blocks).measures(np.array([[2, 0, 1]]))
    repeated = Tally.of([blocks[0], blocks[0], blocks[2]]).measures()
    for name, value in weighted.items():
        assert value == pytest.approx(repeated[name]), name


def test_tallies_of_parts_are_those_of_the_whole() -> None:
    """Parts hold their blocks in any places, and some have no edge."""
    rng = np.random.default_rng(6)
    blocks = []
    for number in range(7):
        spans = np.sort(rng.choice(1000, 6, replace=False)).reshape(-1, 2)
        called = spans[: number % 4] + rng.integers(-3, 3)
        scores = iter([(0, rng.normal(size=1000))])
        blocks.append(BlockTally.of(spans, np.clip(called, 0, 1000), 1000, scores))
    places = [np.array([5, 1]), np.array([0]), np.array([6, 3, 2, 4])]
    parts = [Tally.of([blocks[number] for number in place.tolist()]) for place in places]
    together, whole = Tally.together(parts, places), Tally.of(blocks)
    weights = resampled(7, 20, seed=1)
    for name, values in whole.measures(weights).items():
        assert np.array_equal(together.measures(weights)[name], values, equal_nan=True), name
    assert together.regions.tolist() == whole.regions.tolist()


def test_resampling_is_fair_and_repeatable() -> None:
    drawn = resampled(40, 2000, seed=3)
    assert (drawn.sum(axis=1) == 40).all()
    # Each block is drawn once on average; the mean of 2,000 has a standard error of 0.022.
    assert np.abs(drawn.mean(axis=0) - 1).max() < 0.09
    assert (drawn == resampled(40, 2000, seed=3)).all()


def test_interval_covers_the_mean_as_often_as_it_says() -> None:
    """Means of 50 numbers, 300 times: a 95 % interval that covers 89 to 98 % of the time."""
    rng = np.random.default_rng(6)
    weights = resampled(50, 400, seed=1)
    covered = 0
    for _ in range(300):
        values = rng.normal(size=50)
        found = interval_of(values.mean(), weights @ values / 50)
        covered += found.low <= 0 <= found.high
    assert 0.89 * 300 <= covered <= 0.98 * 300


def test_calibration_against_scikit_learn() -> None:
    """Scores that say three times too much, beside an offset; and classes that do not overlap."""
    rng = np.random.default_rng(9)
    bits = np.round(rng.normal(0, 3, 20_000), 1)
    truth = rng.random(20_000) < 1 / (1 + 2.0 ** -(bits - 2))
    positives, negatives, values = metrics.level_counts(truth, 3 * bits)
    found = fitted_scale(values, positives, negatives)
    peer_fit = LogisticRegression(C=np.inf, tol=1e-10).fit(3 * bits[:, None], truth)
    assert found.slope == pytest.approx(peer_fit.coef_[0, 0] / np.log(2), rel=1e-3)
    assert found.offset == pytest.approx(peer_fit.intercept_[0] / np.log(2), rel=5e-3)
    apart = fitted_scale(np.array([-5.0, 5.0]), np.array([0, 50]), np.array([100, 0]))
    assert np.isfinite(apart).all()
    assert apart.slope > 0
