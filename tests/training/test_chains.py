"""Chains by counting: the closed form, its probabilities, and what training makes of it."""

import itertools
import json
from fractions import Fraction
from math import log
from pathlib import Path

import numpy as np
import pytest

from hmmseg.cli import main
from hmmseg.errors import LabelError, TrainingError
from hmmseg.inference.likelihood import log_likelihood
from hmmseg.inference.streams import Corpus
from hmmseg.model import load_model
from hmmseg.sequence.alphabet import encode
from hmmseg.training.baum_welch import fit
from hmmseg.training.chains import chain_of_words, fit_chain
from hmmseg.training.labelled import labelled_chains, labelled_model
from hmmseg.training.restarts import Plan, fit_restarts
from tests.reference import Piece
from tests.strategies import contig_of, contigs_of, segmented_bases

CODES = {"A": 0, "C": 1, "G": 2, "T": 3, "N": 4}


def piece(text: str, closed: bool = False) -> Piece:
    return Piece(np.array([CODES[letter] for letter in text], dtype=np.uint8), closed)


def test_conditionals_are_ratios_of_counts() -> None:
    """AACAATAACN: after AA stand C, T, C; after AC an A and a missing base; and so on."""
    model = fit_chain([contig_of(piece("AACAATAACN"))], 2, symmetric=False).model
    after_aa = model.joint[0, 0:4] / model.joint[0, 0:4].sum()
    assert after_aa.tolist() == pytest.approx([0, 2 / 3, 0, 1 / 3], abs=1e-15)
    assert model.joint[0, 4:8] / model.joint[0, 4:8].sum() == pytest.approx([1, 0, 0, 0])


@pytest.mark.parametrize("symmetric", [False, True])
@pytest.mark.parametrize("order", range(9))
def test_training_one_state_counts(order: int, symmetric: bool) -> None:
    """``train --states 1`` is the closed form, to the last bit, and needs no iteration."""
    rng = np.random.default_rng(order)
    contigs = contigs_of([Piece(segmented_bases(rng, 3000, 0.02)) for _ in range(3)])
    corpus = Corpus(contigs, order, symmetric and order > 0)
    found = fit_restarts(Plan(states=1, order=order, symmetric=symmetric, restarts=5), corpus)
    chain = fit_chain(contigs, order, symmetric).model
    assert found.model.joint.tobytes() == chain.joint.tobytes()
    assert found.model.transitions.tolist() == [[1.0]]
    assert [len(one.trace) for one in found.fits] == [1]
    assert found.fits[0].trace[0] == pytest.approx(
        float(log_likelihood(found.model, contigs).sum()), rel=1e-12
    )


@pytest.mark.parametrize("symmetric", [False, True])
@pytest.mark.parametrize("order", range(4))
def test_iteration_stays_where_counting_is(order: int, symmetric: bool) -> None:
    """On circles the closed form is the maximum, so Baum-Welch cannot leave it."""
    rng = np.random.default_rng(order)
    contigs = contigs_of([Piece(segmented_bases(rng, 5000), closed=True)])
    chain = fit_chain(contigs, order, symmetric)
    again = fit(chain.model, Corpus(contigs, order, chain.model.both_strands))
    assert again.model.joint == pytest.approx(chain.model.joint, abs=1e-12)
    assert again.log_likelihood <= chain.log_likelihood + 1e-9


@pytest.mark.parametrize("order", [0, 1, 2])
@pytest.mark.parametrize("closed", [False, True])
def test_score_is_a_product_of_conditionals(order: int, closed: bool) -> None:
    """Fractions, multiplied base by base, with a context that shortens behind a missing base."""
    weights = [Fraction(1 + (7 * word) % 11) for word in range(4 ** (order + 1))]
    model = chain_of_words(np.array([float(w) for w in weights]), order, symmetric=False)
    words = ["".join(w) for w in itertools.product("ACGT", repeat=order + 1)]
    text = "GATTACANCAGT"

    def mass(ending: str) -> Fraction:
        chosen = [w for word, w in zip(words, weights, strict=True) if word.endswith(ending)]
        return sum(chosen, Fraction(0))

    product = Fraction(1)
    around = text[-order:] + text if closed and order else text
    for at in range(len(around) - len(text), len(around)):
        if around[at] == "N":
            continue
        context = around[max(0, at - order) : at].rpartition("N")[2]
        product *= mass(context + around[at]) / sum(mass(context + base) for base in "ACGT")
    found = float(log_likelihood(model, [contig_of(piece(text, closed))])[0])
    assert found == pytest.approx(log(product), rel=1e-13)


