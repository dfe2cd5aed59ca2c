"""Measure the kernels beside named peers and print a table.

Run ``python -m tests.benchmarks`` from the root of the project, with a C compiler at hand, and
with names of sections behind it (``peers threads growth contigs memory decoding calibration
report``) to measure only those. Peers and we take turns in the same process, on the same model
and bases; each time is the least of five, after one that warms up; before anything is timed,
log-likelihoods are compared to 1e-9 relative. What runs on one thread is measured in processor
time, so that others who use the machine count little. Ratios hold within one run; nanoseconds
depend on the machine. Nothing here is a test: no time is asserted.
"""

import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import partial

import numpy as np

from hmmseg.evidence.assembly import Assembly
from hmmseg.evidence.null_regions import Scoring, call_nulls, replicates_of
from hmmseg.inference.expectation import expect
from hmmseg.inference.path import best_runs
from hmmseg.inference.posterior import posterior_windows
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model
from hmmseg.regions.calling import Caller
from hmmseg.sequence.contigs import Contig
from tests.benchmarks.cases import a_model, contigs
from tests.benchmarks.memory import peak_megabytes
from tests.benchmarks.pages import pages
from tests.benchmarks.peers import Step, hmmlearn_compiled_step, hmmlearn_step, textbook_step

REPEATS = 5
MEGA = 1_000_000
AGREEMENT = 1e-9


def least_times(
    steps: list[Callable[[], object]], clock: Callable[[], float] = time.process_time
) -> list[float]:
    """Return the least time of each step in seconds; the steps take turns."""
    best = [np.inf] * len(steps)
    for step in steps:
        step()
    for _ in range(REPEATS):
        for which, step in enumerate(steps):
            begin = clock()
            step()
            best[which] = min(best[which], clock() - begin)
    return best


def beside(name: str, model: Model, contig: Contig, peers: dict[str, Step | None]) -> Iterator[str]:
    """Measure one model beside its peers."""
    corpus = Corpus([contig], model.order, model.both_strands)
    present = {peer: step for peer, step in peers.items() if step is not None}
    ours = expect(model, corpus).log_likelihood
    for peer, step in present.items():
        theirs = step()
        if abs(theirs - ours) > AGREEMENT * abs(ours):
            message = f"{name}: log-likelihood {ours!r}, but {theirs!r} by {peer}"
            raise AssertionError(message)
    mine, *times = least_times([lambda: expect(model, corpus), *present.values()])
    nanoseconds = 1e9 / len(contig)
    for peer, seconds in zip(present, times, strict=True):
        yield (
            f"{name:<28} {peer:<28} {seconds / mine:6.1f} x   "
            f"({mine * nanoseconds:.2f} against {seconds * nanoseconds:.1f} ns a base)"
        )


def peers() -> Iterator[str]:
    """E-step on one thread beside hmmlearn and C."""
    contig = contigs([4 * MEGA])[0]
    for states in (2, 3, 4, 8):
        model = a_model(states, 0)
        yield from beside(
            f"E-step, {states} states, order 0",
            model,
            contig,
            {
                "hmmlearn, scaling": hmmlearn_step(model, contig),
                "  its C++ part alone": hmmlearn_compiled_step(model, contig),
            },
        )
    for order in (0, 1, 5):
        model = a_model(2, order)
        step = textbook_step(model, contig)
        if step is None:
            yield "no C compiler: textbook recursion left out"
            break
        name = f"E-step, 2 states, order {order}"
        yield from beside(name, model, contig, {"textbook recursion in C": step})


def threads() -> Iterator[str]:
    """One thread against two, by the clock on the wall: both processors must be free."""
    for states, order in ((2, 0), (4, 0), (8, 0)):
        model = a_model(states, order)
        corpus = Corpus(contigs([10 * MEGA]), order, model.both_strands)
        one, two = least_times(
            [lambda: expect(model, corpus), lambda: expect(model, corpus, 2)],  # noqa: B023
            time.perf_counter,
        )
        yield f"{f'E-step, {states} states, order {order}':<28} two threads {one / two:23.2f} x"


