"""Where Baum-Welch begins: parameters placed by the sequence itself, and perturbed ones."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.elementary import exp
from hmmseg.kernels.tokens import base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import (
    code_dtype,
    code_offset,
    missing_code,
    reverse_complement_words,
)
from hmmseg.model.parameters import FREE, STATIONARY
from hmmseg.sequence.alphabet import MISSING
from hmmseg.sequence.contigs import Contig
from hmmseg.training.chains import code_counts

__all__ = ["labelled_start", "named_by_gc", "perturbed", "placed_start", "word_counts"]

_WINDOW = 500
"""Bases in a window whose GC is looked at."""

_MOST_WINDOWS = 1 << 13

_SHORTEST, _LOG_SPREAD = 100.0, 3.4
"""Expected lengths of a random start lie between 100 and 100 exp(3.4), about 3,000 bases."""

_SHORTEST_LABEL = 2.0
"""An expected length taken from labels is at least this many bases."""

_JITTER = 0.5
"""A perturbed word probability is multiplied by up to exp(0.5) either way."""


def word_counts(contigs: Sequence[Contig], order: int) -> NDArray[np.float64]:
    """Return float64[4**(order + 1)] counts of words of ``order + 1`` known bases."""
    counts = code_counts(contigs, order)
    return counts[code_offset(order) : missing_code(order)].astype(float)


def _window_gc(contigs: Sequence[Contig]) -> NDArray[np.float64]:
    """Return the GC of up to about 8,192 windows, evenly spread over all contigs, sorted."""
    step = max(_WINDOW, sum(len(contig) for contig in contigs) // _MOST_WINDOWS)
    shares = []
    for contig in contigs:
        for at in range(0, len(contig), step):
            piece = contig.bases[at : at + _WINDOW]
            known = int(np.count_nonzero(piece != MISSING))
            if 2 * known >= min(_WINDOW, len(contig)):
                shares.append(int(np.count_nonzero((piece == 1) | (piece == 2))) / known)
    return np.sort(np.array(shares))


def _tilted(words: NDArray[np.float64], gc: float, order: int) -> NDArray[np.float64]:
    """Return a word table whose bases have the given GC, in other respects like the counts."""
    table = (words + 1) / (words.sum() + words.size)
    bases = table.reshape(-1, 4).sum(axis=0)
    own = bases[1] + bases[2]
    factor = np.array([(1 - gc) / (1 - own), gc / own, gc / own, (1 - gc) / (1 - own)])
    for place in range(order + 1):
        table = (table.reshape(4**place, 4, -1) * factor[None, :, None]).reshape(-1)
    return table / table.sum()


def placed_start(
    contigs: Sequence[Contig],
    states: int,
    order: int,
    symmetric: bool,
    start_kind: str,
    random: np.random.Generator,
) -> Model:
    """Return a random starting model whose GC levels span those of the sequence.

    Parameters
    ----------
    contigs
        The sequence.
    states, order, symmetric, start_kind
        As of :class:`~hmmseg.model.parameters.Model`.
    random
        Where GC levels, expected lengths and words get their spread from.

    Returns
    -------
    Model
        States ordered by GC, at random quantiles of the GC of windows of 500 bases.
    """
    words = word_counts(contigs, order)
    if symmetric:
        words = (words + words[reverse_complement_words(order + 1)]) / 2
    windows = _window_gc(contigs)
    quantiles = (np.arange(states) + random.random(states)) / states
    at = np.minimum((quantiles * len(windows)).astype(int), max(len(windows) - 1, 0))
    levels = np.clip(windows[at] if len(windows) else np.full(states, 0.5), 0.02, 0.98)
    joint = np.array([_tilted(words, float(level), order) for level in levels])
    lengths = np.array([_SHORTEST * exp(u * _LOG_SPREAD) for u in random.random(states)])
    names = tuple(f"state-{i + 1}" for i in range(states))
    model = Model(
        names=names,
        reported=(True,) * states,
        order=order,
        symmetric=False,
        start_kind=STATIONARY,
        transitions=_switching(lengths),
        joint=joint,
    )
    return _with(perturbed(model, random, words_only=True), symmetric, start_kind)


def _switching(lengths: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return transitions with these expected lengths that leave for every state alike.

    All flows between states are then equal, so the chain is reversible.
    """
    states = len(lengths)
    transitions = np.diag(1 - 1 / lengths)
    if states == 1:
        return np.ones((1, 1))
    for i in range(states):
        for j in range(states):
            if i != j:
                transitions[i, j] = 1 / (lengths[i] * (states - 1))
    return transitions


