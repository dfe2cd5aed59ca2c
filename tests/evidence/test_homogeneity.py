"""Records that are another kind of sequence are named, and others are not."""

from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from hmmseg.evidence.homogeneity import FITS, TOO_SHORT, statement, table
from hmmseg.evidence.stretches import BLOCK, LEVELS, Ladder, Stretch, Words, stretches_of
from hmmseg.evidence.typical import DRAWN_LENGTHS, Typical, chi_square_of_shares, typical_blocks
from hmmseg.inference.surprise import surprise_of_pieces
from hmmseg.model import Model, load_model
from hmmseg.sequence.alphabet import decode, reverse_complement
from hmmseg.sequence.contigs import Contig, split
from hmmseg.sequence.reading import read_records
from hmmseg.simulate import simulate
from tests.evidence.planted import LIMIT_MODELS
from tests.evidence.records import HOST, assembly, judged, named, shifted, trained

DATA = Path(__file__).resolve().parents[1] / "data"


# What is named


def test_a_planted_record_is_named_and_described() -> None:
    records = assembly(1, [50_000] * 29, (50_000, 8.0))
    found = judged(trained(records), records)
    assert named(found) == ["odd"]
    assert found.records[0].record == "odd"
    words = statement(found)
    assert "1 of 30 records judged differs from the others: odd (GC 4" in words
    assert f"against {100 * found.records[0].gc_rest:.1f} %" in words
    assert "too short" not in words
    assert {part.split(" ")[0] for part in found.records[0].words.split(", ")} <= {
        "CC/GG", "CG", "GC",
    }  # fmt: skip


def test_none_is_named_where_all_are_alike() -> None:
    records = assembly(2, [50_000] * 30)
    found = judged(trained(records), records)
    assert named(found) == []
    assert "None of 30 records judged differs" in statement(found)
    assert found.surprise_dispersion < 2
    assert found.composition_dispersion < 2


def test_a_small_difference_of_a_long_record_is_no_large_effect() -> None:
    """A megabase with two points more of GC cannot be chance, and still is the same kind."""
    records = assembly(3, [100_000] * 20, (1_000_000, 2.0))
    found = {one.record: one for one in judged(HOST, records).records}["odd"]
    assert found.adjusted_p < 1e-6
    assert found.effect < 0.1
    assert found.verdict == FITS


def test_composition_sees_what_surprise_cannot() -> None:
    """Where all bases are equally probable none is more surprising than another."""
    even = Model(("all",), (True,), 0, True, "stationary", np.eye(1), np.full((1, 4), 0.25))
    records = []
    for number, level in enumerate([0.25] * 12 + [0.2]):
        chain = replace(even, joint=np.array([[0.5 - level, level, level, 0.5 - level]]))
        (drawn,) = simulate(chain, [40_000], number)
        records.append((str(number), [Contig(str(number), 0, drawn.bases, False, 40_000)]))
    found = judged(even, records)
    assert named(found) == ["12"]
    assert all(one.surprise_z == 0 for one in found.records)
    assert found.records[0].composition_p < 1e-4


def test_an_assembly_that_varies_is_judged_by_its_own_measure() -> None:
    """GC changes every 20 kb, everywhere: no record is odd, though none fits the model."""
    random = np.random.default_rng(4)
    records = []
    for number in range(20):
        bases = np.concatenate(
            [
                next(iter(simulate(shifted(random.normal(0, 4)), [20_000], 100 * number + part)))[0]
                for part in range(5)
            ]
        )
        records.append((str(number), [Contig(str(number), 0, bases, False, len(bases))]))
    found = judged(HOST, records)
    assert found.composition_dispersion > 3
    assert named(found) == []
    assert "vary" in statement(found)
    assert "only roughly" in statement(found)


