"""A sample of an assembly: its size, its spread, and that it depends on the seed alone."""

import numpy as np
import pytest

from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.sampling import sample_contigs


def assembly(lengths: list[int]) -> list[Contig]:
    random = np.random.default_rng(3)
    return [
        Contig(f"r{i}", 0, random.integers(0, 4, n, dtype=np.uint8), False, n)
        for i, n in enumerate(lengths)
    ]


def test_small_assembly_is_returned_whole() -> None:
    contigs = [*assembly([500, 300]), Contig("c", 0, np.zeros(90, np.uint8), True, 90)]
    sample, sampled = sample_contigs(contigs, 890, seed=1, block=100)
    assert not sampled
    assert sample == contigs


@pytest.mark.parametrize("lengths", [[100_000] * 3, [40] * 5000, [250_000, 17, 900, 30_000]])
@pytest.mark.parametrize("seed", [1, 2])
def test_sample_has_the_size_and_is_of_the_assembly(lengths: list[int], seed: int) -> None:
    contigs = assembly(lengths)
    whole = {contig.record: contig.bases for contig in contigs}
    sample, sampled = sample_contigs(contigs, 20_000, seed, block=1000)
    assert sampled
    assert 20_000 <= sum(len(piece) for piece in sample) < 21_500
    places = [(int(piece.record[1:]), piece.start) for piece in sample]
    assert places == sorted(places)
    for piece in sample:
        bases = whole[piece.record][piece.start : piece.start + len(piece)]
        assert np.array_equal(bases, piece.bases)
        assert not piece.closed
        assert piece.bases.base is None


def test_every_record_is_as_likely_as_it_is_long() -> None:
    """Over many seeds, records of 300 and 100 blocks get three to one."""
    contigs = assembly([30_000, 10_000])
    held = np.zeros(2)
    for seed in range(200):
        for piece in sample_contigs(contigs, 1_000, seed, block=100)[0]:
            held[int(piece.record[1:])] += 1
    # 2,000 blocks: standard deviation of the share is 0.0097.
    assert held[0] / held.sum() == pytest.approx(0.75, abs=0.04)


def test_blocks_across_the_origin_keep_their_place() -> None:
    bases = np.arange(400, dtype=np.uint8) % 4
    contig = Contig("c", 900, bases, False, 1000)
    sample, _ = sample_contigs([contig], 100, seed=1, block=100)
    for piece in sample:
        offset = (piece.start - 900) % 1000
        assert np.array_equal(piece.bases, bases[offset : offset + len(piece)])