def growth() -> Iterator[str]:
    """Time per base as records get longer."""
    model = a_model(2, 0)
    lengths = (1, 4, 16, 64, 250)
    corpora = [Corpus(contigs([n * MEGA]), 0, False) for n in lengths]
    # A turn takes as many steps as make 16 Mb: as in training, a short record is at hand from the
    # step before, and not what the turn of a long one has left of the caches.
    steps = [max(16 // length, 1) for length in lengths]
    times = least_times([partial(_steps, model, *of) for of in zip(corpora, steps, strict=True)])
    for length, count, seconds in zip(lengths, steps, times, strict=True):
        nanoseconds = seconds / count / length * 1e3
        yield (
            f"{f'E-step, one record of {length} Mb':<40} {nanoseconds:8.2f} ns a base   "
            f"{nanoseconds * lengths[-1] / times[-1] / 1e3 * steps[-1]:.2f} x the longest"
        )


def _steps(model: Model, corpus: Corpus, count: int) -> None:
    for _ in range(count):
        expect(model, corpus)


def many_contigs() -> Iterator[str]:
    """Ten thousand contigs against one record of the same length."""
    model = a_model(2, 0)
    one = Corpus(contigs([100 * MEGA]), 0, False)
    many = Corpus(contigs([10_000] * 10_000), 0, False)
    whole, parts = least_times([lambda: expect(model, one), lambda: expect(model, many)])
    yield f"E-step, 10,000 contigs of 10 kb against one record of 100 Mb: {parts / whole:.2f} x"
    pieces = contigs([10_000] * 1000)
    long = contigs([10 * MEGA])
    for name, work in {"posterior": _posteriors, "best path": _paths}.items():
        whole, parts = least_times(
            [lambda: work(model, long), lambda: work(model, pieces)]  # noqa: B023
        )
        yield f"{name}, 1,000 contigs of 10 kb against one of 10 Mb: {parts / whole:.2f} x"


def _posteriors(model: Model, pieces: list[Contig], threads: int = 1) -> None:
    for piece in pieces:
        for _ in posterior_windows(model, piece, threads):
            pass


def _paths(model: Model, pieces: list[Contig], threads: int = 1) -> None:
    for piece in pieces:
        best_runs(model, piece, threads)


def decoding() -> Iterator[str]:
    """Posterior and best path, nanoseconds a base of the record (both strands where symmetric)."""
    pieces = contigs([10 * MEGA])
    for states, order, symmetric in ((2, 0, True), (2, 1, True), (2, 5, True), (4, 1, True)):
        model = a_model(states, order, symmetric)
        for count in (1, 2):
            times = least_times(
                [
                    lambda: _posteriors(model, pieces, count),  # noqa: B023
                    lambda: _paths(model, pieces, count),  # noqa: B023
                ],
                time.perf_counter,
            )
            yield (
                f"{f'{states} states, order {order}, symmetric':<28} threads {count}   posterior "
                f"{times[0] * 100:6.1f}   best path {times[1] * 100:6.1f} ns a base"
            )


def calibration() -> Iterator[str]:
    """Null sequence: drawing it, and drawing and judging it beside drawing and decoding it."""
    (contig,) = contigs([10 * MEGA])
    for order, symmetric, decoder in (
        (0, True, "path"), (0, True, "posterior"), (1, True, "path"), (1, True, "posterior"),
        (3, True, "posterior"), (6, False, "path"),
    ):  # fmt: skip
        model = a_model(2, order, symmetric)
        model = replace(model, reported=(False, True))
        assembly = Assembly.of(model, [contig])
        null, replicates = assembly.nulls(model)["drift"], replicates_of(assembly.pieces, 1, 1)
        caller, piece = Caller(model, decoder), assembly.pieces[0]

        def draw() -> Contig:
            return null.drawn(piece, np.random.Generator(np.random.PCG64(1)))  # noqa: B023

        drawn = draw()
        times = least_times(
            [
                draw,
                lambda: caller.call(drawn, lambda *_: None),  # noqa: B023
                lambda: call_nulls(null, replicates, caller, Scoring(False, False), [1, 0]),  # noqa: B023
            ]
        )
        yield (
            f"{f'order {order}, by {decoder}':<22} drawn {10 / times[0]:5.1f} Mb/s, "
            f"judged in {times[2] / (times[0] + times[1]):.2f} x drawing and decoding"
        )


def memory() -> Iterator[str]:
    """Peak memory of fresh processes."""
    for what in ("expect", "posterior", "path"):
        for order in (0, 1):
            peak = peak_megabytes(what, order, 250 * MEGA)
            yield f"{f'{what}, order {order}, one record of 250 Mb':<44} {peak:7.0f} MB at most"


SECTIONS: dict[str, Callable[[], Iterator[str]]] = {
    "peers": peers,
    "threads": threads,
    "growth": growth,
    "contigs": many_contigs,
    "decoding": decoding,
    "calibration": calibration,
    "memory": memory,
    "report": pages,
}


def main(names: list[str]) -> None:
    """Print the table."""
    if unknown := [name for name in names if name not in SECTIONS]:
        sys.exit(f"no section {unknown[0]}; there are {', '.join(SECTIONS)}")
    for name in names or SECTIONS:
        section = SECTIONS[name]
        print(f"\n{(section.__doc__ or '').splitlines()[0]}", flush=True)
        for line in section():
            print("  " + line, flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
