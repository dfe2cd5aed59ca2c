"""What the figures of a model show, against plain arithmetic."""

import math

import numpy as np
import pytest

from hmmseg.model import Model
from hmmseg.report.drawing import svg_of
from hmmseg.report.model_figures import against_background, draw_overview


def chain(gc: float) -> list[float]:
    half = {"A": (1 - gc) / 2, "C": gc / 2, "G": gc / 2, "T": (1 - gc) / 2}
    return [half[x] * half[y] for x in "ACGT" for y in "ACGT"]


def model(symmetric: bool) -> Model:
    return Model(
        names=("plain", "rich", "poor"),
        reported=(False, True, False),
        order=1,
        symmetric=symmetric,
        start_kind="stationary",
        transitions=np.array([[0.98, 0.01, 0.01], [0.02, 0.97, 0.01], [0.02, 0.01, 0.97]]),
        joint=np.array([chain(0.4), chain(0.6), chain(0.3)]),
    )


def test_bars_are_log_ratios_to_the_background() -> None:
    own = model(symmetric=True)
    share = own.shares
    rest = (share[0] * own.joint[0] + share[2] * own.joint[2]) / (share[0] + share[2])
    found = dict(against_background(own, 1))
    words = [x + y for x in "ACGT" for y in "ACGT"]
    for name, bits in found.items():
        word = words.index(name.split("/")[0])
        assert bits == pytest.approx(math.log2(own.joint[1][word] / rest[word]), abs=1e-12)
    # Ten words of two bases are left when strands are alike.
    assert len(found) == 10
    assert "AC/GT" in found
    assert list(found.values()) == sorted(found.values(), reverse=True)


def test_each_strand_has_words_of_its_own() -> None:
    assert len(against_background(model(symmetric=False), 1)) == 16


def test_background_is_compared_with_the_whole() -> None:
    own = model(symmetric=True)
    whole = (own.shares[:, None] * own.joint).sum(axis=0)
    found = dict(against_background(own, 0))
    assert found["CG"] == pytest.approx(math.log2(own.joint[0][6] / whole[6]), abs=1e-12)


def test_gaps_of_the_overview_stay_white() -> None:
    """The strip of a record that is nothing but a gap has no ink."""
    length = 1000
    full, empty = np.full(100, 1.0), np.full(100, np.nan)
    one, other = (
        svg_of(draw_overview([("a", length, [track])], ["#1f5f8b"])) for track in (full, empty)
    )
    assert one != other
    assert one == svg_of(draw_overview([("a", length, [full])], ["#1f5f8b"]))
