"""Bits of each base, joint probabilities of paths, and starts of chains."""

import numpy as np
import pytest

from hmmseg.inference import predictive
from hmmseg.inference.chains import ChainScorer
from hmmseg.inference.joint import joint_parts
from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.predictive import predictive_bits
from hmmseg.model.chain import chain_machine
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.training.chains import fit_chain
from tests.reference import Piece, log_path_probability
from tests.strategies import contig_of, model_of, random_parameters, segmented_bases

KINDS = ["free", "stationary", "symmetric"]


@pytest.mark.parametrize("states", [1, 2, 3])
@pytest.mark.parametrize("order", [0, 2])
@pytest.mark.parametrize("kind", ["free", "stationary"])
def test_bits_are_what_one_more_base_costs(states: int, order: int, kind: str) -> None:
    """The likelihood of every prefix falls by the bits of its last base."""
    rng = np.random.default_rng([states, order])
    model = model_of(random_parameters(rng, states, order, kind))
    bases = segmented_bases(rng, 60, missing=0.1)
    prefixes = [contig_of(Piece(bases[:size])) for size in range(1, 61)]
    logs = np.concatenate(([0.0], log_likelihood(model, prefixes)))
    wanted = -np.diff(logs) / np.log(2)
    assert predictive_bits(model, contig_of(Piece(bases))) == pytest.approx(wanted, abs=1e-10)


@pytest.mark.parametrize("closed", [False, True])
@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("order", [0, 1])
def test_bits_add_up(order: int, kind: str, closed: bool, monkeypatch: pytest.MonkeyPatch) -> None:
    rng = np.random.default_rng(order)
    model = model_of(random_parameters(rng, 3, order, kind))
    contig = contig_of(Piece(segmented_bases(rng, 900, missing=0.03), closed))
    total = -float(log_likelihood(model, [contig])[0]) / np.log(2)
    whole = predictive_bits(model, contig)
    assert whole.sum() == pytest.approx(total, rel=1e-11)
    # Shorter blocks give the same bits.
    monkeypatch.setattr(predictive, "_LONGEST_BLOCK", 70)
    assert predictive_bits(model, contig) == pytest.approx(whole, abs=1e-10)


def test_bits_of_a_circle_are_ratios_of_traces() -> None:
    rng = np.random.default_rng(7)
    p = random_parameters(rng, 2, 0, "stationary")
    bases = segmented_bases(rng, 12)
    steps = [p.transitions * p.joint[:, base] for base in bases]
    masses = []
    for known in range(13):
        parts = steps[:known] + [p.transitions] * (12 - known)
        masses.append(np.trace(np.linalg.multi_dot(parts)))
    wanted = -np.diff(np.log2(masses))
    found = predictive_bits(model_of(p), contig_of(Piece(bases, closed=True)))
    assert found == pytest.approx(wanted, abs=1e-12)


def test_strands_of_a_symmetric_model_mirror_each_other() -> None:
    rng = np.random.default_rng(8)
    model = model_of(random_parameters(rng, 2, 2, "symmetric"))
    bases = segmented_bases(rng, 200, missing=0.05)
    there = predictive_bits(model, contig_of(Piece(bases)))
    back = predictive_bits(model, contig_of(Piece(reverse_complement(bases))))
    assert there == pytest.approx(back[::-1], abs=1e-12)


@pytest.mark.parametrize("closed", [False, True])
@pytest.mark.parametrize("order", [0, 2])
@pytest.mark.parametrize("kind", KINDS)
def test_parts_of_a_path(kind: str, order: int, closed: bool) -> None:
    rng = np.random.default_rng([order, 3])
    p = random_parameters(rng, 3, order, kind)
    bases = segmented_bases(rng, 80, missing=0.05)
    path = rng.integers(0, 3, 80).astype(np.uint8)
    parts = joint_parts(model_of(p), contig_of(Piece(bases, closed)), path)
    wanted = log_path_probability(p, Piece(bases, closed), tuple(path))
    if kind == "symmetric" and order > 0:
        other = Piece(reverse_complement(bases), closed)
        wanted = (wanted + log_path_probability(p, other, tuple(path[::-1]))) / 2
    assert parts.total == pytest.approx(wanted, rel=1e-12)
    if not closed:
        assert parts.start == pytest.approx(np.log(p.start[path[0]]))
        steps = np.log(p.transitions[path[:-1], path[1:]]).sum()
        assert parts.transitions == pytest.approx(steps)


@pytest.mark.parametrize("symmetric", [False, True])
@pytest.mark.parametrize("order", [0, 1, 3])
def test_starts_of_a_chain(order: int, symmetric: bool) -> None:
    rng = np.random.default_rng(order)
    bases = segmented_bases(rng, 400)
    model = fit_chain([contig_of(Piece(segmented_bases(rng, 5000)))], order, symmetric).model
    contig = contig_of(Piece(bases))
    counted, stationary, free = (
        ChainScorer(model, start).parts(contig) for start in ("counted", "stationary", "free")
    )
    assert sum(counted) == pytest.approx(float(log_likelihood(model, [contig])[0]), rel=1e-12)
    assert counted.steps == stationary.steps == free.steps
    assert free.start == 0
    machine = chain_machine(model)
    strands = [bases, reverse_complement(bases)] if symmetric and order else [bases]
    shares = [
        np.log(machine.stationary[int("0" + "".join(map(str, s[:order])), 4)]) for s in strands
    ]
    assert stationary.start == pytest.approx(np.mean(shares) if order else 0.0, abs=1e-9)


def test_a_circle_has_no_start() -> None:
    bases = segmented_bases(np.random.default_rng(1), 300)
    contig = contig_of(Piece(bases, closed=True))
    model = fit_chain([contig], 2, False).model
    parts = [ChainScorer(model, start).parts(contig) for start in ("stationary", "free")]
    assert parts[0] == parts[1]
    assert parts[0].start == 0
