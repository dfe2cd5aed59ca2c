"""Posterior intervals of the ends of regions: against all paths, plain twins, and known truth."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hmmseg.inference.posterior import posterior
from hmmseg.kernels.ends import staying
from hmmseg.regions.calling import PATH, POSTERIOR, Caller
from hmmseg.regions.ends import TAIL, EndSearch, limits_of_regions, odds_of_staying
from hmmseg.regions.intervals import Filters, StateIntervals, over_threshold
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from tests.reference import Piece
from tests.reference_regions import brute_reach, plain_limits, plain_staying
from tests.regions.known_ends import CLEAR, MODELS, truth_within
from tests.strategies import contig_of, model_of, random_bases, random_parameters


def spans_of(values: list[float]) -> StateIntervals:
    starts, ends = over_threshold(np.array(values), 0.5, 0)
    return StateIntervals(starts, ends, np.zeros(len(starts), np.int64))


@given(
    there=st.floats(0, 1),
    here=st.floats(1e-6, 1),
    odds=st.one_of(st.floats(1e-3, 1e9), st.just(math.inf), st.just(1.0)),
)
@settings(max_examples=300)
def test_staying_is_that_of_the_table(there: float, here: float, odds: float) -> None:
    found = staying(there, here, odds)
    assert 0 <= found <= 1 + 1e-9
    # The twin cannot tell what is left of here - there where both are nearly alike.
    assert found == pytest.approx(plain_staying(there, here, odds), abs=1e-9 / here)


def test_staying_in_a_table_made_by_hand() -> None:
    # P(both) 0.3, only there 0.1, only here 0.2, neither 0.4: odds ratio 0.3 x 0.4 / 0.02 = 6.
    assert staying(0.4, 0.5, 6.0) == pytest.approx(0.3 / 0.5, abs=1e-12)


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("order", [0, 1])
def test_two_states_as_all_paths_say(seed: int, order: int) -> None:
    """One pass over two states: the run's reach is exact, base by base."""
    rng = np.random.default_rng([seed, order])
    p = random_parameters(rng, 2, order, "symmetric" if order == 0 else "free")
    piece = Piece(random_bases(rng, 9, missing=0.1))
    own = posterior(model_of(p), contig_of(piece))[:, 1]
    t = p.transitions
    odds = odds_of_staying(model_of(p), 1)
    assert odds == pytest.approx(t[0, 0] * t[1, 1] / (t[0, 1] * t[1, 0]), rel=1e-9)
    for anchor, step in ((6, -1), (2, 1)):
        reached = brute_reach(p, piece, 1, anchor, step)
        share = 1.0
        for far in range(1, 7):
            here = anchor + step * (far - 1)
            share *= staying(own[here + step], own[here], odds)
            assert share == pytest.approx(reached[far], rel=1e-9)


values = st.lists(
    st.one_of(st.floats(0, 1), st.sampled_from([0.0, 0.3, 0.6, 0.97, 1.0])), min_size=1, max_size=60
)


@given(
    values=values,
    closed=st.booleans(),
    window=st.integers(1, 70),
    reach=st.integers(1, 70),
    odds=st.sampled_from([3.0, 500.0, math.inf]),
    grown=st.booleans(),
)
@settings(max_examples=400, deadline=None)
def test_limits_are_those_of_the_twin(
    values: list[float], closed: bool, window: int, reach: int, odds: float, grown: bool
) -> None:
    """Window by window, with the intervals known before or growing, as on the whole contig."""
    # Windows are never shorter than what is kept behind them.
    window = max(window, 2 * reach)
    n, spans = len(values), spans_of(values)
    search = EndSearch(odds, n, closed, reach)
    for begin in range(0, n, window):
        known = spans_of(values[: begin + window]) if grown else spans
        rest = slice(search.pending, None)
        search.add(np.array(values[begin : begin + window]), known.taken(rest))
    limits = search.finish(spans)
    cores = [(int(a), int(b)) for a, b in zip(spans.starts, spans.ends, strict=True)]
    if closed and cores == [(0, n)]:
        assert limits.tolist() == [[0, 0, n, n]]
        return
    expected = []
    joined = closed and len(cores) > 1 and cores[0][0] == 0 and cores[-1][1] == n
    for number, (a, b) in enumerate(cores):
        # Of two that meet at the origin only the outer ends are ends of a region.
        seen = (a, n + cores[0][1]) if joined and number == len(cores) - 1 else (a, b)
        low = plain_limits(values, closed, seen, -1, odds, TAIL, reach)
        seen = (cores[-1][0] - n, b) if joined and number == 0 else (a, b)
        high = plain_limits(values, closed, seen, 1, odds, TAIL, reach)
        expected.append([*low, *high])
    assert limits.tolist() == expected


def test_a_region_of_several_intervals_has_the_outermost_limits() -> None:
    spans = StateIntervals(np.array([0, 20, 90]), np.array([5, 30, 100]), np.zeros(3, np.int64))
    own = np.arange(12).reshape(3, 4)
    # The last with the first, round the end; and the one between.
    regions = StateIntervals(np.array([20, 90]), np.array([30, 105]), np.zeros(2, np.int64))
    found = limits_of_regions(regions, {0: (spans, own)}, 100)
    assert found.tolist() == [[4, 5, 6, 7], [8, 9, 102, 103]]


def test_rotation_of_a_circle_moves_the_limits_along() -> None:
    bases = next(simulate(CLEAR, [20_000], 3)).bases
    caller = Caller(CLEAR, PATH, filters=Filters(20, 10))
    found = []
    for shift in (0, 6_200, 12_000):  # the second and the third cut a region in two
        contig = Contig("r", 0, np.roll(bases, -shift), True, len(bases))
        calls = caller.call(contig, lambda *_: None)
        assert calls.limits is not None
        lows = (calls.limits + shift) % len(bases)
        found.append(sorted(map(tuple, lows.tolist())))
        rows = calls.limits
        assert (rows[:, 0] <= rows[:, 1]).all()
        assert (rows[:, 2] <= rows[:, 3]).all()
    assert len(found[0]) >= 5
    assert found[0] == found[1] == found[2]


def test_threads_and_windows_do_not_matter() -> None:
    contig = contig_of(Piece(next(simulate(CLEAR, [1_200_000], 5)).bases))
    for decoder in (PATH, POSTERIOR):
        one, two = (
            Caller(CLEAR, decoder, threads=threads).call(contig, lambda *_: None)
            for threads in (1, 2)
        )
        own = posterior(CLEAR, contig)[:, 1]
        search = EndSearch(odds_of_staying(CLEAR, 1), len(contig), False)
        search.add(own, one.intervals)
        assert one.limits is not None
        assert two.limits is not None
        assert one.limits.tolist() == two.limits.tolist() == search.finish(one.intervals).tolist()


@pytest.mark.parametrize("name", MODELS)
def test_the_truth_lies_within(name: str) -> None:
    """Nominal is 95 % or more; some hundred ends leave room for 4 standard deviations."""
    within = truth_within(MODELS[name], POSTERIOR, [30_000] * 6, seed=1)
    count = len(within)
    assert count >= 80
    assert sum(within) / count >= 0.95 - 4 * math.sqrt(0.95 * 0.05 / count)
    assert sum(within) / count < 1
