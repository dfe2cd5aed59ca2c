"""A model in words, what to be careful about, and whether two fits found the same thing."""

import math

import numpy as np
import pytest

from hmmseg.evidence.agreement import difference
from hmmseg.evidence.cautions import bits_apart, cautions
from hmmseg.evidence.findings import describe, in_bases
from hmmseg.model import Model


def level(gc: float) -> list[float]:
    return [(1 - gc) / 2, gc / 2, gc / 2, (1 - gc) / 2]


def model_of(
    tables: list[list[float]],
    lengths: list[float],
    order: int = 0,
    names: tuple[str, ...] = ("plain", "rich", "third"),
) -> Model:
    count = len(tables)
    rows = [
        [1 - 1 / n if i == j else 1 / n / (count - 1) for j in range(count)]
        for i, n in enumerate(lengths)
    ]
    return Model(
        names=names[:count],
        reported=tuple(i > 0 for i in range(count)),
        order=order,
        symmetric=True,
        start_kind="stationary",
        transitions=np.array(rows) if count > 1 else np.ones((1, 1)),
        joint=np.array(tables),
    )


def test_two_levels_in_numbers_and_words() -> None:
    plain, rich = describe(model_of([level(0.4), level(0.6)], [9000, 1000]))
    assert (plain.name, plain.reported, rich.name, rich.reported) == ("plain", False, "rich", True)
    assert (plain.gc, rich.gc) == pytest.approx((0.4, 0.6))
    assert (plain.share, rich.share) == pytest.approx((0.9, 0.1))
    assert rich.expected_length == pytest.approx(1000)
    assert rich.cpg_observed_expected is None
    assert rich.words == (("C/G", pytest.approx(1.5)),)
    assert plain.words == ()  # 0.3 against 0.9 x 0.3 + 0.1 x 0.2: 1.03 times
    assert rich.text == "very GC-rich, mean length 1 kb"
    assert plain.text == "AT-rich, mean length 9 kb" or plain.text.startswith("of average GC")


def test_cpg_islands_are_described_as_such() -> None:
    """By hand: bases even, CG at half of what is expected outside, as expected inside."""
    even = np.full(16, 1 / 16)
    depleted = even.copy()
    depleted[6] /= 2
    found = describe(
        model_of([(depleted / depleted.sum()).tolist(), even.tolist()], [9000, 1100], 1)
    )
    bases = (depleted / depleted.sum()).reshape(4, 4).sum(axis=0)
    expected = depleted[6] / depleted.sum() / (bases[1] * bases[2])
    assert found[0].cpg_observed_expected == pytest.approx(expected, rel=0.02)
    assert found[1].cpg_observed_expected == pytest.approx(1)
    assert found[1].words[0] == ("CG", pytest.approx(2 * depleted.sum()))
    assert found[1].text == "of average GC, CpG not depleted, mean length 1.1 kb"
    assert "CpG somewhat depleted" in found[0].text


@pytest.mark.parametrize(
    ("length", "said"),
    [(8.4, "8 bp"), (999.4, "999 bp"), (999.9, "1 kb"), (12_345, "12.3 kb"), (1e6, "1 Mb"),
     (math.inf, "without end")],
)  # fmt: skip
def test_lengths_as_one_says_them(length: float, said: str) -> None:
    assert in_bases(length) == said


def test_chain_has_no_length() -> None:
    (chain,) = describe(model_of([level(0.4)], [1], names=("chain",)))
    assert chain.text == "a chain without hidden states"
    assert chain.words == ()
    assert cautions(model_of([level(0.4)], [1], names=("chain",)), 10_000) == []


def test_sound_model_needs_no_caution() -> None:
    assert cautions(model_of([level(0.4), level(0.6)], [9000, 1000]), 1_000_000) == []


@pytest.mark.parametrize(
    ("tables", "lengths", "bases", "told"),
    [
        ([level(0.4), level(0.6)], [100_000, 1000], 30_000, "state rich: nobody visits it"),
        ([level(0.4), level(0.6)], [90_000, 10_000], 200_000, "rich: rests on about 2.0 visits"),
        ([level(0.4), level(0.6)], [900, 9], 1_000_000, "state rich: expected length 9.0 bases"),
        ([level(0.4), level(0.405)], [900, 900], 1_000_000, "states plain and rich: the same"),
        ([level(0.4), level(0.0)], [900, 900], 1_000_000, "state rich: 2 of its words have prob"),
        ([level(0.4), level(0.6)], [20, 10], 50, "state rich: too little sequence to tell"),
    ],
)  # fmt: skip
def test_cautions(tables: list[list[float]], lengths: list[float], bases: int, told: str) -> None:
    assert any(told in line for line in cautions(model_of(tables, lengths), bases))


def test_transitions_that_were_given_up() -> None:
    """Three states, two of which meet only by way of the third."""
    base = model_of([level(0.3), level(0.5), level(0.7)], [100, 100, 100])
    transitions = np.array([[0.99, 0.01, 0.0], [0.005, 0.99, 0.005], [0.0, 0.01, 0.99]])
    found = cautions(
        Model(base.names, base.reported, 0, True, "stationary", transitions, base.joint), 10**6
    )
    assert found == ["states plain and third: never follow each other directly"]
    endless = np.array([[0.99, 0.01], [0.0, 1.0]])
    free = Model(("a", "b"), (True, True), 0, False, "free", endless, base.joint[:2], [0.5, 0.5])
    assert "state b: never left once entered" in cautions(free, 10**6)


def test_untrained_model_has_no_estimates_to_doubt() -> None:
    assert cautions(model_of([level(0.4), level(0.6)], [1e6, 1000]), None) == []


def test_bits_apart_is_the_mean_divergence() -> None:
    """By hand: one base of GC p against q is worth p log2(p/q) + (1-p) log2((1-p)/(1-q))."""
    p, q = 0.4, 0.6
    expected = p * math.log2(p / q) + (1 - p) * math.log2((1 - p) / (1 - q))
    model = model_of([level(p), level(q)], [10, 10])
    assert bits_apart(model, 0, 1) == pytest.approx(expected)
    assert bits_apart(model_of([level(p), level(0)], [10, 10]), 0, 1) == math.inf


def test_fits_that_found_the_same_in_another_order() -> None:
    one = model_of([level(0.4), level(0.6)], [9000, 1000])
    other = model_of([level(0.61), level(0.4)], [1100, 9500])
    assert difference(one, other) is None


@pytest.mark.parametrize(
    ("tables", "lengths"),
    [
        ([level(0.4), level(0.5)], [9000, 1000]),
        ([level(0.4), level(0.6)], [9000, 200]),
        ([level(0.4), level(0.6)], [2000, 1000]),
    ],
)
def test_fits_that_found_different_things(tables: list[list[float]], lengths: list[float]) -> None:
    text = difference(model_of([level(0.4), level(0.6)], [9000, 1000]), model_of(tables, lengths))
    assert text is not None
    assert text.startswith(("rich (GC 0.600, 1 kb", "plain (GC 0.400, 9 kb"))