def test_a_phage_and_the_ribosomal_operons_of_a_real_genome_are_named() -> None:
    """Lambda (NC_001416) beside pieces of M. maripaludis (NC_005791), of which the first holds
    all three ribosomal operons, a fifth of its bases.
    """
    (genome,) = read_records([DATA / "NC_005791.fa.gz"])
    (phage,) = read_records([DATA / "NC_001416.fa.gz"])
    pieces = []
    for begin in range(0, len(genome) - 50_000, 50_000):
        bases, name = genome.bases[begin : begin + 50_000], f"piece_{begin // 50_000}"
        pieces.append((name, [Contig(name, 0, bases, False, 50_000)]))
    model = trained(pieces, load_model(DATA / "models" / "maripaludis.json"))
    found = judged(model, [*pieces, ("phage", split(phage))])
    assert named(found) == ["phage", "piece_0"]
    assert found.records[0].gc == pytest.approx(0.4986, abs=1e-4)
    assert found.surprise_dispersion > 2


def test_the_smaller_part_is_what_differs() -> None:
    """Two replicons apart by ten points of GC: the effect is on the smaller one, in full."""
    records = assembly(9, [300_000], (200_000, 10.0))
    found = judged(HOST, records)
    assert named(found) == ["odd"]
    by_name = {one.record: one for one in found.records}
    apart = by_name["odd"].gc - by_name["host_0"].gc
    centre = by_name["host_0"].gc * 0.6 + by_name["odd"].gc * 0.4
    square = (apart / 2) ** 2 * (2 / (centre / 2) + 2 / ((1 - centre) / 2))
    assert by_name["odd"].effect == pytest.approx(np.sqrt(square), rel=0.1)


# Who is judged


def test_short_records_are_a_class_of_their_own() -> None:
    records = assembly(5, [50_000] * 8 + [4_999, 5_000, 0])
    records[-1] = (records[-1][0], [])
    found = judged(HOST, records)
    verdicts = {one.record: one.verdict for one in found.records}
    assert Counter(verdicts.values()) == {FITS: 9, TOO_SHORT: 2}
    assert verdicts["host_8"] == TOO_SHORT
    assert [one.verdict for one in found.records[-2:]] == [TOO_SHORT] * 2
    assert "2 are too short to judge" in statement(found)
    rows = table(found)
    assert rows["effect"].isna().sum() == 2
    assert rows["share"].sum() == pytest.approx(1)
    assert rows["bases"].tolist()[-1] in (0, 4_999)


def test_one_record_has_none_to_compare_with() -> None:
    found = judged(HOST, assembly(6, [60_000]))
    assert "none to compare it with" in statement(found)
    assert "No record is long enough" in statement(judged(HOST, assembly(6, [3000])))


def test_verdicts_are_the_same_on_both_strands_and_any_threads() -> None:
    records = assembly(7, [30_000] * 10, (30_000, 10.0))
    turned = [
        (name, [replace(contig, bases=reverse_complement(contig.bases)) for contig in contigs])
        for name, contigs in records
    ]
    once, again = judged(HOST, records, threads=1), judged(HOST, records, threads=2)
    assert once == again
    few = [one.bases for one in simulate(HOST, DRAWN_LENGTHS[:3], 1)]
    alone, together = typical_blocks(HOST, few, 1), typical_blocks(HOST, few, 2)
    assert all((a.distances == b.distances).all() for a, b in zip(alone, together, strict=True))
    other = judged(HOST, turned)
    assert named(other) == named(once) == ["odd"]
    both = zip(once.records, other.records, strict=True)
    for one, two in both:
        assert one.record == two.record
        assert one.effect == pytest.approx(two.effect, abs=1e-3)


# Blocks and words


