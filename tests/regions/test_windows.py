"""Two chains in sliding windows, against sums window by window and the published log-odds."""

import itertools

import numpy as np
import pytest
from numpy.typing import NDArray

from hmmseg.errors import ModelError, UsageError
from hmmseg.inference.likelihood import log_likelihood
from hmmseg.model import Model, model_from_dict
from hmmseg.regions.intervals import Filters
from hmmseg.regions.windows import LEVEL, ChainPair, WindowCaller, Windows
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig
from hmmseg.training.chains import chain_of_words
from tests.published.test_cpg_chains import ISLAND, LOG_ODDS_BITS, OCEAN
from tests.reference import Piece
from tests.strategies import contig_of, random_bases

CASES = [(7, 3, 50), (10, 1, 40), (5, 5, 33), (20, 7, 20), (1, 1, 9), (300, 10, 1000)]


def random_pair(order: int, symmetric: bool, seed: int = 0) -> ChainPair:
    rng = np.random.default_rng([order, seed])
    return ChainPair(*(chain_of_words(rng.random(4 ** (order + 1)), order, symmetric)
                       for _ in range(2)))  # fmt: skip


def best_one_by_one(levels: NDArray[np.int64], windows: Windows, closed: bool) -> NDArray[np.int64]:
    """Sum every window, and take the largest at each of its positions."""
    length, (window, step) = len(levels), windows
    starts = set(range(0, length, step))
    if not closed:
        starts = {s for s in starts if s + window <= length} | {length - window}
    best = np.full(length, np.iinfo(np.int64).min)
    for start in starts:
        covered = np.arange(start, start + window) % length
        best[covered] = np.maximum(best[covered], levels[covered].sum())
    return best


@pytest.mark.parametrize("closed", [False, True])
@pytest.mark.parametrize(("window", "step", "length"), CASES)
def test_best_windows(window: int, step: int, length: int, closed: bool) -> None:
    pair = random_pair(1, False)
    bases = random_bases(np.random.default_rng(length), length, missing=0.1)
    contig = contig_of(Piece(bases, closed))
    windows = Windows(window, step)
    found = [part.best for part in WindowCaller(pair, windows).stretches(contig)]
    wanted = best_one_by_one(pair.levels(contig, 0, length), windows, closed)
    assert np.concatenate(found).tolist() == wanted.tolist()


@pytest.mark.parametrize("closed", [False, True])
def test_pieces_do_not_show(closed: bool) -> None:
    """A contig longer than what is worked on at a time, and more threads than one."""
    pair = random_pair(2, True)
    bases = random_bases(np.random.default_rng(3), 600_000)
    contig = contig_of(Piece(bases, closed))
    windows = Windows(1000, 300)
    wanted = best_one_by_one(pair.levels(contig, 0, len(bases)), windows, closed)
    for threads in (1, 2):
        parts = list(WindowCaller(pair, windows, threads=threads).stretches(contig))
        assert len(parts) > 1
        assert (np.concatenate([part.best for part in parts]) == wanted).all()


@pytest.mark.parametrize("symmetric", [False, True])
@pytest.mark.parametrize("closed", [False, True])
@pytest.mark.parametrize("order", [0, 1, 3])
def test_log_odds_add_up_to_the_ratio_of_likelihoods(
    order: int, closed: bool, symmetric: bool
) -> None:
    pair = random_pair(order, symmetric)
    bases = random_bases(np.random.default_rng(1), 500, missing=0.05)
    contig = contig_of(Piece(bases, closed))
    logs = [log_likelihood(m, [contig])[0] for m in (pair.region, pair.background)]
    bits = pair.levels(contig, 0, 500).sum() / LEVEL
    assert bits == pytest.approx((logs[0] - logs[1]) / np.log(2), abs=1e-6)


@pytest.mark.parametrize("order", [0, 1, 3])
def test_strands_of_symmetric_chains_mirror_each_other(order: int) -> None:
    pair = random_pair(order, symmetric=True)
    bases = random_bases(np.random.default_rng(2), 300, missing=0.03)
    there = pair.levels(contig_of(Piece(bases)), 0, 300)
    back = pair.levels(contig_of(Piece(reverse_complement(bases))), 0, 300)
    assert there.tolist() == back[::-1].tolist()


def published_chain(table: NDArray[np.float64]) -> Model:
    rows = (table / table.sum(axis=1, keepdims=True)).tolist()
    return model_from_dict(
        {
            "format": "hmmseg-model", "version": 1, "order": 1, "symmetric": False,
            "start": "stationary", "transitions": [[1.0]],
            "states": [{"name": "chain", "reported": False, "conditional": rows}],
        }
    )  # fmt: skip


