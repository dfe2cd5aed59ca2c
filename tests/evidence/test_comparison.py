"""The comparison on small sequence, and how verdicts are worded. See tests/slow for 5 Mb."""

import numpy as np
import pytest

from hmmseg.errors import LabelError, SequenceError
from hmmseg.evidence.bootstrap import Interval
from hmmseg.evidence.comparison import best_labelled_order
from hmmseg.evidence.heldout import in_place
from hmmseg.evidence.pieces import cut, deal
from hmmseg.evidence.tuning import tune
from hmmseg.evidence.turns import Settings
from hmmseg.evidence.verdicts import (
    CHAIN_BETTER,
    HMM_BETTER,
    NO_DIFFERENCE,
    verdict_on_bits,
    verdict_on_f1,
)
from hmmseg.regions.windows import ChainPair
from hmmseg.training.labelled import labelled_chains
from tests.evidence.drawn import drawn_contigs, drawn_pieces, plain_pieces
from tests.evidence.turned import accuracy_in_turns, blind_in_turns
from tests.reference import Piece
from tests.strategies import contig_of

SETTINGS = Settings(folds=3, replicates=200, restarts=1, max_order=2, max_hmm_order=1)


@pytest.mark.parametrize(
    ("difference", "answer", "equivalent"),
    [
        (Interval(0.05, 0.03, 0.07), HMM_BETTER, False),
        (Interval(-0.05, -0.07, -0.03), CHAIN_BETTER, False),
        (Interval(0.05, -0.01, 0.11), NO_DIFFERENCE, False),
        (Interval(0.001, -0.001, 0.003), NO_DIFFERENCE, True),
        (Interval(0.005, 0.003, 0.007), NO_DIFFERENCE, True),
        (Interval(0.03, 0.001, 0.06), HMM_BETTER, False),
    ],
)
def test_verdict_on_f1(difference: Interval, answer: str, equivalent: bool) -> None:
    found = verdict_on_f1(difference, 0.9, 0.9 - difference.value)
    assert (found.answer, found.equivalent) == (answer, equivalent)
    assert f"{difference.value:+.4f}" in found.words


@pytest.mark.parametrize(
    ("gain", "price", "answer"),
    [
        (Interval(0.01, 0.009, 0.011), 0.0001, HMM_BETTER),
        (Interval(0.00005, 0.00001, 0.0001), 0.0001, NO_DIFFERENCE),
        (Interval(0.00005, -0.00001, 0.0001), 0.00001, NO_DIFFERENCE),
        (Interval(-0.0001, -0.0002, -0.00001), 0.00001, CHAIN_BETTER),
    ],
)
def test_verdict_on_bits(gain: Interval, price: float, answer: str) -> None:
    found = verdict_on_bits(gain, price, "chain of order 0", "HMM of 2 states and order 0")
    assert found.answer == answer
    assert found.words.startswith("No hidden state needed") == (answer != HMM_BETTER)


def test_short_regions_want_the_hmm() -> None:
    pieces = drawn_pieces(2, 600_000, 400, 4_000, (0.40, 0.65), contigs=30)
    found = accuracy_in_turns(pieces, deal(pieces, 3, True), 0, SETTINGS)
    hmm, classifier, difference = found.measures["f1"]
    assert hmm.value > 0.9
    assert difference.value == pytest.approx(hmm.value - classifier.value)
    assert difference.low > 0
    assert found.verdict.answer == HMM_BETTER
    assert found.measures["edge_median"][0].value < found.measures["edge_median"][1].value
    assert found.bases == 600_000
    assert found.true_regions == sum(len(piece.truth) for piece in pieces)


def test_threads_do_not_show() -> None:
    pieces = drawn_pieces(3, 100_000, 400, 3_000, (0.40, 0.65), contigs=6)
    one, two = (
        accuracy_in_turns(
            pieces, deal(pieces, 3, True), 1, Settings(replicates=50, threads=threads)
        )
        for threads in (1, 2)
    )
    assert one.measures == two.measures
    assert one.tuned == two.tuned


