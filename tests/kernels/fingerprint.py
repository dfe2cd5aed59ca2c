"""Everything inference gives, as text in which every bit shows.

``python -m tests.kernels.fingerprint THREADS BASES`` prints it for a longest contig of so many
bases, so that it can be compared between
processes that run with another processor, another C library or other numbers of threads.
"""

import hashlib
import sys
from collections.abc import Iterator

import numpy as np

from hmmseg.evidence.assembly import Assembly
from hmmseg.inference.expectation import expect
from hmmseg.inference.path import best_runs
from hmmseg.inference.posterior import posterior
from hmmseg.inference.streams import BLOCK, Corpus
from hmmseg.training.baum_welch import step
from tests.reference import Piece
from tests.strategies import Texture, contigs_of, model_of, random_parameters, segmented_bases

__all__ = ["LONGEST", "fingerprint"]

CASES = [(2, 1, "symmetric"), (3, 0, "stationary"), (5, 0, "free")]
"""States (one case for each way of finding block ends), order, kind of model."""

STEPS = 2


LONGEST = 5 * BLOCK + 77


def fingerprint(threads: int, longest: int = LONGEST) -> list[str]:
    """Return one line for each result: what it is, and its floats in hexadecimal or digest."""
    return [f"{name}: {value}" for name, value in _results(threads, longest)]


def _results(threads: int, longest: int) -> Iterator[tuple[str, str]]:
    for states, order, kind in CASES:
        rng = np.random.default_rng([states, order])
        pieces = [
            Piece(segmented_bases(rng, longest, missing=0.001)),
            Piece(segmented_bases(rng, min(3001, longest // 2)), closed=True),
            Piece(segmented_bases(rng, 400)),
        ]
        contigs = contigs_of(pieces)
        model = model_of(random_parameters(rng, states, order, kind, Texture(5.0, 300.0)))
        for number in range(STEPS):
            counts = expect(model, Corpus(contigs, order, model.both_strands, threads), threads)
            yield f"{states} {order} logs {number}", " ".join(x.hex() for x in counts.logs.tolist())
            for what in ("start", "transitions", "emissions"):
                yield f"{states} {order} {what} {number}", _digest(getattr(counts, what))
            model, _ = step(model, contigs, threads)
        yield f"{states} {order} learnt", _digest(model.transitions) + _digest(model.joint)
        assembly = Assembly.of(model, contigs)
        for name, null in assembly.nulls(model).items():
            drawn = null.drawn(assembly.pieces[0], np.random.Generator(np.random.PCG64(1)))
            yield f"{states} {order} null {name}", _digest(drawn.bases)
        for which, contig in enumerate(contigs):
            yield f"{states} {order} posterior {which}", _digest(posterior(model, contig, threads))
            runs = best_runs(model, contig, threads)
            yield f"{states} {order} path {which}", _digest(runs.edges) + _digest(runs.states)


def _digest(array: np.ndarray) -> str:
    return hashlib.sha256(np.ascontiguousarray(array).tobytes()).hexdigest()


if __name__ == "__main__":
    print("\n".join(fingerprint(int(sys.argv[1]), int(sys.argv[2]))))
