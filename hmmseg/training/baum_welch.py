"""Baum-Welch: expectation and maximisation in turn, until nothing is gained."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from hmmseg.errors import TrainingError
from hmmseg.inference.expectation import Counts, expect
from hmmseg.inference.streams import Corpus
from hmmseg.kernels.elementary import LN2
from hmmseg.model import Model
from hmmseg.model.parameters import FREE
from hmmseg.sequence.contigs import Contig
from hmmseg.training.constraints import NO_PRIOR, NOTHING_FIXED, Fixed, Prior
from hmmseg.training.maximisation import log_prior, maximise

__all__ = ["Fit", "fit", "step"]

_ROUNDING = 1e-11
"""Nats per base by which rounding alone may make the objective fall."""

_START_GROWTH = 1.01
"""A free start that still grows by this factor an iteration has not arrived."""


@dataclass(frozen=True, eq=False)
class Fit:
    """A fitted model and the way to it.

    Attributes
    ----------
    model : Model
        Parameters after the last iteration.
    trace : tuple of float
        Log-likelihood in nats before each iteration, and of the final model.
    objective : float
        Final log-likelihood plus log prior, in nats.
    converged : bool
        The last gain was below the tolerance.
    bases : int
        Known bases it was trained on.
    """

    model: Model
    trace: tuple[float, ...]
    objective: float
    converged: bool
    bases: int

    @property
    def log_likelihood(self) -> float:
        """Of the final model, in nats."""
        return self.trace[-1]

    @property
    def bits_per_base(self) -> float:
        """Of the final model."""
        return -self.log_likelihood / LN2 / self.bases


def step(
    model: Model, contigs: Sequence[Contig], threads: int = 1, pseudocount: float = 0.0
) -> tuple[Model, float]:
    """Do one iteration.

    Parameters
    ----------
    model
        Parameters to start from.
    contigs
        The sequence.
    threads
        Threads to use; the result does not depend on it.
    pseudocount
        As of :meth:`~hmmseg.training.constraints.Prior.even`.

    Returns
    -------
    tuple of Model, float
        The new model, and the log-likelihood of the old one in nats.
    """
    corpus = Corpus(contigs, model.order, model.both_strands, threads)
    counts = expect(model, corpus, threads)
    better = maximise(model, counts, corpus.closed_lengths, Prior.even(model, pseudocount))
    return better, counts.log_likelihood


def fit(
    model: Model,
    corpus: Corpus,
    *,
    max_iterations: int = 500,
    tolerance: float = 1e-8,
    prior: Prior = NO_PRIOR,
    fixed: Fixed = NOTHING_FIXED,
    threads: int = 1,
    watch: Callable[[int, float], None] | None = None,
) -> Fit:
    """Iterate until the gain of an iteration is below the tolerance, and the start has settled.

    Parameters
    ----------
    model
        Parameters to start from.
    corpus
        The sequence, prepared for the model's order.
    max_iterations
        Iterations at most.
    tolerance
        In bits per base.
    prior
        Pseudo-counts; none by default.
    fixed
        Parameters that stay; none by default.
    threads
        Threads to use; the result does not depend on it.
    watch
        Called with the iteration's number and bits per base.

    Raises
    ------
    TrainingError
        The objective fell by more than rounding explains, or there is no known base.
    SequenceError
        A contig is impossible under the model.
    """
    bases = corpus.bases
    if bases == 0:
        raise TrainingError("there is no known base to train on; check the selection of records")
    trace: list[float] = []
    objective = float("-inf")
    converged = False
    while True:
        counts = expect(model, corpus, threads)
        reached = counts.log_likelihood + log_prior(model, prior)
        trace.append(counts.log_likelihood)
        if watch is not None:
            watch(len(trace) - 1, -counts.log_likelihood / LN2 / bases)
        gain = reached - objective
        if gain < -_ROUNDING * (bases + prior.bases):
            raise TrainingError(
                f"iteration {len(trace) - 1}: the likelihood fell by {-gain:.3g} nats, which must "
                "not happen; please report it with the model and the sequence"
            )
        objective = reached
        converged = gain < tolerance * LN2 * bases and (
            fixed.start or not _start_still_moves(model, counts)
        )
        if converged or len(trace) > max_iterations:
            return Fit(model, tuple(trace), objective, converged, bases)
        model = maximise(model, counts, corpus.closed_lengths, prior, fixed)


def _start_still_moves(model: Model, counts: Counts) -> bool:
    """Tell whether a free start is on its way from one state to another.

    At a maximum no state is expected to begin contigs more often than its probability says. A
    state with a start of 1e-20 can violate that for many iterations while the likelihood seems
    to stand still, so the gain alone would stop at the saddle.
    """
    if model.start_kind != FREE:
        return False
    contigs = counts.start.sum()
    return bool((counts.start > _START_GROWTH * contigs * model.start_probabilities).any())
