"""Training recovers the parameters that made a sequence.

Forty seeded simulations of each model; estimates are compared with the truth in units of their
standard deviation over the simulations.
"""

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import t as student_t

from hmmseg.inference.streams import Corpus
from hmmseg.kernels.elementary import log
from hmmseg.model import Model
from hmmseg.model.contexts import reverse_complement_words
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from hmmseg.training.baum_welch import fit

pytestmark = pytest.mark.slow

SEEDS = 40
LENGTH = 400_000


def tables(random: np.random.Generator, levels: list[float], order: int) -> NDArray[np.float64]:
    """Symmetric word tables of the given GC with some preference for words of their own.

    They are the words of a circle on both strands: only then does every word begin as often
    with a context as another ends with it, as it does in sequence, so that a model with these
    tables makes sequence in which both strands are alike.
    """
    joint = []
    for gc in levels:
        preference = random.uniform(0.6, 1.6, 4 ** (order + 1))
        draws = random.random((20_000, 2))
        bases = np.where(draws[:, 0] < gc, 1 + (draws[:, 1] < 0.5), 3 * (draws[:, 1] < 0.5))
        number = np.zeros(len(bases), np.int64)
        for back in range(order, -1, -1):
            number = 4 * number + np.roll(bases, back)
        # Leave out some of the bases that end a word which is not liked.
        kept = bases[random.random(len(bases)) < preference[number]] if order else bases
        joint.append(circle_words(kept, order))
    return np.array(joint)


def circle_words(bases: NDArray[np.int64], order: int) -> NDArray[np.float64]:
    """Shares of the words on both strands of a circle."""
    number = np.zeros(len(bases), np.int64)
    for back in range(order, -1, -1):
        number = 4 * number + np.roll(bases, back)
    words = np.bincount(number, minlength=4 ** (order + 1)) + 0.0
    words = words + words[reverse_complement_words(order + 1)]
    return words / words.sum()


def model_of(states: int, order: int, stages: int) -> Model:
    random = np.random.default_rng(10 * order + states)
    lengths = np.array([400.0, 150.0, 250.0][:states])
    levels = [0.35, 0.6, 0.48][:states]
    stay = 1 - np.array([1, stages, 1][:states]) / lengths
    flow = np.ones((states, states)) - np.eye(states)
    transitions = flow / flow.sum(axis=1, keepdims=True) * (1 - stay)[:, None] + np.diag(stay)
    return Model(
        names=tuple("abc"[:states]),
        reported=(False, True, True)[:states],
        order=order,
        symmetric=True,
        start_kind="stationary",
        transitions=transitions,
        joint=tables(random, levels, order),
        stages=(1, stages, 1)[:states],
    )


MODELS = {
    "2 states, order 0": model_of(2, 0, 1),
    "3 states, order 0, 4 stages": model_of(3, 0, 4),
    "2 states, order 1, 4 stages": model_of(2, 1, 4),
    "2 states, order 3": model_of(2, 3, 1),
}


def parameters(model: Model) -> NDArray[np.float64]:
    """All parameters that are free: logarithms of the chances to leave, and the emissions."""
    leaving = [log(1 - model.transitions[s, s]) for s in range(model.states)]
    flows = [
        model.transitions[s, t] / (1 - model.transitions[s, s])
        for s in range(model.states)
        for t in range(s)
        if model.states > 2
    ]
    first = model.emissions.shape[1] - 1 - 4 ** (model.order + 1)
    return np.concatenate([leaving, flows, model.emissions[:, first:-1].ravel()])


def estimates(model: Model) -> NDArray[np.float64]:
    """Parameters fitted to each simulation, float64[seed, parameter], started at the truth."""
    found = []
    for seed in range(SEEDS):
        (one,) = simulate(model, [LENGTH], seed)
        contig = Contig("one", 0, one.bases, False, LENGTH)
        result = fit(model, Corpus([contig], model.order, model.both_strands, 2), threads=2)
        found.append(parameters(result.model))
    return np.array(found)


def test_parameters_are_recovered() -> None:
    """At least 99 % within 3 standard deviations, and no mean bias after Holm's correction."""
    within, biases = [], []
    for name, model in MODELS.items():
        found = estimates(model)
        spread = found.std(axis=0, ddof=1)
        scores = (found - parameters(model)) / spread
        within.append((np.abs(scores) <= 3).ravel())
        biases.append(np.abs(scores.mean(axis=0)) * np.sqrt(SEEDS))
        print(f"{name}: {np.mean(within[-1]):.4f} within 3 sd, largest bias {biases[-1].max():.2f}")
    assert np.mean(np.concatenate(within)) >= 0.99
    assert max(bias.max() for bias in biases) <= holm_bar(sum(len(bias) for bias in biases))


def holm_bar(count: int) -> float:
    """Largest standardised bias that Holm's step-down correction of 3 sd allows.

    It compares the largest of ``count`` with the level divided by ``count``, and goes on to the
    next only if that one is out. Biases are in units of an estimated standard deviation.
    """
    level = 2 * student_t.sf(3.0, SEEDS - 1)
    return float(student_t.isf(level / (2 * count), SEEDS - 1))
