"""Plain, slow twins of what is said of regions and of what chance gives, beside ``reference``."""

import itertools
import math
from collections.abc import Iterable, Sequence

from tests.reference import MISSING, Bases, Parameters, Piece, all_paths

__all__ = [
    "brute_reach",
    "plain_chain_bases",
    "plain_limits",
    "plain_pairs",
    "plain_settled",
    "plain_significance",
    "plain_staying",
]


def plain_pairs(bases: Bases, start: int, end: int) -> list[list[int]]:
    """Count neighbours x, y in [start, end), round the end if need be; the last has none."""
    counts = [[0] * 5 for _ in range(5)]
    inside = [int(bases[at % len(bases)]) for at in range(start, end)]
    for x, y in itertools.pairwise([*inside, MISSING]):
        counts[x][y] += 1
    return counts


def brute_reach(p: Parameters, piece: Piece, state: int, anchor: int, step: int) -> list[float]:
    """Return P(the run of a state around an anchor reaches k bases on | anchor in the state).

    Item k counts the paths that are in the state from the anchor to the base k steps away.
    """
    reached = [0.0] * len(piece.bases)
    for path, factors in all_paths(p, piece):
        at, far = anchor, 0
        while 0 <= at < len(path) and path[at] == state:
            reached[far] += math.prod(factors)
            at, far = at + step, far + 1
    return [value / reached[0] for value in reached]


def plain_staying(there: float, here: float, odds: float) -> float:
    """Return P(in the state there | in it here): margins and odds ratio, solved by halving."""
    if math.isinf(odds):
        return min(there, here) / here
    low, high = max(0.0, there + here - 1), min(there, here)
    for _ in range(200):
        both = (low + high) / 2
        # The odds ratio of the table grows with the probability of both.
        if both * (1 - there - here + both) < odds * (there - both) * (here - both):
            low = both
        else:
            high = both
    return (low + high) / 2 / here


def plain_limits(
    posterior: Sequence[float],
    closed: bool,
    core: tuple[int, int],
    step: int,
    odds: float,
    tail: float,
    reach: int,
) -> tuple[int, int]:
    """Return the lower and higher limit of a region's start (step -1) or end (step 1).

    The region is [core[0], core[1]), on a circle perhaps beyond its ends.
    """
    n = len(posterior)
    inside = core[0] if step < 0 else core[1] - 1
    within = [at for at in range(inside, inside - step * reach, -step) if core[0] <= at < core[1]]
    best = max(posterior[at % n] for at in within)
    near = far = at = next(at for at in within if posterior[at % n] >= 0.99 * best)
    reached = 1.0
    while abs(at + step - inside) <= min(reach, n - 1) or at + step in within:
        if not closed and not 0 <= at + step < n:
            break
        reached *= plain_staying(posterior[(at + step) % n], posterior[at % n], odds)
        if reached <= tail:
            break
        at += step
        far = at
        if reached >= 1 - tail:
            near = at
    return (far, near) if step < 0 else (near + 1, far + 1)


def plain_chain_bases(
    table: list[list[float]], factors: list[float], window: int, order: int, place: int,
    uniforms: Iterable[float],
) -> list[int]:  # fmt: skip
    """Draw bases one by one: a base is the first whose cumulative probability exceeds its number.

    Behind its context, as far back as there are bases, C and G weigh ``factor`` times as much,
    and the weights of all four are divided by their sum.
    """
    bases: list[int] = []
    for at, uniform in enumerate(uniforms):
        context = bases[-order:] if order else []
        row = (4 ** len(context) - 1) // 3
        for position, base in enumerate(reversed(context)):
            row += base * 4**position
        factor = factors[(place + at) // window]
        a, c, g, t = table[row]
        weights = [a, factor * c, factor * g, t]
        reached = uniform * (weights[0] + weights[1] + weights[2] + weights[3])
        total, drawn = 0.0, 0
        for base in range(3):
            total += weights[base]
            if reached >= total:
                drawn = base + 1
        bases.append(drawn)
    return bases


def plain_significance(
    real: Sequence[float], null: Sequence[float], ratio: float
) -> list[tuple[float, float, float]]:
    """Return E, p and q of each real score, as they are defined."""

    def by_chance(threshold: float) -> float:
        return (1 + sum(score >= threshold for score in null)) * ratio

    found = []
    for own in real:
        shares = [
            by_chance(threshold) / sum(score >= threshold for score in real)
            for threshold in real
            if threshold <= own
        ]
        chance = by_chance(own)
        found.append((chance, 1 - math.exp(-chance), min(1.0, *shares)))
    return found


def plain_settled(
    posterior: Sequence[float],
    core: tuple[int, int],
    step: int,
    odds: float,
    window: int,
) -> int:
    """Return the start (step -1) or end (step 1) of a region of an open contig.

    That is the middle of the bases that most probably hold the outermost base of the run, but
    the contig's last one if half of it lies there.
    """
    inside, inner = (core[0], core[1] - 1) if step < 0 else (core[1] - 1, core[0])
    within = list(range(inside, inner - step, -step))
    best = max(posterior[at] for at in within)
    anchor = next(at for at in within if posterior[at] >= 0.99 * best)
    path = list(range(anchor, -1 if step < 0 else len(posterior), step))
    reached = [1.0]
    for one, other in itertools.pairwise(path):
        reached.append(reached[-1] * plain_staying(posterior[other], posterior[one], odds))
    outermost = [x - y for x, y in itertools.pairwise([*reached, 0.0])]
    held = [math.fsum(outermost[k : k + window]) for k in range(len(path))]
    first = next(k for k, value in enumerate(held) if value > max(held) - 1e-9)
    middle = path[min(first + (window - 1) // 2, len(path) - 1)]
    if outermost[-1] >= held[first] / 2 and first + window >= len(path):
        middle = path[-1]
    return middle if step < 0 else middle + 1
