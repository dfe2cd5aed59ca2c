"""Island criteria, against a slow and plain implementation in fractions, edges included."""

import random
from fractions import Fraction

import numpy as np
import pytest

from hmmseg.regions.composition import counts_of_record
from hmmseg.regions.islands import GARDINER_GARDEN, TAKAI_JONES, island_criteria
from hmmseg.sequence.reading import record_from_text


def plain(letters: str) -> tuple[str, str]:
    """Apply the criteria as published, letter by letter and in exact fractions.

    Gardiner-Garden & Frommer 1987: length >= 200, GC > 50 %, observed/expected > 0.6.
    Takai & Jones 2002: length >= 500, GC >= 55 %, observed/expected >= 0.65.
    Observed/expected = (number of CpG x N) / (number of C x number of G), N the known bases.
    """
    letters = letters.upper()
    known = sum(x in "ACGT" for x in letters)
    c = sum(x == "C" for x in letters)
    g = sum(x == "G" for x in letters)
    cpg = sum(letters[i : i + 2] == "CG" for i in range(len(letters)))
    if known == 0 or c == 0 or g == 0:
        return "no", "no"
    gc, ratio = Fraction(c + g, known), Fraction(cpg * known, c * g)
    older = known >= 200 and gc > Fraction(50, 100) and ratio > Fraction(60, 100)
    newer = known >= 500 and gc >= Fraction(55, 100) and ratio >= Fraction(65, 100)
    return "yes" if older else "no", "yes" if newer else "no"


def criteria(letters: str) -> tuple[str, str]:
    counts = counts_of_record(
        record_from_text("r", letters), np.array([0]), np.array([len(letters)])
    )
    table = island_criteria(counts.regions)
    return table[GARDINER_GARDEN][0], table[TAKAI_JONES][0]


def region(bases: int, c: int, g: int, cpg: int) -> str:
    """Make a region of so many bases, C, G and CpG; the rest is A."""
    text = "CG" * cpg + "A" + "G" * (g - cpg) + "A" + "C" * (c - cpg)
    assert len(text) <= bases
    text += "A" * (bases - len(text))
    found = (len(text), text.count("C"), text.count("G"), text.count("CG"))
    assert found == (bases, c, g, cpg)
    return text


EDGES = [
    # bases, C, G, CpG, Gardiner-Garden & Frommer, Takai & Jones
    ("199 bases", 199, 60, 60, 20, "no", "no"),
    ("200 bases", 200, 60, 60, 20, "yes", "no"),
    ("exactly half C and G", 200, 50, 50, 20, "no", "no"),
    ("one base more", 200, 51, 50, 20, "yes", "no"),
    ("exactly 0.6", 300, 100, 60, 12, "no", "no"),  # 12 x 300 = 0.6 x 6000
    ("one CpG more", 300, 100, 60, 13, "yes", "no"),
    ("no C", 600, 0, 400, 0, "no", "no"),
    ("no G", 600, 400, 0, 0, "no", "no"),
    ("499 bases", 499, 150, 150, 60, "yes", "no"),
    ("500 bases", 500, 150, 150, 60, "yes", "yes"),
    ("exactly 55 %", 500, 137, 138, 60, "yes", "yes"),
    ("one base less", 500, 137, 137, 60, "yes", "no"),
    ("exactly 0.65", 600, 200, 180, 39, "yes", "yes"),  # 39 x 600 = 0.65 x 36000
    ("one CpG less", 600, 200, 180, 38, "yes", "no"),
]


@pytest.mark.parametrize("edge", EDGES, ids=[edge[0] for edge in EDGES])
def test_edges(edge: tuple[str, int, int, int, int, str, str]) -> None:
    _, bases, c, g, cpg, older, newer = edge
    text = region(bases, c, g, cpg)
    assert criteria(text) == plain(text) == (older, newer)


def test_missing_bases_count_for_nothing() -> None:
    text = region(200, 60, 60, 20)
    assert criteria(text[:-1] + "N") == ("no", "no")
    assert criteria(text + "N") == ("yes", "no")
    assert criteria("N" * 600) == ("no", "no")


def test_a_thousand_random_regions() -> None:
    drawn = random.Random(1)
    found = []
    for _ in range(1000):
        length = drawn.choice([drawn.randint(1, 1200), 199, 200, 201, 499, 500, 501])
        weights = [drawn.random() + 0.2 for _ in range(4)]
        text = "".join(drawn.choices("ACGT", weights, k=length))
        if drawn.random() < 0.5:  # fewer CpG, as in most genomes
            text = text.replace("CG", "TG", drawn.randint(0, length // 10))
        if drawn.random() < 0.2:
            text = text[: length // 2] + "N" * drawn.randint(1, 20) + text[length // 2 :]
        found.append(criteria(text))
        assert found[-1] == plain(text)
    # The draw must have regions on either side.
    assert min(found.count(verdict) for verdict in set(found)) >= 50
    assert set(found) == {("no", "no"), ("yes", "no"), ("yes", "yes")}


def test_products_beyond_64_bits() -> None:
    # Exactly 0.65 in a region of two billion bases, and one CpG less.
    n, c, g = 2_000_000_000, 600_000_000, 600_000_000
    cpg = 13 * c * g // (20 * n)
    assert 20 * cpg * n == 13 * c * g > 2**63 // 2
    words = np.zeros((2, 20), np.int64)
    words[:, :4] = 400_000_000, c, g, 400_000_000
    words[:, 10] = cpg, cpg - 1
    assert island_criteria(words)[TAKAI_JONES].tolist() == ["yes", "no"]