def perturbed(model: Model, random: np.random.Generator, words_only: bool = False) -> Model:
    """Return a model with parameters moved at random, its ties kept.

    Parameters
    ----------
    model
        Where to start from.
    random
        Source of uniform numbers.
    words_only
        Leave the transitions as they are.
    """

    def factors(shape: tuple[int, ...]) -> NDArray[np.float64]:
        uniforms = random.random(shape).ravel()
        return np.array([exp(_JITTER * (2 * u - 1)) for u in uniforms]).reshape(shape)

    joint = model.joint * factors(model.joint.shape)
    transitions, start = model.transitions, model.start_probabilities
    if model.symmetric:
        joint = (joint + joint[:, reverse_complement_words(model.order + 1)]) / 2
    if not words_only and model.states > 1:
        # A flow that is symmetric but for its diagonal keeps the chances to stay reversible.
        visits = model.shares / np.array(model.stages)
        flow = visits[:, None] * transitions if model.symmetric else transitions
        leaving = factors(flow.shape)
        leaving = (leaving + leaving.T) / 2 if model.symmetric else leaving
        np.fill_diagonal(leaving, 1.0)
        flow = flow * leaving
        transitions = flow / flow.sum(axis=1, keepdims=True)
    return Model(
        names=model.names,
        reported=model.reported,
        order=model.order,
        symmetric=model.symmetric,
        start_kind=model.start_kind,
        transitions=transitions,
        joint=joint / joint.sum(axis=1, keepdims=True),
        start=start,
        stages=model.stages,
    )


def _with(model: Model, symmetric: bool, start_kind: str) -> Model:
    """Return the model with ties, a free start beginning even."""
    joint = model.joint
    if symmetric:
        joint = (joint + joint[:, reverse_complement_words(model.order + 1)]) / 2
    return Model(
        names=model.names,
        reported=model.reported,
        order=model.order,
        symmetric=symmetric,
        start_kind=start_kind,
        transitions=model.transitions,
        joint=joint,
        start=np.full(model.states, 1 / model.states) if start_kind == FREE else None,
    )


def labelled_start(
    contigs: Sequence[Contig],
    labels: Sequence[NDArray[np.uint8]],
    names: Sequence[str],
    order: int,
    symmetric: bool,
    start_kind: str,
) -> Model:
    """Return a starting model taken from labelled positions.

    Parameters
    ----------
    contigs, labels
        The sequence, and as from :func:`~hmmseg.training.labels.labels_of_contigs`.
    names
        The states' names; those without a label take what is unlabelled.
    order, symmetric, start_kind
        As of :class:`~hmmseg.model.parameters.Model`.

    Returns
    -------
    Model
        The largest state is background, all others are reported.
    """
    states = len(names)
    sizes = np.zeros(states + 1, np.int64)
    runs = np.zeros(states + 1, np.int64)
    words = np.zeros((states + 1, 4 ** (order + 1)))
    for contig, own in zip(contigs, labels, strict=True):
        sizes += np.bincount(own, minlength=states + 1)
        first = np.concatenate(([True], own[1:] != own[:-1]))
        runs += np.bincount(own[first], minlength=states + 1)
        for label in np.unique(own):
            words[label] += _words_where(contig, own == label, order)
    labelled = sizes[1:] > 0
    # A state without labels begins from everything that has none.
    sizes = np.where(labelled, sizes[1:], max(sizes[0], 1))
    runs = np.maximum(np.where(labelled, runs[1:], max(runs[0], 1)), 1)
    joint = np.where(labelled[:, None], words[1:], words[0]) + 1 / words.shape[1]
    if symmetric:
        joint = (joint + joint[:, reverse_complement_words(order + 1)]) / 2
    lengths = np.maximum(sizes / runs, _SHORTEST_LABEL)
    background = int(np.argmax(sizes))
    return Model(
        names=tuple(names),
        reported=tuple(state != background for state in range(states)),
        order=order,
        symmetric=symmetric,
        start_kind=start_kind,
        transitions=_switching(lengths),
        joint=joint / joint.sum(axis=1, keepdims=True),
        start=np.full(states, 1 / states) if start_kind == FREE else None,
    )


def _words_where(contig: Contig, chosen: NDArray[np.bool_], order: int) -> NDArray[np.float64]:
    """Return float64[word] counts of the words that end at the chosen positions."""
    codes = np.empty(len(contig), code_dtype(order))
    base_codes(contig.bases, order, contig.closed, 0, len(contig), codes)
    counts = np.bincount(codes[chosen], minlength=missing_code(order) + 1)
    return counts[code_offset(order) : missing_code(order)].astype(float)


def named_by_gc(model: Model) -> Model:
    """Return a model whose states are ordered and named by GC.

    The most frequent state is background, all others are reported; a single state is a chain
    and is not reported.
    """
    order = np.argsort(model.gc, kind="stable")
    count = model.states
    known = {1: ("chain",), 2: ("low-gc", "high-gc"), 3: ("low-gc", "mid-gc", "high-gc")}
    names = known.get(count, tuple(f"gc-{i + 1}" for i in range(count)))
    background = int(np.argmax(model.shares[order]))
    return Model(
        names=names,
        reported=tuple(i != background for i in range(count)),
        order=model.order,
        symmetric=model.symmetric,
        start_kind=model.start_kind,
        transitions=model.transitions[np.ix_(order, order)],
        joint=model.joint[order],
        start=model.start_probabilities[order],
        stages=tuple(model.stages[i] for i in order),
    )
