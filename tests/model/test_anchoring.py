"""Compositions tied to the genome at hand."""

from collections import Counter

import numpy as np
import pytest

from hmmseg.errors import ModelError, UsageError
from hmmseg.model.anchoring import anchored, gc_of_words, tilted
from hmmseg.model.presets import PRESETS, load_preset, preset_text
from hmmseg.model.specification_file import read_specification
from tests.published.test_cpg_chains import ISLAND, OCEAN


def words_of(text: str, length: int) -> np.ndarray:
    seen = Counter(text[i : i + length] for i in range(len(text) - length + 1))
    names = [""]
    for _ in range(length):
        names = [name + base for name in names for base in "ACGT"]
    return np.array([seen[name] for name in names], dtype=float)


def genome(gc: float, length: int = 200_000) -> str:
    random = np.random.default_rng(5)
    weak, strong = (1 - gc) / 2, gc / 2
    return "".join(random.choice(list("ACGT"), length, p=[weak, strong, strong, weak]))


@pytest.mark.parametrize("order", [0, 1, 3])
@pytest.mark.parametrize("gc", [0.05, 0.4, 0.9])
def test_tilted_reaches_the_gc_and_keeps_the_rest(order: int, gc: float) -> None:
    random = np.random.default_rng(order)
    table = random.dirichlet(np.full(4 ** (order + 1), 5.0))
    found = tilted(table, gc, order)
    assert gc_of_words(found) == pytest.approx(gc, abs=1e-6)
    assert found.sum() == pytest.approx(1)
    ratio = (found / table).reshape(-1, 4)
    # Words that differ by A for T, or C for G, keep their proportions.
    assert ratio[:, 0] == pytest.approx(ratio[:, 3])
    assert ratio[:, 1] == pytest.approx(ratio[:, 2])


@pytest.mark.parametrize("name", PRESETS)
@pytest.mark.parametrize("gc", [0.19, 0.5, 0.72])
def test_every_preset_fits_any_genome(name: str, gc: float) -> None:
    """Expected lengths are as they stand; states are where they are said to be."""
    wanted = load_preset(name)
    model = anchored(wanted, words_of(genome(gc, 20_000), wanted.order + 1))
    lengths = 1 / (1 - np.diag(model.transitions))
    assert lengths == pytest.approx([wish.expected_length for wish in wanted.states], rel=1e-6)
    assert model.symmetric
    own = model.gc[0] if wanted.states[0].gc_odds is None else gc
    for state, wish in enumerate(wanted.states):
        if wish.gc_odds is not None:
            odds = model.gc[state] / (1 - model.gc[state])
            assert odds == pytest.approx(wish.gc_odds * own / (1 - own), rel=0.05)


@pytest.mark.parametrize("name", PRESETS)
def test_every_preset_says_what_a_person_must_know(name: str) -> None:
    wanted = load_preset(name)
    assert wanted.purpose
    assert wanted.finds
    assert wanted.also_finds
    assert wanted.source
    assert any(wish.reported for wish in wanted.states)
    assert preset_text(name).startswith("#")


def test_unknown_preset_is_refused_with_the_known_ones() -> None:
    with pytest.raises(UsageError, match="cpg-island, gc-island"):
        load_preset("cpg")


def test_island_tables_are_those_of_the_book() -> None:
    wanted = load_preset("cpg-island")
    for wish, table in ((wanted.states[0], OCEAN), (wanted.states[1], ISLAND)):
        assert np.array(wish.conditional) == pytest.approx(table / table.sum(axis=1, keepdims=True))


def test_tables_count_relative_to_the_anchor() -> None:
    """In a genome that is the anchor's own table, the other table comes back, symmetrised."""
    wanted = load_preset("cpg-island")
    share = np.linalg.matrix_power(OCEAN / OCEAN.sum(axis=1, keepdims=True), 200)[0]
    joint = (share[:, None] * OCEAN / OCEAN.sum(axis=1, keepdims=True)).reshape(-1)
    model = anchored(wanted, joint * 1e9)
    mirror = {i: int(f"{j:04b}", 2) for i, j in ((i, 15 - 4 * (i % 4) - i // 4) for i in range(16))}
    both = (joint + joint[[mirror[i] for i in range(16)]]) / 2
    assert model.joint[0] == pytest.approx(both, abs=1e-6)
    share = np.linalg.matrix_power(ISLAND / ISLAND.sum(axis=1, keepdims=True), 200)[0]
    island = (share[:, None] * ISLAND / ISLAND.sum(axis=1, keepdims=True)).reshape(-1)
    island = (island + island[[mirror[i] for i in range(16)]]) / 2
    assert model.joint[1] == pytest.approx(island / island.sum(), abs=1e-6)


def test_enriched_words_bring_their_reverse_complement() -> None:
    text = "order: 1\nstates:\n  - {name: a, expected_length: 9}\n"
    text += "  - {name: b, expected_length: 9, enriched: {CA: 3}}\n"
    model = anchored(read_specification(text, "x", "x"), words_of(genome(0.5), 2))
    ratio = model.joint[1] / model.joint[0]
    assert ratio[[4, 14]] / ratio[0] == pytest.approx([3, 3])
    stranded = anchored(
        read_specification("symmetric: false\n" + text, "x", "x"), words_of(genome(0.5), 2)
    )
    ratio = stranded.joint[1] / stranded.joint[0]
    assert ratio[[4, 14]] / ratio[0] == pytest.approx([3, 1])


def test_independent_keeps_bases_and_drops_words() -> None:
    text = "order: 2\nsymmetric: false\nstates:\n  - {name: a, expected_length: 9}\n"
    text += "  - {name: b, expected_length: 9, independent: true}\n"
    counts = words_of("ACGTTGCAAACGGT" * 500, 3)
    model = anchored(read_specification(text, "x", "x"), counts)
    bases = counts.reshape(-1, 4).sum(axis=0) / counts.sum()
    expected = bases[:, None, None] * bases[None, :, None] * bases[None, None, :]
    assert model.joint[1] == pytest.approx(expected.reshape(-1), rel=0.05, abs=1e-3)


THREE = """
states:
  - {name: a, expected_length: 1000}
  - {name: b, expected_length: 400, stages: 4, gc: 0.6}
  - {name: c, expected_length: 50, gc: 0.3}
"""


def test_stages_keep_the_expected_length() -> None:
    model = anchored(read_specification(THREE, "x", "x"), words_of(genome(0.4, 5000), 1))
    assert model.stages == (1, 4, 1)
    assert model.expected_lengths == pytest.approx([1000, 400, 50])
    assert model.transitions[1, 1] == pytest.approx(1 - 4 / 400)


@pytest.mark.parametrize("symmetric", [True, False])
def test_states_that_never_follow(symmetric: bool) -> None:
    text = f"symmetric: {str(symmetric).lower()}\nnever: [[a, c]]\n{THREE}"
    model = anchored(read_specification(text, "x", "x"), words_of(genome(0.4, 5000), 1))
    assert model.transitions[0, 2] == 0
    assert (model.transitions[2, 0] == 0) == symmetric
    assert model.expected_lengths == pytest.approx([1000, 400, 50])
    with pytest.raises(ModelError, match="nothing may follow state a"):
        anchored(
            read_specification(f"never: [[a, b], [a, c]]\n{THREE}", "x", "x"),
            words_of(genome(0.4, 5000), 1),
        )
