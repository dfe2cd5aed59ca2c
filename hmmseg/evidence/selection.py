"""How many states, and which order: held-out likelihood and BIC over a grid of models.

Held-out means: a block's bits are those of a model fitted to the other folds. Blocks are whole
contigs, or pieces of equal length where contigs are few.

References
----------
.. [1] Schwarz 1978, Annals of Statistics 6: 461-464: BIC.
.. [2] Breiman, Friedman, Olshen & Stone 1984, Classification and Regression Trees, section 3.4.3:
   the one-standard-error rule.
.. [3] Celeux & Durand 2008, Computational Statistics 23: 541-564: cross-validated likelihood of
   hidden Markov models.
"""

import heapq
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.expectation import log_likelihoods
from hmmseg.inference.streams import Corpus
from hmmseg.kernels.elementary import LN2, log
from hmmseg.model.dimension import free_parameters
from hmmseg.sequence.alphabet import count_known
from hmmseg.sequence.contigs import Contig
from hmmseg.training.baum_welch import fit
from hmmseg.training.constraints import Prior
from hmmseg.training.restarts import Plan, fit_restarts

__all__ = [
    "FEWEST_BLOCKS",
    "SHORTEST_BLOCK",
    "Block",
    "Cell",
    "Comparison",
    "assess",
    "compare",
    "cut_blocks",
    "why_not_assessable",
]

FEWEST_BLOCKS = 8
"""Blocks that a standard error needs."""
SHORTEST_BLOCK = 2_500
"""Bases of a piece, at least."""

_PIECES = 40
_LARGEST_SHARE = 0.1
_BASES_PER_PARAMETER = 10
_NO_DIFFERENCE = 1e-5
"""Bits per base, ten bits in a megabase: models nearer than that are equally good. Fits that
differ in nothing but where they stopped differ by about a third of it."""


@dataclass(frozen=True, eq=False)
class Block:
    """A unit of cross-validation.

    Attributes
    ----------
    contig : Contig
        Its sequence.
    fold : int
        The fold that it is held out with.
    bases : int
        Known bases.
    """

    contig: Contig
    fold: int
    bases: int


@dataclass(frozen=True)
class Cell:
    """One model of the grid.

    Attributes
    ----------
    states, order : int
        Of the model.
    parameters : int
        How many of them are free.
    log_likelihood : float
        Of all sequence under the model fitted to all of it, in nats.
    bic : float
        -2 log-likelihood + parameters x ln(bases).
    held_out : tuple of float
        Bits of each block under a model fitted without its fold; empty if not assessable.
    problem : str
        Why it is not assessable; empty if it is.
    """

    states: int
    order: int
    parameters: int
    log_likelihood: float
    bic: float
    held_out: tuple[float, ...]
    problem: str = ""


@dataclass(frozen=True)
class Comparison:
    """A cell against the best one.

    Attributes
    ----------
    cell : Cell
        The cell.
    bits_per_base : float
        Held-out bits per base.
    lost : float
        By how much that is worse than the best cell's.
    standard_error : float
        Of ``lost``, from paired differences block by block.
    recommended : bool
        The smallest model that loses no more than one standard error, or next to nothing.
    """

    cell: Cell
    bits_per_base: float
    lost: float
    standard_error: float
    recommended: bool


def cut_blocks(contigs: Sequence[Contig], folds: int, seed: int) -> list[Block]:
    """Cut sequence into blocks and share them out to folds of about equal size.

    Parameters
    ----------
    contigs
        The sequence.
    folds
        How many folds.
    seed
        Of the order in which blocks are shared out.
    """
    total = sum(len(contig) for contig in contigs)
    many = len(contigs) >= _PIECES // 2
    whole = many and max(len(contig) for contig in contigs) <= _LARGEST_SHARE * total
    length = max(SHORTEST_BLOCK, total // _PIECES)
    pieces = list(contigs) if whole else [p for contig in contigs for p in _cut(contig, length)]
    known = [count_known(piece.bases) for piece in pieces]
    random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, 2])))
    lightest = [(0, fold) for fold in range(folds)]
    chosen = [0] * len(pieces)
    for index in np.argsort(random.random(len(pieces)), kind="stable").tolist():
        held, fold = heapq.heappop(lightest)
        chosen[index] = fold
        heapq.heappush(lightest, (held + known[index], fold))
    return [
        Block(piece, fold, bases)
        for piece, fold, bases in zip(pieces, chosen, known, strict=True)
        if bases
    ]


