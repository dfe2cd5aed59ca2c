"""Several fits from different starts, the best of which is kept."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from hmmseg.errors import TrainingError
from hmmseg.inference.streams import Corpus
from hmmseg.inference.threads import in_threads
from hmmseg.model import Model
from hmmseg.training.baum_welch import Fit, fit
from hmmseg.training.chains import fit_chain
from hmmseg.training.constraints import Fixed, Prior
from hmmseg.training.starts import named_by_gc, perturbed, placed_start

__all__ = ["Plan", "Restarts", "fit_restarts"]


@dataclass(frozen=True)
class Plan:
    """What to fit and how.

    Parameters
    ----------
    init
        Where the first fit starts; the others start from perturbations of it. None: every fit
        starts at random from ``states``, ``order``, ``symmetric`` and ``start_kind``.
    states, order, symmetric, start_kind
        Of a model without ``init``.
    restarts
        How many fits.
    seed
        Of all random draws.
    max_iterations, tolerance
        As for :func:`~hmmseg.training.baum_welch.fit`.
    pseudocount
        As of :meth:`~hmmseg.training.constraints.Prior.even`.
    prior
        Pseudo-counts of another kind, instead of ``pseudocount``.
    fixed
        Names of parameters that stay as they are in ``init``, as for
        :meth:`~hmmseg.training.constraints.Fixed.named`.
    """

    init: Model | None = None
    states: int = 2
    order: int = 0
    symmetric: bool = True
    start_kind: str = "stationary"
    restarts: int = 1
    seed: int = 1
    max_iterations: int = 500
    tolerance: float = 1e-8
    pseudocount: float = 0.0
    prior: Prior | None = None
    fixed: tuple[str, ...] = ()

    def start(self, number: int, corpus: Corpus) -> Model:
        """Return the model from which one fit starts."""
        seeds = np.random.SeedSequence([self.seed, number])
        random = np.random.Generator(np.random.PCG64(seeds))
        if self.init is not None:
            return self.init if number == 0 else perturbed(self.init, random)
        return placed_start(
            corpus.contigs, self.states, self.order, self.symmetric, self.start_kind, random
        )  # fmt: skip

    def finish(self, model: Model) -> Model:
        """Return the model with its states named."""
        return model if self.init is not None else named_by_gc(model)


@dataclass(frozen=True, eq=False)
class Restarts:
    """All fits, and which of them is best.

    Attributes
    ----------
    fits : tuple of Fit
        In the order of their starts.
    best : int
        The one with the highest objective; the first of equals.
    model : Model
        The best one's, its states named.
    """

    fits: tuple[Fit, ...]
    best: int
    model: Model


def fit_restarts(
    plan: Plan,
    corpus: Corpus,
    threads: int = 1,
    watch: Callable[[int, int, float], None] | None = None,
) -> Restarts:
    """Fit from every start of a plan and keep the best.

    Parameters
    ----------
    plan
        What to fit.
    corpus
        The sequence, prepared for the plan's order.
    threads
        Threads to use; the result does not depend on it.
    watch
        Called with the fit's number, the iteration and bits per base.

    Raises
    ------
    TrainingError
        There is nothing to train on.
    """
    if not corpus.contigs:
        raise TrainingError("there is no sequence to train on; check the selection of records")
    if plan.init is None and plan.states == 1 and plan.prior is None:
        # Counting gives the maximum, so there is nothing to start from and nothing to repeat.
        counted = fit_chain(corpus.contigs, plan.order, plan.symmetric, plan.pseudocount)
        return Restarts((counted,), 0, plan.finish(counted.model))
    starts = [plan.start(number, corpus) for number in range(plan.restarts)]
    prior = plan.prior or Prior.even(starts[0], plan.pseudocount)
    # Fits side by side need no waiting for one another; what is left of the threads is theirs.
    side_by_side = min(threads, len(starts))

    def fit_one(number: int) -> Fit:
        return fit(
            starts[number],
            corpus,
            max_iterations=plan.max_iterations,
            tolerance=plan.tolerance,
            prior=prior,
            fixed=Fixed.named(starts[number], plan.fixed),
            threads=threads // side_by_side,
            watch=None if watch is None else _numbered(watch, number),
        )

    fits = in_threads(fit_one, range(len(starts)), side_by_side)
    best = int(np.argmax([found.objective for found in fits]))
    return Restarts(tuple(fits), best, plan.finish(fits[best].model))


def _numbered(
    watch: Callable[[int, int, float], None], number: int
) -> Callable[[int, float], None]:
    def told(iteration: int, bits: float) -> None:
        watch(number, iteration, bits)

    return told
