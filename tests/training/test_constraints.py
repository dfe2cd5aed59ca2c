"""Labels, stages, pseudo-counts and fixed parameters: the objective never falls."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.inference.expectation import expect
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model
from hmmseg.model.contexts import reverse_complement_words
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from hmmseg.training.baum_welch import fit
from hmmseg.training.constraints import NO_PRIOR, NOTHING_FIXED, Fixed, Prior
from hmmseg.training.maximisation import log_prior, maximise

Labels = list[NDArray[np.uint8]]


def random_model(
    random: np.random.Generator, states: int, order: int, kind: str, stages: tuple[int, ...]
) -> Model:
    """A model of any kind: 'free', 'stationary' or 'symmetric'."""
    joint = random.dirichlet(np.ones(4 ** (order + 1)), states)
    flow = random.random((states, states))
    stay = random.uniform(0.7, 0.99, states)
    if kind == "symmetric":
        joint = (joint + joint[:, reverse_complement_words(order + 1)]) / 2
        flow = flow + flow.T
    np.fill_diagonal(flow, 0)
    leaving = flow / flow.sum(axis=1, keepdims=True) * (1 - stay)[:, None]
    return Model(
        names=tuple("abcd"[:states]),
        reported=(True,) * states,
        order=order,
        symmetric=kind == "symmetric",
        start_kind="free" if kind == "free" else "stationary",
        transitions=leaving + np.diag(stay),
        joint=joint,
        start=np.full(states, 1 / states) if kind == "free" else None,
        stages=stages,
    )


def random_contigs(random: np.random.Generator) -> list[Contig]:
    contigs = []
    for number in range(12):
        length = int(random.integers(60, 400))
        bases = random.integers(0, 4, length).astype(np.uint8)
        bases[random.random(length) < 0.03] = 4
        contigs.append(Contig(f"r{number}", 0, bases, bool(random.random() < 0.3), length))
    return contigs


def random_labels(random: np.random.Generator, contigs: list[Contig], states: int) -> Labels:
    """A fifth of all stretches of twenty bases has a label."""
    labels = []
    for contig in contigs:
        pieces = len(contig) // 20 + 1
        own = random.integers(1, states + 1, pieces) * (random.random(pieces) < 0.2)
        labels.append(np.repeat(own, 20)[: len(contig)].astype(np.uint8))
    return labels


@given(
    st.integers(0, 10**6),
    st.integers(2, 3),
    st.integers(0, 2),
    st.sampled_from(["free", "stationary", "symmetric"]),
    st.booleans(),
    st.booleans(),
    st.sampled_from([(), ("a.length",), ("transitions", "b.emissions"), ("start",)]),
)
@settings(max_examples=25)
def test_objective_never_falls(
    seed: int,
    states: int,
    order: int,
    kind: str,
    labelled: bool,
    informed: bool,
    names: tuple[str, ...],
) -> None:
    random = np.random.default_rng(seed)
    stages = tuple(int(n) for n in random.integers(1, 4, states))
    model = random_model(random, states, order, kind, stages)
    contigs = random_contigs(random)
    labels = random_labels(random, contigs, states) if labelled else None
    corpus = Corpus(contigs, order, model.both_strands, labels=labels)
    strength = np.full(states, 5.0)
    prior = Prior.around(model, strength, strength) if informed else NO_PRIOR
    fixed = Fixed.named(model, names)
    reached = -np.inf
    for _ in range(6):
        counts = expect(model, corpus)
        objective = counts.log_likelihood + log_prior(model, prior)
        assert objective >= reached - 1e-11 * corpus.bases
        reached = objective
        better = maximise(model, counts, corpus.closed_lengths, prior, fixed)
        for state in fixed.tables:
            assert better.joint[state].tolist() == model.joint[state].tolist()
        for state in fixed.lengths:
            assert_allclose(better.transitions[state, state], model.transitions[state, state])
        if fixed.leaving:
            assert_allclose(better.transitions, model.transitions, rtol=1e-12)
        if fixed.start and kind == "free":
            assert better.start_probabilities.tolist() == model.start_probabilities.tolist()
        model = better


def test_full_labels_give_counts_in_closed_form() -> None:
    random = np.random.default_rng(1)
    model = random_model(random, 2, 1, "free", (1, 1))
    drawn = list(simulate(model, [300, 500], 2))
    contigs = [Contig(f"r{i}", 0, one.bases, False, len(one.bases)) for i, one in enumerate(drawn)]
    labels = [(one.path + 1).astype(np.uint8) for one in drawn]
    found = fit(model, Corpus(contigs, 1, False, labels=labels))
    assert len(found.trace) <= 3
    steps, words = np.zeros((2, 2)), np.zeros((2, 16))
    for one in drawn:
        np.add.at(steps, (one.path[:-1], one.path[1:]), 1)
        np.add.at(words, (one.path[1:], 4 * one.bases[:-1].astype(int) + one.bases[1:]), 1)
    assert_allclose(found.model.transitions, steps / steps.sum(axis=1, keepdims=True), rtol=1e-12)
    starts = np.bincount([one.path[0] for one in drawn], minlength=2) / 2
    assert_allclose(found.model.start_probabilities, starts, atol=1e-12)
    # The two first bases have no context, so that the table is the closed form but for them.
    assert_allclose(found.model.joint, words / words.sum(axis=1, keepdims=True), atol=0.02)


def test_forbidden_transitions_stay_forbidden() -> None:
    random = np.random.default_rng(2)
    transitions = np.array([[0.9, 0.1, 0.0], [0.0, 0.9, 0.1], [0.1, 0.0, 0.9]])
    model = Model(
        names=("a", "b", "c"),
        reported=(True,) * 3,
        order=0,
        symmetric=False,
        start_kind="stationary",
        transitions=transitions,
        joint=random.dirichlet(np.ones(4), 3),
    )
    prior = Prior.around(model, np.full(3, 10.0), np.full(3, 10.0))
    corpus = Corpus(random_contigs(random), 0, False)
    found = fit(model, corpus, max_iterations=5, prior=prior, tolerance=0).model
    assert (found.transitions[transitions == 0] == 0).all()


def test_strong_pseudo_counts_hold_the_parameters() -> None:
    random = np.random.default_rng(3)
    model = random_model(random, 2, 1, "symmetric", (1, 2))
    prior = Prior.around(model, np.full(2, 1e9), np.full(2, 1e9))
    corpus = Corpus(random_contigs(random), 1, True)
    found = fit(model, corpus, max_iterations=3, prior=prior, tolerance=0).model
    assert_allclose(found.transitions, model.transitions, atol=1e-4)
    assert_allclose(found.emissions, model.emissions, atol=1e-4)


def test_unknown_name_is_explained() -> None:
    model = random_model(np.random.default_rng(4), 2, 0, "free", (1, 1))
    with pytest.raises(ModelError, match=r"'c\.length' is no parameter; there are a\.emissions"):
        Fixed.named(model, ("c.length",))
    assert Fixed.named(model, ()) == NOTHING_FIXED
