"""Results do not depend on where contigs are cut into blocks; vectors mean what loops mean."""

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from hmmseg.inference import passes
from hmmseg.inference.expectation import Counts, expect
from hmmseg.inference.path import best_runs
from hmmseg.inference.posterior import posterior_windows
from hmmseg.inference.streams import Corpus
from hmmseg.inference.tables import tables_for
from hmmseg.kernels import blocks, plain
from hmmseg.kernels.limits import SCALE_BITS
from hmmseg.kernels.posteriors import posterior_kernel
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig
from tests.reference import Piece
from tests.strategies import Texture, contigs_of, model_of, random_parameters, segmented_bases

CASES = [(1, 2, "free"), (2, 0, "symmetric"), (2, 5, "free"), (3, 1, "symmetric"), (6, 0, "free")]
LENGTHS = (1, 2, 700, 9001)
BLOCKS = (64, 1000, 4096)


def _case(states: int, order: int, kind: str) -> tuple[Model, list[Contig]]:
    rng = np.random.default_rng([states, order])
    model = model_of(random_parameters(rng, states, order, kind, Texture(2.0, 40.0)))
    pieces = [Piece(segmented_bases(rng, n, missing=0.01)) for n in LENGTHS]
    pieces.append(Piece(segmented_bases(rng, 5003, missing=0.01), closed=True))
    return model, contigs_of(pieces)


def _counts(model: Model, contigs: list[Contig], **settings: int) -> Counts:
    return expect(model, Corpus(contigs, model.order, model.both_strands, **settings))


@pytest.mark.parametrize(("states", "order", "kind"), CASES)
def test_counts(states: int, order: int, kind: str) -> None:
    """Likelihoods and counts agree to twelve digits."""
    model, contigs = _case(states, order, kind)
    whole = _counts(model, contigs)
    for block in BLOCKS:
        cut = _counts(model, contigs, block=block)
        for name in ("logs", "start", "transitions", "emissions"):
            found, wanted = getattr(cut, name), getattr(whole, name)
            np.testing.assert_allclose(found, wanted, rtol=1e-12, atol=1e-12 * wanted.max())


@pytest.mark.parametrize(("states", "order", "kind"), CASES)
def test_posteriors_and_paths(states: int, order: int, kind: str) -> None:
    """Posteriors agree to 1e-10; paths are the same."""
    model, contigs = _case(states, order, kind)
    for contig in contigs:
        whole = _posterior(model, contig, 8192)
        runs = best_runs(model, contig)
        for block in BLOCKS:
            cut = _posterior(model, contig, block)
            np.testing.assert_allclose(cut, whole, rtol=0, atol=1e-10)
            again = best_runs(model, contig, block=block)
            np.testing.assert_array_equal(again.edges, runs.edges)
            np.testing.assert_array_equal(again.states, runs.states)


def _posterior(model: Model, contig: Contig, block: int) -> np.ndarray:
    windows = list(posterior_windows(model, contig, block=block))
    begins = np.cumsum([0] + [len(window) for _, window in windows])
    assert [begin for begin, _ in windows] == begins[:-1].tolist()
    return np.concatenate([window for _, window in windows])


@pytest.mark.parametrize("states", [1, 2, 3, 5, 8])
def test_vectors_mean_what_loops_mean(states: int) -> None:
    """Kernels on vectors in registers do the sums and products of the plain loops."""
    rng = np.random.default_rng(states)
    model = model_of(random_parameters(rng, states, 1, "free", Texture(2.0, 40.0)))
    lengths = [3000, 40, 2500, 1, 777]
    contigs = contigs_of([Piece(segmented_bases(rng, n, missing=0.01)) for n in lengths])
    stream = Corpus(contigs, 1, False, block=512).streams(3)[0]
    tables = tables_for(model, 3)
    count = len(stream.bounds) - 1
    numbers = np.arange(count)

    def transferred(transfer: Callable[..., Any]) -> list[np.ndarray]:
        out = [np.zeros((count, states, states)), np.zeros((count, states)), np.zeros(count, bool)]
        transfer(stream.tokens, stream.bounds, numbers, tables.matrices, tables.interval, *out)
        return out

    products, exponents, flags = transferred(blocks.block_kernels(states).transfer)
    others, other_exponents, other_flags = transferred(plain.transfer)
    # Not one bit differs, however many powers of two stand apart.
    mantissas, binary = np.frexp(products)
    other_mantissas, other_binary = np.frexp(others)
    np.testing.assert_array_equal(mantissas, other_mantissas)
    np.testing.assert_array_equal(
        np.where(mantissas > 0, binary - SCALE_BITS * exponents[:, :, None], 0),
        np.where(mantissas > 0, other_binary - SCALE_BITS * other_exponents[:, :, None], 0),
    )
    assert not flags.any() | other_flags.any()

    jobs = passes.find_ends(model, tables, stream, 1).jobs

    def weighed(expect_blocks: Callable[..., Any]) -> np.ndarray:
        weights, flags = np.zeros_like(tables.matrices), np.zeros(count, bool)
        expect_blocks(
            stream.tokens, stream.bounds, jobs.blocks, jobs.starts, jobs.ends, jobs.shares,
            tables.matrices, tables.mirrored, tables.interval, weights, flags,
        )  # fmt: skip
        assert not flags.any()
        return weights

    np.testing.assert_allclose(
        weighed(blocks.block_kernels(states).expect), weighed(plain.expect), rtol=1e-12
    )

    single = tables_for(model, 1)
    edges = stream.edges[0]
    mine = jobs.of_blocks(0, len(edges) - 1)

    def added(add_posteriors: Callable[..., Any]) -> np.ndarray:
        rows = np.zeros((lengths[0], states))
        assert add_posteriors(
            stream.strands[0], 1, False, edges, jobs.blocks[mine], jobs.starts[mine],
            jobs.ends[mine], jobs.shares[mine], single.matrices, single.mirrored,
            single.interval, rows, lengths[0] - 1, -1,
        )  # fmt: skip
        return rows

    np.testing.assert_allclose(
        added(posterior_kernel(states)), added(plain.add_posteriors), rtol=1e-12
    )