def test_symmetric_counts_are_of_both_strands() -> None:
    model = fit_chain([contig_of(piece("AACG"))], 1, symmetric=True).model
    # AA, AC, CG and their mirror images TT, GT, CG.
    wanted = np.zeros((4, 4))
    wanted[0, 0] = wanted[3, 3] = wanted[0, 1] = wanted[2, 3] = 1 / 6
    wanted[1, 2] = 2 / 6
    assert model.joint.reshape(4, 4) == pytest.approx(wanted, abs=1e-15)


def test_words_at_the_beginning_only_are_not_impossible() -> None:
    """CA stands nowhere else, so its count goes to the words of three that end in it."""
    contigs = [contig_of(piece("CAGGTTGG"))]
    chain = fit_chain(contigs, 2, symmetric=False)
    assert np.isfinite(chain.log_likelihood)
    assert float(log_likelihood(chain.model, contigs)[0]) == pytest.approx(chain.log_likelihood)
    assert chain.model.joint[0, [4 + 16 * base for base in range(4)]].min() > 0


def test_sequence_without_a_word_cannot_be_counted() -> None:
    with pytest.raises(TrainingError, match="4 known bases"):
        fit_chain([contig_of(piece("ACNACGNAC"))], 3, symmetric=False)


def test_train_command_writes_the_closed_form(tmp_path: Path) -> None:
    text = "ACGTTGCATTAGGCATCCATGCA" * 5
    (tmp_path / "s.fa").write_text(f">one\n{text}\n")
    arguments = ["train", "s.fa", "--states", "1", "--order", "1", "--stranded"]
    arguments = [str(tmp_path / a) if a == "s.fa" else a for a in arguments]
    assert main([*arguments, "--output", str(tmp_path / "c.json")]) == 0
    written = load_model(tmp_path / "c.json")
    chain = fit_chain([contig_of(Piece(encode(text)))], 1, symmetric=False).model
    assert written.joint.tobytes() == chain.joint.tobytes()
    history = json.loads((tmp_path / "c.json").read_text())["training"]
    assert (history["iterations"], history["converged"]) == (0, True)


TRUTH = [np.array([[2, 6]])]


def test_labelled_chains_count_words_on_one_side() -> None:
    """In AA|CGCG|TT stand CG, GC, CG inside, AA and TT outside; AC and GT are on neither."""
    region, background = labelled_chains([contig_of(piece("AACGCGTT"))], TRUTH, 1, False)
    assert region.joint.reshape(4, 4)[[1, 2], [2, 1]].tolist() == [2 / 3, 1 / 3]
    assert background.joint.reshape(4, 4)[[0, 3], [0, 3]].tolist() == [0.5, 0.5]
    assert (region.names, background.names) == (("region",), ("background",))
    assert (region.reported, background.reported) == ((True,), (False,))


def test_labelled_model_counts_changes() -> None:
    model = labelled_model([contig_of(piece("AACGCGTT"))], TRUTH, 0, False, 4.0)
    # One change each way and half a count more, in four bases of each kind and one more.
    assert model.transitions.tolist() == [[0.7, 0.3], [0.3, 0.7]]
    assert model.joint.tolist() == [[3 / 8, 1 / 8, 1 / 8, 3 / 8], [1 / 8, 3 / 8, 3 / 8, 1 / 8]]


@pytest.mark.parametrize("truth", [np.empty((0, 2), np.int64), np.array([[0, 8]])])
def test_labels_of_one_class(truth: np.ndarray) -> None:
    with pytest.raises(LabelError, match="one class only"):
        labelled_chains([contig_of(piece("AACGCGTT"))], [truth], 0, False)
