"""From numbers to a verdict in words, which may be that there is no difference."""

from typing import NamedTuple

from hmmseg.evidence.bootstrap import Interval

__all__ = [
    "CHAIN_BETTER",
    "HMM_BETTER",
    "MARGIN",
    "NO_DIFFERENCE",
    "Verdict",
    "verdict_on_bits",
    "verdict_on_f1",
]

HMM_BETTER = "the HMM is better"
CHAIN_BETTER = "the chain is better"
NO_DIFFERENCE = "no difference"

MARGIN = 0.02
"""Difference in F1 that is taken to make none in practice."""


class Verdict(NamedTuple):
    """What the comparison comes to.

    Attributes
    ----------
    answer : str
        One of three.
    equivalent : bool or None
        Whether the whole interval of the difference in F1 lies within the margin; None where
        no F1 was compared.
    words : str
        The answer with its evidence.
    """

    answer: str
    equivalent: bool | None
    words: str


def verdict_on_f1(difference: Interval, hmm: float, classifier: float) -> Verdict:
    """Return the verdict where truth is known.

    There is no difference if the interval of the difference holds zero, or lies wholly within
    the margin.

    Parameters
    ----------
    difference
        F1 of the HMM minus F1 of the classifier, on the same held-out sequence.
    hmm, classifier
        The two F1.
    """
    value, low, high = difference
    equivalent = low > -MARGIN and high < MARGIN
    numbers = (
        f"on held-out sequence the HMM reaches F1 {hmm:.4f}, two chains in windows "
        f"{classifier:.4f}; the difference is {value:+.4f} (95 % interval {low:+.4f} to "
        f"{high:+.4f})"
    )
    if equivalent:
        words = f"No difference that matters, less than {MARGIN} either way: {numbers}."
        return Verdict(NO_DIFFERENCE, True, words)
    if low > 0:
        return Verdict(HMM_BETTER, False, f"The HMM is better: {numbers}.")
    if high < 0:
        return Verdict(CHAIN_BETTER, False, f"The chain is better: {numbers}.")
    more = "The interval holds zero, but is wide; more sequence could tell them apart"
    return Verdict(NO_DIFFERENCE, False, f"No difference seen: {numbers}. {more}.")


def verdict_on_bits(gain: Interval, price: float, chain: str, hmm: str) -> Verdict:
    """Return the verdict where no truth is known.

    A hidden state must predict held-out sequence better, beyond the interval, and by more than
    its additional parameters cost at BIC's price.

    Parameters
    ----------
    gain
        Bits per base that the best HMM saves against the best chain.
    price
        Half of log2(bases) for each additional parameter, in bits per base; negative if the
        chain has more.
    chain, hmm
        What the two are.
    """
    value, low, high = gain
    numbers = (
        f"the best {hmm} needs {-value:+.6f} bits per held-out base against the best {chain} "
        f"(95 % interval {-high:+.6f} to {-low:+.6f})"
    )
    if low > 0 and value > price:
        return Verdict(HMM_BETTER, None, f"The HMM is better: {numbers}.")
    if high < 0:
        return Verdict(
            CHAIN_BETTER, None, f"No hidden state needed, the chain is better: {numbers}."
        )
    reason = ""
    if low > 0:
        reason = f"; its additional parameters would cost {price:.6f}"
    return Verdict(
        NO_DIFFERENCE, None, f"No hidden state needed, no difference: {numbers}{reason}."
    )
