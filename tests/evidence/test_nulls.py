"""Null sequence: drawn as its definition says, from the assembly's places and composition."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from hmmseg.evidence.assembly import Assembly
from hmmseg.evidence.drift import WINDOW, Drift
from hmmseg.evidence.null_regions import (
    Scoring,
    boundary_scores,
    call_nulls,
    replicates_of,
)
from hmmseg.evidence.nulls import (
    ChainNull,
    background_model,
    chain_null,
    drift_null,
    null_order,
    pieces_of,
    tilts,
)
from hmmseg.kernels.drifting import draw_chain
from hmmseg.model import Model
from hmmseg.model.chain import chain_machine
from hmmseg.regions.calling import Caller
from hmmseg.regions.intervals import Filters
from hmmseg.sequence.contigs import Contig
from hmmseg.training.chains import fit_chain
from tests.reference_regions import plain_chain_bases
from tests.strategies import model_of, random_parameters


def generator(seed: int = 1) -> np.random.Generator:
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed])))


def contig_of(bases: NDArray[np.uint8], start: int = 0, closed: bool = False) -> Contig:
    return Contig("r", start, bases, closed, len(bases) + start)


def some_chain(order: int, seed: int = 1, length: int = 60_000) -> Model:
    """Return a chain counted in bases that depend on one another."""
    random = np.random.default_rng(seed)
    rows = random.dirichlet([3.0] * 4, 16).cumsum(axis=1)
    uniforms, bases = random.random(length), np.zeros(length, np.uint8)
    for i in range(2, length):
        row = rows[4 * bases[i - 2] + bases[i - 1]]
        bases[i] = min(int((uniforms[i] >= row).sum()), 3)
    return fit_chain([contig_of(bases)], order, symmetric=True).model


@given(st.integers(0, 3), st.integers(1, 40), st.integers(0, 30), st.integers(0, 99))
def test_kernel_is_its_twin(order: int, window: int, place: int, seed: int) -> None:
    random = np.random.default_rng(seed)
    rows = (4 ** (order + 1) - 1) // 3
    table = random.dirichlet([1.0] * 4, rows).astype(np.float32)
    uniforms = random.random(60)
    factors = random.choice([0.25, 1.0, 3.0], 120)
    bases, cut = np.empty(60, np.uint8), int(random.integers(0, 61))
    memory = np.array([place, 0, 0], np.int64)
    # In two calls, which must make no difference.
    for part in (slice(0, cut), slice(cut, 60)):
        draw_chain(table, factors, window, order, memory, uniforms[part], bases[part])
    expected = plain_chain_bases(table.tolist(), factors.tolist(), window, order, place, uniforms)
    assert bases.tolist() == expected
    assert memory[0] == place + 60


@pytest.mark.parametrize(("order", "null"), [(0, 2), (1, 3), (3, 5), (6, 8), (8, 8)])
def test_order_of_the_chains(order: int, null: int) -> None:
    assert null_order(order) == null


def test_chain_null_has_the_words_of_the_assembly() -> None:
    chain = some_chain(2)
    (piece,) = pieces_of(contig_of(np.zeros(2_000_000, np.uint8)), 0, 10**8)
    drawn = chain_null(chain).drawn(piece, generator())
    again = fit_chain([drawn], 2, symmetric=True).model
    assert again.joint[0] == pytest.approx(chain.joint[0], abs=1e-3)


def test_tilts_are_what_they_lead_to_in_the_long_run() -> None:
    """Against powers of the whole transition matrix, and the order 0, where it is the odds."""
    chain = some_chain(2)
    factors, gc = tilts(chain_machine(chain))
    assert (np.diff(gc) > 0).all()
    assert gc[len(gc) // 2] == pytest.approx(chain.gc[0], abs=1e-4)
    for at in (10, 40):
        table = chain_machine(chain).table * np.array([1, factors[at], factors[at], 1])
        table /= table.sum(axis=1, keepdims=True)
        matrix = np.zeros((16, 16))
        for context in range(16):
            for base in range(4):
                matrix[context, (4 * context + base) % 16] += table[context, base]
        shares = np.linalg.matrix_power(matrix, 4096)[0]
        assert gc[at] == pytest.approx((shares[:, None] * table[:, 1:3]).sum(), abs=1e-6)
    plain = some_chain(0)
    factors, gc = tilts(chain_machine(plain))
    assert gc / (1 - gc) == pytest.approx(factors * plain.gc[0] / (1 - plain.gc[0]), rel=1e-6)


@pytest.mark.parametrize("order", [0, 2, 3])
def test_drift_null_has_the_gc_of_each_place(order: int) -> None:
    levels = np.repeat([0.3, 0.45, 0.6, 0.38], 1000)
    null = drift_null(some_chain(order), Drift([levels], 0.4, 0.1, 100.0))
    (piece,) = pieces_of(contig_of(np.zeros(4000 * WINDOW, np.uint8)), 0, 10**8)
    bases = null.drawn(piece, generator()).bases
    strong = np.isin(bases, (1, 2)).reshape(4, -1).mean(axis=1)
    assert strong == pytest.approx([0.3, 0.45, 0.6, 0.38], abs=0.004)


def test_pieces_keep_places_and_missing_bases() -> None:
    random = np.random.default_rng(4)
    bases = random.integers(0, 5, 2_345).astype(np.uint8)
    contig = contig_of(bases, start=700)
    pieces = list(pieces_of(contig, 3, 1_000))
    assert [(p.contig.start, p.length, p.record) for p in pieces] == [
        (700, 1000, 3), (1700, 1000, 3), (2700, 345, 3)
    ]  # fmt: skip
    null = chain_null(some_chain(2))
    drawn = np.concatenate([null.drawn(piece, generator()).bases for piece in pieces])
    assert ((drawn == 4) == (bases == 4)).all()
    circle = Contig("r", 0, bases, True, len(bases))
    (whole,) = pieces_of(circle, 0, 1_000)
    assert whole.contig.closed
    assert null.drawn(whole, generator()).closed


def test_factors_go_round_the_origin() -> None:
    factors = [np.arange(1.0, 5.0)]
    null = ChainNull(0, np.full((1, 4), 0.25, np.float32), factors)
    contig = Contig("r", 3 * WINDOW + 100, np.zeros(2 * WINDOW, np.uint8), False, 4 * WINDOW)
    (piece,) = pieces_of(contig, 0, 10**8)
    used, place = null._factors(piece)
    assert (used[:3].tolist(), place) == ([4.0, 1.0, 2.0], 100)


def test_background_is_the_model_without_what_it_reports() -> None:
    p = random_parameters(np.random.default_rng(3), 3, 1)
    model = model_of(p)
    model = Model(
        names=model.names, reported=(False, True, False), order=1, symmetric=p.symmetric,
        start_kind=model.start_kind, transitions=model.transitions, joint=model.joint,
        start=None if model.start_kind == "stationary" else model.start_probabilities,
    )  # fmt: skip
    found = background_model(model)
    assert found is not None
    assert found.names == ("s0", "s2")
    kept = np.asarray(model.transitions)[np.ix_([0, 2], [0, 2])]
    assert found.transitions == pytest.approx(kept / kept.sum(axis=1, keepdims=True))
    assert (found.joint == model.joint[[0, 2]]).all()
    everything = Model(
        names=("a",), reported=(True,), order=0, symmetric=False, start_kind="stationary",
        transitions=np.ones((1, 1)), joint=np.full((1, 4), 0.25),
    )  # fmt: skip
    assert background_model(everything) is None


def test_boundaries_buy_what_the_weaker_side_has() -> None:
    states, bits = np.array([0, 1, 1, 0]), np.array([5.0, 9.0, 2.0, 7.0])
    pairs, scores = boundary_scores(states, bits, closed=False)
    assert pairs.tolist() == [[0, 1], [2, 3]]
    assert scores.tolist() == [5.0, 2.0]
    pairs, scores = boundary_scores(np.array([0, 1]), bits[:2], closed=True)
    assert (pairs.tolist(), scores.tolist()) == ([[0, 1], [1, 0]], [5.0, 5.0])
    for closed in (False, True):
        pairs, scores = boundary_scores(states[:1], bits[:1], closed)
        assert (pairs.shape, len(scores)) == ((0, 2), 0)


def test_replicates_hold_the_bases_asked_for() -> None:
    pieces = [
        piece
        for length in (500, 2_000, 700)
        for piece in pieces_of(contig_of(np.zeros(length, np.uint8)), 0, 10**8)
    ]
    # An assembly of 3.2 kb is drawn whole, as often as it takes, a piece at a time.
    found = replicates_of(pieces, 7_000, 1)
    assert found.numbers.tolist() == [0, 0, 0, 1, 1, 1, 2, 2, 2]
    assert [found.pieces_of(task) for task in range(9)] == [[0], [1], [2]] * 3
    assert found.bases.tolist() == [500, 2_000, 700] * 3
    # Of a larger one some pieces are drawn, by chance.
    part = replicates_of(pieces, 1_000, 1)
    assert part.count == 1
    assert len(part.places) < 3
    assert part.bases.sum() >= 1_000
    # Where a model is trained on each, a replicate is one task.
    whole = replicates_of(pieces, 4_000, 1, whole=True)
    assert (whole.numbers.tolist(), whole.bases.tolist()) == ([0, 1], [3_200, 3_200])
    assert list(whole.pieces_of(1)) == [0, 1, 2]


@pytest.mark.parametrize("decoder", ["path", "posterior"])
@pytest.mark.parametrize("closed", [False, True])
def test_scores_are_those_of_whole_calls(decoder: str, closed: bool) -> None:
    random = np.random.default_rng(6)
    levels = np.repeat(random.choice([0.3, 0.5], 80), 10_000)
    strong, other = random.random(len(levels)) < levels, random.integers(0, 2, len(levels))
    bases = np.where(strong, 1 + other, 3 * other).astype(np.uint8)
    bases[1_000:1_005] = 4
    table = np.array([[0.35, 0.15, 0.15, 0.35], [0.25, 0.25, 0.25, 0.25]])
    model = Model(
        names=("a", "b"), reported=(False, True), order=0, symmetric=True,
        start_kind="stationary", transitions=np.array([[0.999, 0.001], [0.002, 0.998]]),
        joint=table,
    )  # fmt: skip
    contig = contig_of(bases, closed=closed)
    caller = Caller(model, decoder, filters=Filters(50, 10))
    whole = caller.call(contig, lambda *_: None)
    intervals, bits = caller.scores(contig)
    assert len(bits) > 20
    for one, other in zip(intervals, whole.intervals, strict=True):
        assert (one == other).all()
    assert (bits == whole.log_odds_bits).all()


def test_nulls_do_not_depend_on_threads() -> None:
    random = np.random.default_rng(5)
    contigs = [contig_of(random.integers(0, 4, n).astype(np.uint8)) for n in (30_000, 9_000)]
    model = model_of(random_parameters(np.random.default_rng(2), 2, 0))
    assembly = Assembly.of(model, contigs)
    nulls = assembly.nulls(model)
    for name, null in nulls.items():
        found = [
            call_nulls(
                null, replicates_of(assembly.pieces, 150_000, 1), Caller(model),
                Scoring(False, False), [1, 0], threads=threads,
            )
            for threads in (1, 3)
        ]  # fmt: skip
        assert found[0].bases == found[1].bases == 156_000, name
        assert (found[0].scores == found[1].scores).all()
        assert (found[0].classes == found[1].classes).all()