def test_no_regions_need_no_hidden_state() -> None:
    pieces = plain_pieces(1, 400_000, 40)
    found = blind_in_turns(pieces, deal(pieces, 2, False), SETTINGS)
    assert found.verdict.words.startswith("No hidden state needed")
    assert [kind.name for kind, _ in found.rows][::3] == [
        "chain of order 0",
        "HMM of 2 states and order 0",
    ]
    # -(0.6 log2 0.3 + 0.4 log2 0.2): nothing can do better for long.
    assert found.rows[0][1].value == pytest.approx(1.97095, abs=2e-3)


def test_clear_regions_need_one() -> None:
    """Half of the sequence at 30 % GC, half at 70 %: no chain can know where it stands."""
    pieces = drawn_pieces(4, 300_000, 3_000, 3_000, (0.3, 0.7), contigs=20)
    found = blind_in_turns(pieces, deal(pieces, 2, False), SETTINGS)
    assert found.verdict.answer == HMM_BETTER
    assert found.gain.low > 0.05
    assert found.agreement is not None
    assert found.agreement.mcc > 0.9
    assert sorted(found.model.gc) == pytest.approx([0.3, 0.7], abs=0.02)


def test_values_of_folds_come_back_to_their_pieces() -> None:
    folds = np.array([1, 0, 2, 1, 0])
    parts = [np.array([10.0, 11.0]), np.array([20.0, 21.0]), np.array([30.0])]
    assert in_place(folds, parts).tolist() == [20, 10, 30, 21, 11]


def test_order_is_the_one_that_made_the_sequence() -> None:
    pieces = drawn_pieces(5, 100_000, 500, 1_500, (0.3, 0.7), contigs=10)
    assert best_labelled_order(pieces, deal(pieces, 2, True), SETTINGS) == 0


def test_tuning_finds_a_threshold_between_the_two() -> None:
    contigs, truth = drawn_contigs(6, 100_000, 1000, 3000, (0.2, 0.8), 4)
    pair = ChainPair(*labelled_chains(contigs, truth, 0, True))
    found = tune(pair, list(zip(contigs, truth, strict=True)))
    assert found.mcc > 0.97
    # Log-odds are two bits a base either way.
    assert abs(found.threshold) < 2 * found.windows.window


def test_fold_with_one_class_only() -> None:
    contigs, truth = drawn_contigs(7, 40_000, 1000, 3000, (0.2, 0.8), 4)
    truth[1:] = [np.empty((0, 2), np.int64)] * 3
    pieces = cut(contigs, 10_000, truth)
    with pytest.raises(LabelError, match="with fold 1 held out, the labels leave one class only"):
        accuracy_in_turns(pieces, np.arange(4), 0, SETTINGS)


def test_cut_and_deal() -> None:
    contigs = [contig_of(Piece(np.zeros(n, np.uint8), closed), f"r{n}")
               for n, closed in ((1000, True), (250, False), (90, False))]  # fmt: skip
    truth = [np.array([[240, 260], [900, 1000]]), np.empty((0, 2), np.int64), np.array([[0, 90]])]
    pieces = cut(contigs, 250, truth)
    assert [len(p.contig) for p in pieces] == [250] * 5 + [90]
    assert not any(p.contig.closed for p in pieces)
    assert [p.truth.tolist() for p in pieces] == [
        [[240, 250]],
        [[0, 10]],
        [],
        [[150, 250]],
        [],
        [[0, 90]],
    ]
    assert [p.contig.start for p in pieces] == [0, 250, 500, 750, 0, 0]
    assert deal(pieces, 2, whole_contigs=False).tolist() == [0, 1, 0, 1, 0, 1]
    assert deal(pieces, 2, whole_contigs=True).tolist() == [0, 0, 0, 0, 1, 1]
    with pytest.raises(SequenceError, match="3 contigs cannot make 4 folds"):
        deal(pieces, 4, whole_contigs=True)
