"""Selection finds the number of states and the order that sequence was drawn with.

Three models whose next smaller model loses 0.005 held-out bits per base or more, and two that
sit below that (about 1e-3 and 1e-5 bits), of 2 Mb each. ``RUNS`` simulations a model.
"""

import numpy as np
import pytest

from hmmseg.evidence.selection import Comparison, assess, compare, cut_blocks
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from hmmseg.training.restarts import Plan
from tests.published.test_cpg_chains import ISLAND, OCEAN

pytestmark = pytest.mark.slow

RUNS = 10
LENGTH = 2_000_000
SEPARATION = 0.005


def levels(gc: list[float], lengths: list[float]) -> Model:
    count = len(gc)
    transitions = np.array(
        [[1 - 1 / n if i == j else 1 / n / (count - 1) for j in range(count)]
         for i, n in enumerate(lengths)]
    )  # fmt: skip
    return Model(
        names=tuple(f"s{i}" for i in range(count)),
        reported=(True,) * count,
        order=0,
        symmetric=True,
        start_kind="stationary",
        transitions=transitions,
        joint=np.array([[(1 - g) / 2, g / 2, g / 2, (1 - g) / 2] for g in gc]),
    )


def islands() -> Model:
    tables = []
    mirror = [15 - 4 * (i % 4) - i // 4 for i in range(16)]
    for printed in (OCEAN, ISLAND):
        rows = printed / printed.sum(axis=1, keepdims=True)
        share = np.linalg.matrix_power(rows, 100)[0]
        joint = (share[:, None] * rows).reshape(-1)
        tables.append((joint + joint[mirror]) / 2)
    two = levels([0.5, 0.5], [4000, 1000])
    return Model(
        names=two.names, reported=two.reported, order=1, symmetric=True, start_kind="stationary",
        transitions=two.transitions, joint=np.array(tables),
    )  # fmt: skip


MODELS = {
    "two levels": (levels([0.35, 0.55], [2000, 1000]), 2, 0, True),
    "three levels": (levels([0.25, 0.42, 0.60], [800, 2000, 1000]), 3, 0, True),
    "islands": (islands(), 2, 1, True),
    "little different": (levels([0.40, 0.47], [600, 600]), 2, 0, False),
    "hardly different": (levels([0.42, 0.44], [600, 600]), 2, 0, False),
}


def grid_of(model: Model, seed: int, states: list[int], orders: list[int]) -> list[Comparison]:
    ((bases, _),) = simulate(model, [LENGTH], seed)
    contigs = [Contig("r", 0, bases, False, len(bases))]
    blocks = cut_blocks(contigs, 5, seed)
    grid = [
        Plan(states=k, order=n, restarts=2 if k > 1 else 1, seed=seed)
        for k in states
        for n in orders
    ]  # fmt: skip
    cells = [assess(contigs, blocks, plan, threads=2) for plan in grid]
    return compare(cells, [b.bases for b in blocks])


@pytest.mark.parametrize("name", MODELS)
def test_selection_finds_the_truth_or_less(name: str) -> None:
    model, states, order, separated = MODELS[name]
    right = larger = 0
    for seed in range(1, RUNS + 1):
        compared = grid_of(
            model, seed, [states - 1, states, states + 1], sorted({0, order, order + 1})
        )
        (chosen,) = [c.cell for c in compared if c.recommended]
        right += (chosen.states, chosen.order) == (states, order)
        larger += chosen.states > states or chosen.order > order
        held = {(c.cell.states, c.cell.order): c.bits_per_base for c in compared}
        smaller = min(
            bits
            for (k, n), bits in held.items()
            if (k, n) != (states, order) and k <= states and n <= order
        )
        assert (smaller - held[states, order] >= SEPARATION) == separated
    print(f"{name}: right in {right} of {RUNS}, larger in {larger}")
    if separated:
        assert right >= 0.9 * RUNS
    else:
        assert larger == 0
