"""What a trained model found, state by state, in numbers and in words."""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.model import Model
from hmmseg.model.contexts import joint_levels, reverse_complement_words
from hmmseg.model.logarithm import LN2, logarithms

__all__ = [
    "StateFinding",
    "WordsBeside",
    "describe",
    "expected_lengths",
    "in_bases",
    "shares",
    "words_beside",
]

_MOST_WORDS = 3
_ENRICHED = 1.05
"""Words less over-represented than this are not worth a mention."""
_GC_STEPS = (
    (0.10, "very GC-rich"),
    (0.02, "GC-rich"),
    (-0.02, "of average GC"),
    (-0.10, "AT-rich"),
)
_CPG_STEPS = ((1.25, "rich in CpG"), (0.75, "CpG not depleted"), (0.5, "CpG somewhat depleted"))


@dataclass(frozen=True)
class StateFinding:
    """One state of a model, described.

    Attributes
    ----------
    name : str
        Of the state.
    reported : bool
        Whether its regions are reported.
    gc : float
        GC fraction.
    cpg_observed_expected : float or None
        Frequency of CpG over the product of those of C and G; None at order 0.
    expected_length : float
        Mean length of a visit, in bases.
    share : float
        Expected share of positions.
    words : tuple of (str, float)
        The words most over-represented against the background, and how many times; for a state
        that is background itself, or where all are reported, against the whole sequence. A word
        and its reverse complement are one where the model is symmetric.
    text : str
        The same in words.
    """

    name: str
    reported: bool
    gc: float
    cpg_observed_expected: float | None
    expected_length: float
    share: float
    words: tuple[tuple[str, float], ...]
    text: str


def describe(model: Model) -> list[StateFinding]:
    """Return a description of each state."""
    share, lengths = shares(model), expected_lengths(model)
    typical = float((share * model.gc).sum())
    findings = []
    for state in range(model.states):
        gc, cpg = float(model.gc[state]), _cpg(model, state)
        words = _words(model, state, share)
        text = [_step(gc - typical, _GC_STEPS, "very AT-rich")] if model.states > 1 else []
        if cpg is not None:
            text.append(_step(cpg, _CPG_STEPS, "CpG depleted"))
        if model.states > 1:
            text.append(f"mean length {in_bases(lengths[state])}")
        findings.append(
            StateFinding(
                name=model.names[state],
                reported=model.reported[state],
                gc=gc,
                cpg_observed_expected=cpg,
                expected_length=float(lengths[state]),
                share=float(share[state]),
                words=words,
                text=", ".join(text) or "a chain without hidden states",
            )
        )
    return findings


def shares(model: Model) -> NDArray[np.float64]:
    """Return float64[state], the expected share of positions of each state."""
    return model.shares


def expected_lengths(model: Model) -> NDArray[np.float64]:
    """Return float64[state], the mean length of a visit in bases; infinity if never left."""
    return model.expected_lengths


def in_bases(length: float) -> str:
    """Return a length as one says it."""
    if not np.isfinite(length):
        return "without end"
    for unit, size in (("Mb", 1e6), ("kb", 1e3)):
        if length >= 0.9995 * size:
            return f"{length / size:.3g} {unit}"
    return f"{length:.0f} bp"


def _step(value: float, steps: tuple[tuple[float, str], ...], below: str) -> str:
    return next((label for least, label in steps if value >= least), below)


def _cpg(model: Model, state: int) -> float | None:
    if model.order == 0:
        return None
    levels = joint_levels(model.joint[state])
    bases, pairs = levels[0], levels[1]
    product = float(bases[1] * bases[2])
    return float(pairs[4 * 1 + 2]) / product if product > 0 else None


class WordsBeside(NamedTuple):
    """Words of ``order + 1`` bases in a state and in what it is compared with.

    Attributes
    ----------
    names : list of str
        A word and its reverse complement are one where the model is symmetric.
    own, rest : float64[word]
        Probabilities, none of them 0.
    """

    names: list[str]
    own: NDArray[np.float64]
    rest: NDArray[np.float64]


def words_beside(model: Model, state: int, share: NDArray[np.float64]) -> WordsBeside:
    """Compare a state's words with those of the background.

    A state that is background itself is compared with the whole sequence.

    Parameters
    ----------
    model
        The model.
    state
        Index of the state.
    share
        float64[state]: how much of the sequence each state holds.
    """
    others = list(model.background) if model.reported[state] else []
    others = others or list(range(model.states))
    weights = share[others] if share[others].sum() > 0 else np.ones(len(others))
    rest = (weights[:, None] * model.joint[others]).sum(axis=0) / weights.sum()
    own = model.joint[state]
    names = [_letters(word, model.order + 1) for word in range(own.size)]
    words = np.arange(own.size)
    if model.symmetric:
        mirror = reverse_complement_words(model.order + 1)
        words = words[words <= mirror]
        names = [n if mirror[i] == i else f"{n}/{names[mirror[i]]}" for i, n in enumerate(names)]
    words = words[(own[words] > 0) & (rest[words] > 0)]
    return WordsBeside([names[word] for word in words], own[words], rest[words])


def _words(model: Model, state: int, share: NDArray[np.float64]) -> tuple[tuple[str, float], ...]:
    """Return the words that tell most for a state and against the background."""
    if model.states == 1:
        return ()
    names, own, rest = words_beside(model, state, share)
    ratio = own / rest
    order = np.argsort(-own * logarithms(ratio) / LN2, kind="stable")[:_MOST_WORDS]
    return tuple((names[i], float(ratio[i])) for i in order if ratio[i] >= _ENRICHED)


def _letters(word: int, length: int) -> str:
    return "".join("ACGT"[(word >> (2 * place)) & 3] for place in reversed(range(length)))