@pytest.mark.parametrize("name", ["strong", "words"])
def test_words_are_counted_as_letters_are(name: str) -> None:
    words = Words.of(LIMIT_MODELS[name])
    (drawn,) = simulate(LIMIT_MODELS[name], [3000], 1)
    bases = drawn.bases.copy()
    bases[1000:1003] = 4
    contig = Contig("r", 0, bases, False, 3000)
    counted = words.counts(contig, 0, 1500) + words.counts(contig, 1500, 3000)
    text = decode(bases)
    plain: Counter[str] = Counter()
    for at in range(3000 - words.length + 1):
        word = text[at : at + words.length]
        if "N" not in word:
            other = word[::-1].translate(str.maketrans("ACGT", "TGCA"))
            plain[min(word, other)] += 1
    assert sorted(counted[counted > 0]) == sorted(plain.values())
    assert counted.sum() == sum(plain.values())
    by_name = {words.name(at): count for at, count in enumerate(counted.tolist())}
    for letters, count in by_name.items():
        assert count == plain[min(letters.split("/"))]


def test_words_of_high_orders_have_six_bases() -> None:
    joint = np.full((1, 4**8), 4.0**-8)
    model = Model(("all",), (True,), 7, False, "stationary", np.eye(1), joint)
    words = Words.of(model)
    assert (words.length, words.count) == (6, 4**6)


def test_blocks_reach_over_contigs_and_add_up() -> None:
    model = LIMIT_MODELS["words"]
    words = Words.of(model)
    contigs = [
        Contig("r", 10_000, drawn.bases, False, 60_000)
        for drawn in simulate(model, [7_000, 30_001, 3_002], 1)
    ]
    blocks = list(stretches_of(model, words, contigs))
    assert [filled for filled, _ in blocks] == [BLOCK] * 8 + [3]
    assert sum(block.known for _, block in blocks) == 40_003
    whole = [surprise_of_pieces(model, one, np.array([0, len(one)])).excess[0] for one in contigs]
    assert sum(block.excess for _, block in blocks) == pytest.approx(sum(whole), abs=1e-6)
    ladder = Ladder()
    seen: list[tuple[int, Stretch]] = []
    for _, block in blocks[:8]:
        seen += ladder.climb(block)
    assert Counter(level for level, _ in seen) == {0: 8, 1: 4, 2: 2, 3: 1}
    assert seen[-1][0] == LEVELS - 1
    assert seen[-1][1].known == 40_000
    assert (seen[-1][1].words == sum(block.words for _, block in blocks[:8])).all()


def test_distance_is_that_of_least_squares() -> None:
    """Beside a general least-squares solver, on random shares."""
    random = np.random.default_rng(8)
    blocks = []
    for _ in range(60):
        states = random.dirichlet([3, 2, 1])
        lines = np.array([[9, 3, 1, 1], [2, 8, 2, 2], [1, 1, 5, 6]])
        counts = random.poisson(200 * (states[:, None] * lines).sum(axis=0))
        blocks.append(Stretch(1.0, 4.0, 1000, 1000 * states, counts.astype(np.int64)))
    found = Typical.of(blocks, 1000)
    words = np.array([block.word_shares for block in blocks])
    states = np.array([block.state_shares for block in blocks])
    design = np.column_stack((np.ones(60), states[:, :2]))
    rest = words - design @ np.linalg.lstsq(design, words, rcond=None)[0]
    spread = np.maximum(rest.std(axis=0), 1e-3)
    wanted = ((rest / spread) ** 2).mean(axis=1)
    wanted += (((states - states.mean(axis=0)) / states.std(axis=0)) ** 2).mean(axis=1)
    assert found.distances == pytest.approx(wanted, rel=1e-5)
    again = [found.distance(found.seen(block, found.words), found.states) for block in blocks]
    assert again == pytest.approx(wanted, rel=1e-5)
    assert blocks[0].z == 0.5


def test_eight_points_of_gc_are_an_effect_beyond_large() -> None:
    """By hand, at GC 42 %: squares of 0.04 over 0.21 and 0.29, twice each, per base."""
    centre = np.array([0.29, 0.21, 0.21, 0.29])
    square = chi_square_of_shares(np.array([0.25, 0.25, 0.25, 0.25]), centre)
    assert square == pytest.approx(2 * 0.04**2 / 0.21 + 2 * 0.04**2 / 0.29)
    assert np.sqrt(square) == pytest.approx(0.162, abs=1e-3)
