"""Ends amid the bases that most probably hold them: a plain twin, circles, neighbours, truth."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hmmseg.regions.calling import POSTERIOR, Caller
from hmmseg.regions.ends import EndSearch, settled
from hmmseg.regions.intervals import Filters, StateIntervals
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from tests.reference_regions import plain_settled
from tests.regions.known_ends import CLEAR, MODELS
from tests.regions.test_ends import spans_of

# Distinct values, so that no two windows hold the same by anything but rounding.
values = st.lists(st.floats(0.01, 0.99), min_size=1, max_size=60, unique=True)


def intervals(*triples: tuple[int, int, int]) -> StateIntervals:
    starts, ends, states = np.array(triples, np.int64).reshape(-1, 3).T
    return StateIntervals(starts, ends, states)


@given(values=values, window=st.integers(1, 20), odds=st.sampled_from([3.0, 500.0, 1e7]))
@settings(max_examples=300, deadline=None)
def test_ends_are_those_of_the_twin(values: list[float], window: int, odds: float) -> None:
    spans = spans_of(values)
    search = EndSearch(odds, len(values), False, window=window)
    search.add(np.array(values), spans)
    found = search.finish(spans)
    assert found.shape == (len(spans.starts), 2)
    for (start, end), (low, high) in zip(
        zip(spans.starts.tolist(), spans.ends.tolist(), strict=True), found.tolist(), strict=True
    ):
        assert low == plain_settled(values, (start, end), -1, odds, window)
        assert high == plain_settled(values, (start, end), 1, odds, window)


def test_a_sharp_end_stays_and_a_contig_is_filled_to_its_end() -> None:
    values = [0.001] * 50 + [0.999] * 50
    spans = spans_of(values)
    for window in (1, 11, 61):
        search = EndSearch(1e6, 100, False, window=window)
        search.add(np.array(values), spans)
        ((start, end),) = search.finish(spans).tolist()
        assert abs(start - 50) <= window // 2
        assert end == 100


def test_neighbours_meet_half_way_but_not_within_what_was_called() -> None:
    regions = intervals((10, 40, 1), (50, 90, 2), (90, 100, 1))
    places = np.array([[5, 60], [44, 95], [80, 100]])
    starts, ends, _ = settled(regions, places, 200, False)
    assert starts.tolist() == [5, 50, 90]
    assert ends.tolist() == [50, 90, 100]


def test_a_circle_is_cut_at_its_origin() -> None:
    regions = intervals((90, 105, 1))
    assert [x.tolist() for x in settled(regions, np.array([[88, 107]]), 100, True)] == [
        [0, 88], [7, 100], [1, 1],
    ]  # fmt: skip
    assert [x.tolist() for x in settled(regions, np.array([[-3, 4]]), 100, True)] == [
        [0, 97], [4, 100], [1, 1],
    ]  # fmt: skip
    whole = intervals((0, 100, 1))
    assert [x.tolist() for x in settled(whole, np.array([[0, 100]]), 100, True)] == [
        [0], [100], [1],
    ]  # fmt: skip


@pytest.mark.parametrize("name", MODELS)
@pytest.mark.parametrize("closed", [False, True])
def test_regions_are_in_order_and_hold_what_is_sure(name: str, closed: bool) -> None:
    model = MODELS[name]
    bases = next(simulate(model, [40_000], 11)).bases
    contig = Contig("r", 0, bases, closed, len(bases))
    plain = Caller(model, POSTERIOR).call(contig, lambda *_: None).intervals
    moved = Caller(model, POSTERIOR, filters=Filters(1, 0, 11)).call(contig, lambda *_: None)
    starts, ends, _ = moved.intervals
    assert (starts < ends).all()
    assert (starts[1:] >= ends[:-1]).all()
    # Neighbours that come to touch are one region.
    assert 0.9 * len(plain.starts) <= len(starts) <= len(plain.starts)
    before, after = (int(np.sum(one.ends - one.starts)) for one in (plain, moved.intervals))
    assert after == pytest.approx(before, rel=0.2)


def test_rotation_of_a_circle_moves_the_regions_along() -> None:
    bases = next(simulate(CLEAR, [20_000], 3)).bases
    caller = Caller(CLEAR, POSTERIOR, filters=Filters(20, 10, 31))
    found = []
    for shift in (0, 6_200, 12_000):
        contig = Contig("r", 0, np.roll(bases, -shift), True, len(bases))
        starts, ends, _ = caller.call(contig, lambda *_: None).intervals
        turned = (starts + shift) % len(bases)
        found.append(sorted(zip(turned.tolist(), (ends - starts).tolist(), strict=True)))
    assert len(found[0]) >= 5
    assert found[0] == found[1] == found[2]


def test_more_ends_lie_within_half_the_window() -> None:
    """That is what the window is for: it counts the ends that are near, not how near."""
    near = {0: 0, 61: 0}
    for drawn in simulate(MODELS["weak"], [100_000] * 10, 5):
        contig = Contig("r", 0, drawn.bases, False, len(drawn.bases))
        inside = np.diff(np.concatenate(([0], drawn.path, [0])))
        for window in near:
            caller = Caller(MODELS["weak"], POSTERIOR, filters=Filters(1, 0, window))
            starts, ends, _ = caller.call(contig, lambda *_: None).intervals
            for places, truth in ((starts, inside > 0), (ends, inside < 0)):
                apart = np.abs(np.subtract.outer(places, np.flatnonzero(truth)))
                near[window] += int((apart.min(axis=1) <= 30).sum())
    assert near[61] > near[0]
