"""Where a region may begin or end, from the posterior of its state around the place.

The posterior path is a Markov chain. Of two neighbouring positions it gives a table of four
probabilities: in the state or not, here and there. Its margins are the posteriors; its odds ratio
is that of the model's transitions, because emissions and messages multiply whole rows and columns
and cancel in it. Margins and odds ratio fix the table (Yule 1912, Plackett 1965).

References
----------
.. [1] Plackett RL (1965). A class of bivariate distributions. J. Am. Stat. Assoc. 60:516-522.
"""

import math

import numpy as np

from hmmseg.kernels.compiling import helper, kernel

__all__ = ["ANCHOR", "NEXT_TO_NOTHING", "search_ends", "settle_ends", "staying"]

ANCHOR = 0.99
"""Share of a region's highest posterior at which the region is taken to have begun."""

NEXT_TO_NOTHING = 1e-6
"""No end is looked for where fewer than so many runs go on."""


@kernel
def staying(there, here, odds):
    """Return P(in the state at a neighbour | in the state here) under the posterior.

    Parameters
    ----------
    there, here : float64
        Posterior of the state at the neighbour, and here (above 0).
    odds : float64
        Odds ratio of staying to changing; may be infinite.
    """
    if odds == math.inf:
        return min(1.0, there / here)
    more = odds - 1.0
    # The square root of a sum without differences, so that nothing cancels.
    uneven = there * (1.0 - here) + here * (1.0 - there)
    away = (there - here) * more
    root = math.sqrt(max(1.0 + 2.0 * more * uneven + away * away, 0.0))
    return 2.0 * odds * there / (1.0 + (there + here) * more + root)


@helper
def _anchor(posterior, inside, inner, step):
    """Return the first index from the end inwards that is within one per cent of the highest."""
    best = 0.0
    for here in range(inside, inner - step, -step):
        best = max(best, posterior[here])
    here = inside
    while posterior[here] < ANCHOR * best:
        here -= step
    return here


@kernel
def search_ends(posterior, insides, inners, outers, step, odds, tail, near, far):
    """Find between which positions the runs of a state end that hold given regions.

    Inside each region stands an anchor: the first position from the end inwards whose posterior
    is within one per cent of the region's highest. Given that the anchor is in the state, the run
    of the state around it goes on from base to base with the probability that `staying` gives.

    Parameters
    ----------
    posterior : float64[position]
        Of the state.
    insides : int64[region]
        Index of the outermost base of each region at the end in question.
    inners : int64[region]
        Index of the last base inwards where an anchor is looked for.
    outers : int64[region]
        Index of the last base outwards that a run may reach.
    step : int
        The way outwards: -1 for starts, 1 for ends.
    odds : float64
        As of `staying`.
    tail : float64
        Probability to be left beyond either limit.
    near, far : int64[region]
        Filled: the run's outermost base lies within ``near`` with probability ``tail`` at most,
        and beyond ``far`` with probability ``tail`` at most.
    """
    for region in range(insides.size):
        here = _anchor(posterior, insides[region], inners[region], step)
        near[region] = far[region] = here
        share = 1.0
        while here != outers[region]:
            share *= staying(posterior[here + step], posterior[here], odds)
            if not share > tail:
                break
            here += step
            far[region] = here
            if share >= 1.0 - tail:
                near[region] = here


@kernel
def settle_ends(posterior, insides, inners, outers, step, odds, window, found):
    """Find the middle of the bases that most probably hold the end of a run.

    Parameters
    ----------
    posterior, insides, inners, outers, step, odds
        As for `search_ends`.
    window : int
        How many neighbouring bases may hold the run's outermost one.
    found : int64[region]
        Filled: the middle one of them; but the last base that the run may reach, if half of what
        they hold lies there.
    """
    for region in range(insides.size):
        here = _anchor(posterior, insides[region], inners[region], step)
        farthest = abs(outers[region] - here)
        # shares[k] is P(the run reaches k bases beyond the anchor).
        shares = np.empty(farthest + 1)
        shares[0], count = 1.0, 1
        while count <= farthest and shares[count - 1] > NEXT_TO_NOTHING:
            at = here + step * count
            shares[count] = shares[count - 1] * staying(posterior[at], posterior[at - step], odds)
            count += 1
        best, first = -1.0, 0
        for k in range(count):
            held = shares[k] - (shares[k + window] if k + window < count else 0.0)
            if held > best:
                best, first = held, k
        reached = min(first + (window - 1) // 2, count - 1)
        if count > farthest and first + window > farthest and 2.0 * shares[farthest] >= best:
            reached = farthest
        found[region] = here + step * reached
