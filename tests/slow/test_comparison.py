"""Verdicts on 5 Mb whose truth is known: long regions, short regions, and none."""

import pytest

from hmmseg.evidence.pieces import deal
from hmmseg.evidence.turns import Settings
from hmmseg.evidence.verdicts import HMM_BETTER, MARGIN, NO_DIFFERENCE
from tests.evidence.drawn import drawn_pieces, plain_pieces
from tests.evidence.turned import accuracy_in_turns, blind_in_turns

pytestmark = pytest.mark.slow

GC = (0.40, 0.65)
"""Regions differ from what surrounds them by 25 points."""


def test_long_regions_make_no_difference() -> None:
    """Of 20 kb: the interval of the difference in F1 lies within the margin."""
    pieces = drawn_pieces(1, 5_000_000, 20_000, 30_000, GC)
    found = accuracy_in_turns(pieces, deal(pieces, 5, True), 0, Settings())
    difference = found.measures["f1"][2]
    print(found.verdict.words)
    assert -MARGIN < difference.low <= difference.high < MARGIN
    assert found.verdict.answer == NO_DIFFERENCE


def test_short_regions_want_the_hmm() -> None:
    """Of 400 bases: the HMM is ahead beyond its interval."""
    pieces = drawn_pieces(2, 5_000_000, 400, 4_000, GC)
    found = accuracy_in_turns(pieces, deal(pieces, 5, True), 0, Settings())
    print(found.verdict.words)
    assert found.measures["f1"][2].low > 0
    assert found.verdict.answer == HMM_BETTER


def test_without_regions_no_hidden_state_is_needed() -> None:
    """In at least nine of ten draws of independent bases."""
    settings = Settings(folds=2, restarts=2, max_order=3, max_hmm_order=1)
    right = 0
    for seed in range(10):
        pieces = plain_pieces(seed, 5_000_000)
        found = blind_in_turns(pieces, deal(pieces, 2, False), settings)
        print(seed, found.verdict.words)
        right += found.verdict.words.startswith("No hidden state needed")
    assert right >= 9