def _cut(contig: Contig, length: int) -> list[Contig]:
    count = max(1, len(contig) // length)
    edges = [len(contig) * i // count for i in range(count + 1)]
    return [
        replace(
            contig,
            start=(contig.start + begin) % contig.record_length,
            bases=contig.bases[begin:end],
            closed=False,
        )
        for begin, end in pairwise(edges)
    ]


def why_not_assessable(blocks: Sequence[Block], folds: int) -> str:
    """Return why no model can be cross-validated on these blocks; an empty string if one can."""
    enough = sum(block.bases >= SHORTEST_BLOCK // 2 for block in blocks)
    if enough < max(FEWEST_BLOCKS, folds):
        return (
            f"not assessable: {enough} blocks of {SHORTEST_BLOCK:,} bases, and "
            f"{max(FEWEST_BLOCKS, folds)} are needed"
        )
    return ""


def assess(
    contigs: Sequence[Contig],
    blocks: Sequence[Block],
    plan: Plan,
    threads: int = 1,
    watch: Callable[[str], None] | None = None,
) -> Cell:
    """Fit one model of the grid to everything and without each fold.

    Parameters
    ----------
    contigs
        The sequence.
    blocks
        The same, cut.
    plan
        The model, and how it is fitted. Without a fold it is fitted once, from the start that
        was best on everything, drawn anew from what is left.
    threads
        Threads to use; the result does not depend on it.
    watch
        Called with a word on what was done.
    """
    both = plan.symmetric and plan.order > 0
    everything = Corpus(contigs, plan.order, both, threads)
    found = fit_restarts(plan, everything, threads)
    best = found.fits[found.best]
    parameters = free_parameters(found.model)
    bic = -2 * best.log_likelihood + parameters * float(log(float(everything.bases)))
    if watch is not None:
        watch("all")
    held_out = np.zeros(len(blocks))
    folds = sorted({block.fold for block in blocks})
    problem = why_not_assessable(blocks, len(folds))
    left = everything.bases * (1 - 1 / len(folds))
    if not problem and left < _BASES_PER_PARAMETER * parameters:
        problem = f"not assessable: {left:,.0f} bases for {parameters:,} parameters"
    for fold in () if problem else folds:
        rest = Corpus([b.contig for b in blocks if b.fold != fold], plan.order, both, threads)
        start = plan.start(found.best, rest)
        model = fit(
            start,
            rest,
            max_iterations=plan.max_iterations,
            tolerance=plan.tolerance,
            prior=Prior.even(start, plan.pseudocount),
            threads=threads,
        ).model
        own = [i for i, block in enumerate(blocks) if block.fold == fold]
        held = Corpus([blocks[i].contig for i in own], plan.order, both, threads)
        held_out[own] = -log_likelihoods(model, held, threads) / LN2
        if watch is not None:
            watch(f"fold {fold + 1}")
    return Cell(
        states=plan.states,
        order=plan.order,
        parameters=parameters,
        log_likelihood=best.log_likelihood,
        bic=bic,
        held_out=() if problem else tuple(held_out.tolist()),
        problem=problem,
    )


def compare(cells: Sequence[Cell], bases: Sequence[int]) -> list[Comparison]:
    """Compare the cells that could be assessed; one of them is recommended.

    Parameters
    ----------
    cells
        All of the same blocks.
    bases
        Known bases of each block.

    Returns
    -------
    list of Comparison
        In the cells' order, without those that are not assessable.
    """
    assessed = [cell for cell in cells if cell.held_out]
    if not assessed:
        return []
    weights = np.array(bases, dtype=float)
    total = weights.sum()
    bits = [np.array(cell.held_out) for cell in assessed]
    best = int(np.argmin([block.sum() for block in bits]))
    lost, errors = [], []
    for block in bits:
        apart = block - bits[best]
        mean = float(apart.sum() / total)
        lost.append(mean)
        errors.append(_standard_error(apart - mean * weights, float(total)))
    close = [i for i in range(len(assessed)) if lost[i] <= max(errors[i], _NO_DIFFERENCE)]
    chosen = min(close, key=lambda i: (assessed[i].parameters, lost[i]))
    return [
        Comparison(cell, float(bits[i].sum() / total), lost[i], errors[i], i == chosen)
        for i, cell in enumerate(assessed)
    ]


def _standard_error(residuals: NDArray[np.float64], total: float) -> float:
    """Return the standard error of a ratio of sums over blocks (Cochran 1977, section 2.11)."""
    count = len(residuals)
    return math.sqrt(count / (count - 1) * float((residuals * residuals).sum())) / total
