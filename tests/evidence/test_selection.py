"""Choosing a model: the blocks, the arithmetic of the rule, and a case whose answer is known."""

import math

import numpy as np
import pytest

from hmmseg.evidence.selection import (
    Cell,
    assess,
    compare,
    cut_blocks,
    why_not_assessable,
)
from hmmseg.sequence.contigs import Contig
from hmmseg.training.restarts import Plan


def contigs_of(lengths: list[int], closed: bool = False, seed: int = 1) -> list[Contig]:
    random = np.random.default_rng(seed)
    return [
        Contig(f"r{i}", 0, random.integers(0, 4, n, dtype=np.uint8), closed, n)
        for i, n in enumerate(lengths)
    ]


def cell(states: int, parameters: int, held_out: list[float]) -> Cell:
    return Cell(states, 0, parameters, -1.0, 2.0, tuple(held_out))


@pytest.mark.parametrize("lengths", [[100_000], [60_000, 30_000, 900], [3000] * 40, [2000] * 9])
def test_blocks_hold_everything_once(lengths: list[int]) -> None:
    contigs = contigs_of(lengths)
    blocks = cut_blocks(contigs, 5, seed=1)
    for contig in contigs:
        own = sorted(
            (b.contig for b in blocks if b.contig.record == contig.record), key=lambda c: c.start
        )
        assert np.array_equal(np.concatenate([c.bases for c in own]), contig.bases)
        starts = np.cumsum([0] + [len(c) for c in own[:-1]])
        assert [c.start for c in own] == starts.tolist()
    folds = [sum(b.bases for b in blocks if b.fold == fold) for fold in range(5)]
    assert max(folds) - min(folds) <= max(b.bases for b in blocks)


def test_many_contigs_are_blocks_themselves_and_few_are_cut() -> None:
    assert len(cut_blocks(contigs_of([3000] * 40), 5, 1)) == 40
    assert len(cut_blocks(contigs_of([100_000]), 5, 1)) == 40
    # One contig that outweighs all others would be a fold by itself.
    assert len(cut_blocks(contigs_of([3000] * 40 + [500_000]), 5, 1)) > 60
    assert not any(b.contig.closed for b in cut_blocks(contigs_of([100_000], True), 5, 1))


def test_too_little_sequence_is_not_assessable() -> None:
    blocks = cut_blocks(contigs_of([12_000]), 5, 1)
    assert why_not_assessable(blocks, 5).startswith("not assessable: 4 blocks")
    assert why_not_assessable(cut_blocks(contigs_of([30_000]), 5, 1), 5) == ""
    assert why_not_assessable(cut_blocks(contigs_of([30_000]), 20, 1), 20) != ""


def test_too_many_parameters_are_not_assessable() -> None:
    contigs = contigs_of([30_000])
    blocks = cut_blocks(contigs, 5, 1)
    plan = Plan(states=1, order=5, symmetric=False)
    found = assess(contigs, blocks, plan)
    assert found.problem == "not assessable: 24,000 bases for 3,072 parameters"
    assert found.held_out == ()
    assert math.isfinite(found.bic)
    assert compare([found], [b.bases for b in blocks]) == []


def test_standard_error_is_that_of_paired_differences() -> None:
    """By hand: differences 1, 3, 2, 2 bits over blocks of 10 bases: mean 0.2, sd 0.08165 a base."""
    best, other = cell(2, 9, [20, 20, 20, 20]), cell(1, 3, [21, 23, 22, 22])
    found = compare([best, other], [10] * 4)
    assert [c.bits_per_base for c in found] == pytest.approx([2.0, 2.2])
    assert found[1].lost == pytest.approx(0.2)
    assert found[1].standard_error == pytest.approx(np.std([0.1, 0.3, 0.2, 0.2], ddof=1) / 2)
    assert [c.recommended for c in found] == [True, False]


def test_smallest_within_one_standard_error_is_recommended() -> None:
    best = cell(3, 20, [20, 20, 20, 20])
    near = cell(2, 10, [21, 19, 22, 19])  # loses 0.025 bits per base, standard error 0.0375
    far = cell(1, 5, [24, 25, 24, 25])
    found = compare([far, near, best], [10] * 4)
    assert found[1].lost < found[1].standard_error
    assert [c.recommended for c in found] == [False, True, False]


def test_next_to_nothing_is_no_difference() -> None:
    """Ten bits in a megabase, however sure: eight blocks of 1 Mb, each of which loses 8 bits."""
    best, other = cell(3, 9, [2e6] * 8), cell(2, 4, [2e6 + 8] * 8)
    worse = cell(1, 1, [2e6 + 12] * 8)
    found = compare([worse, other, best], [10**6] * 8)
    assert found[1].standard_error == pytest.approx(0, abs=1e-12)
    assert [c.recommended for c in found] == [False, True, False]


def test_blocks_of_unequal_size_count_by_their_bases() -> None:
    best, other = cell(2, 9, [200, 20]), cell(1, 3, [220, 22])
    found = compare([best, other], [100, 10])
    assert found[1].lost == pytest.approx(0.2)
    assert found[1].standard_error == pytest.approx(0, abs=1e-12)


def test_bic_and_held_out_of_a_chain_are_counts_alone() -> None:
    """A chain of order 0, stranded: everything follows from base counts."""
    contigs = contigs_of([40_000])
    blocks = cut_blocks(contigs, 4, 1)
    found = assess(contigs, blocks, Plan(states=1, order=0, symmetric=False))
    counts = np.bincount(contigs[0].bases, minlength=4)
    log_likelihood = (counts * np.log(counts / counts.sum())).sum()
    assert found.log_likelihood == pytest.approx(log_likelihood, rel=1e-10)
    assert found.parameters == 3
    assert found.bic == pytest.approx(-2 * log_likelihood + 3 * np.log(40_000), rel=1e-10)
    for fold in range(4):
        rest = counts - sum(
            np.bincount(b.contig.bases, minlength=4) for b in blocks if b.fold == fold
        )
        for block, bits in zip(blocks, found.held_out, strict=True):
            if block.fold == fold:
                own = np.bincount(block.contig.bases, minlength=4)
                assert bits == pytest.approx(-(own * np.log2(rest / rest.sum())).sum(), rel=1e-9)


def test_two_states_are_recommended_where_there_are_two() -> None:
    random = np.random.default_rng(4)
    gc = np.repeat(np.tile([0.3, 0.65], 60), random.integers(300, 1500, 120))
    strong, second = random.random(len(gc)) < gc, random.random(len(gc)) < 0.5
    bases = np.where(strong, np.where(second, 1, 2), np.where(second, 0, 3)).astype(np.uint8)
    contigs = [Contig("r", 0, bases, False, len(bases))]
    blocks = cut_blocks(contigs, 4, 1)
    cells = [assess(contigs, blocks, Plan(states=k, restarts=2, tolerance=1e-6)) for k in (1, 2, 3)]
    chosen = [c.cell.states for c in compare(cells, [b.bases for b in blocks]) if c.recommended]
    assert chosen == [2]
