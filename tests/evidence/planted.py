"""Models with islands, and a slow, plain count of planted islands that are seen."""

import numpy as np
from numpy.typing import NDArray

from hmmseg.model import Model
from tests.recursions import log_posterior, posterior_over_strands
from tests.reference import Parameters, Piece, emission
from tests.strategies import parameters_of

__all__ = ["LIMIT_MODELS", "island_model", "plain_share_detected"]


def island_model(
    gc: tuple[float, float], lengths: tuple[float, float], stages: tuple[int, int] = (1, 1)
) -> Model:
    """Order 0, background and island, with these mean lengths of a stage."""
    joint = [[(1 - level) / 2, level / 2, level / 2, (1 - level) / 2] for level in gc]
    leave = [1 / length for length in lengths]
    return Model(
        ("background", "island"), (False, True), 0, True, "stationary",
        np.array([[1 - leave[0], leave[0]], [leave[1], 1 - leave[1]]]), np.array(joint),
        stages=stages,
    )  # fmt: skip


def _words_model() -> Model:
    """Order 1: the island differs in its use of words more than in its composition.

    Each state's pairs are those of a long circle read on both strands, so that every base
    begins as many pairs as it ends.
    """
    random = np.random.default_rng(3)
    joint = []
    for gc, kept in ((0.42, 0.3), (0.55, 1.0)):
        strong = random.random(40_000) < gc
        bases = np.where(strong, 1, 0) + random.integers(0, 2, 40_000) * np.where(strong, 1, 3)
        after_c = (np.roll(bases, 1) == 1) & (bases == 2)
        bases = bases[~after_c | (random.random(40_000) < kept)]
        pairs = np.zeros((4, 4))
        np.add.at(pairs, (bases, np.roll(bases, -1)), 1)
        pairs += pairs[::-1, ::-1].T
        joint.append((pairs / pairs.sum()).ravel())
    return Model(
        ("background", "island"), (False, True), 1, True, "stationary",
        np.array([[0.9998, 0.0002], [0.002, 0.998]]), np.array(joint),
    )  # fmt: skip


LIMIT_MODELS = {
    "strong": island_model((0.3, 0.7), (5000, 300)),
    "mild": island_model((0.38, 0.6), (10_000, 800)),
    "short": island_model((0.45, 0.75), (2000, 100)),
    "words": _words_model(),
}


def plain_share_detected(model: Model, length: int, flank: int, trials: int, seed: int) -> float:
    """Plant one island in each of so many sequences; return how many are seen, as a share."""
    p = parameters_of(model)
    random = np.random.default_rng(seed)
    inside = slice(flank, flank + length)
    states = np.zeros(length + 2 * flank, int)
    states[inside] = 1
    seen = 0
    for _ in range(trials):
        bases = _plain_draw(p, states, random)
        posterior = posterior_over_strands(p, Piece(bases), log_posterior)
        seen += bool(posterior[inside, 1].max() >= 0.5)
    return seen / trials


def _plain_draw(p: Parameters, states: NDArray[np.int_], random: np.random.Generator) -> list[int]:
    bases: list[int] = []
    for state in states:
        context = tuple(bases[-p.order :]) if p.order else ()
        chances = [emission(p.joint[state], context, base) for base in range(4)]
        bases.append(int(random.choice(4, p=np.array(chances) / sum(chances))))
    return bases