@pytest.mark.parametrize(("first", "second"), list(itertools.product(range(4), repeat=2)))
def test_published_log_odds(first: int, second: int) -> None:
    """Durbin et al. 1998, section 3.1; see tests/published for what is from memory (all of it)."""
    pair = ChainPair(published_chain(ISLAND), published_chain(OCEAN))
    assert pair.bits[4 + 4 * first + second] == pytest.approx(
        LOG_ODDS_BITS[first, second], abs=0.01
    )


def gc_pair() -> ChainPair:
    counts = [np.array(c, dtype=float) for c in ([1, 3, 3, 1], [3, 1, 1, 3])]
    return ChainPair(*(chain_of_words(c, 0, True) for c in counts))


def call(contig: Contig, caller: WindowCaller) -> list[tuple[int, int, float, float]]:
    """Return start, end, mean share and bits of each region; check the shares on the way."""
    shares = np.full(len(contig), np.nan)

    def watch(begin: int, part: NDArray[np.float64]) -> None:
        shares[begin : begin + len(part)] = part[:, 0]

    calls = caller.call(contig, watch)
    assert calls is not None
    assert not np.isnan(shares).any()
    columns = (
        calls.intervals.starts, calls.intervals.ends, calls.mean_posterior, calls.log_odds_bits
    )  # fmt: skip
    found = list(zip(*(c.tolist() for c in columns), strict=True))
    for start, end, mean, _ in found:
        positions = np.arange(start, end) % len(contig)
        assert mean == pytest.approx(shares[positions].mean(), abs=1e-12)
    return found


def test_windows_over_the_threshold_are_merged() -> None:
    """A hundred G in A: log-odds are +-log2 3 a base, so a window of ten needs six G."""
    bases = np.zeros(400, np.uint8)
    bases[150:250] = 2
    caller = WindowCaller(gc_pair(), Windows(10, 1), 0.0)
    ((start, end, _, bits),) = call(contig_of(Piece(bases)), caller)
    assert (start, end) == (146, 254)
    assert bits == pytest.approx((100 - 8) * np.log2(3), abs=1e-6)
    # Seventeen bits of ten bases ask for more than log2 3 each: nothing is left.
    assert call(contig_of(Piece(bases)), WindowCaller(gc_pair(), Windows(10, 1), 17.0)) == []
    higher = WindowCaller(gc_pair(), Windows(10, 1), 15.0)
    assert call(contig_of(Piece(bases)), higher)[0][:2] == (150, 250)


def test_region_across_the_origin_of_a_circle() -> None:
    bases = np.zeros(400, np.uint8)
    bases[:50] = bases[350:] = 2
    found = call(contig_of(Piece(bases, closed=True)), WindowCaller(gc_pair(), Windows(10, 1)))
    assert [(start, end) for start, end, _, _ in found] == [(346, 454)]
    assert found[0][3] == pytest.approx((100 - 8) * np.log2(3), abs=1e-6)


def test_filters_merge_and_drop() -> None:
    bases = np.zeros(600, np.uint8)
    for start in (100, 160, 400):
        bases[start : start + 30] = 2
    plain = WindowCaller(gc_pair(), Windows(10, 1))
    spans = [(s, e) for s, e, _, _ in call(contig_of(Piece(bases)), plain)]
    assert spans == [(96, 134), (156, 194), (396, 434)]
    merged = WindowCaller(gc_pair(), Windows(10, 1), filters=Filters(50, 22))
    assert [x[:2] for x in call(contig_of(Piece(bases)), merged)] == [(96, 194)]


def test_a_contig_shorter_than_the_window_is_not_called() -> None:
    caller = WindowCaller(gc_pair(), Windows(10, 1))
    assert caller.call(contig_of(Piece(np.zeros(9, np.uint8))), lambda *_: None) is None


def test_pairs_that_do_not_fit() -> None:
    rng = np.random.default_rng(1)
    one, two = (chain_of_words(rng.random(4**k), k - 1, False) for k in (1, 2))
    with pytest.raises(ModelError, match="order 0, the background chain order 1"):
        ChainPair(one, two)
    with pytest.raises(ModelError, match="stranded, the background chain symmetric"):
        ChainPair(one, chain_of_words(rng.random(4), 0, True))


@pytest.mark.parametrize("windows", [Windows(0, 1), Windows(10, 0), Windows(10, 11)])
def test_windows_that_leave_bases_out(windows: Windows) -> None:
    with pytest.raises(UsageError):
        windows.check()
