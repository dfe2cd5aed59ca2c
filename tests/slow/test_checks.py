"""What the model and the assembly say about calls holds in simulation, over many seeds."""

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from hmmseg.evidence.resolution import resolution
from tests.evidence.planted import LIMIT_MODELS, island_model, plain_share_detected
from tests.evidence.records import HOST, assembly, judged, named, trained
from tests.evidence.test_durations import drawn as drawn_durations
from tests.kernels.test_kernels_bits import ENVIRONMENTS

pytestmark = pytest.mark.slow

FLANKS = {"strong": 150, "mild": 300, "short": 200, "words": 400}


@pytest.mark.parametrize("name", LIMIT_MODELS)
def test_half_of_the_regions_are_seen_at_the_length_that_is_reported(name: str) -> None:
    """By the plain twins: less than half at 0.75 times that length, more at 1.25 times."""
    model = LIMIT_MODELS[name]
    (found,) = resolution(model, seed=1)
    shares = {
        factor: plain_share_detected(
            model, round(factor * found.simulated.l50), FLANKS[name], 150, seed=11
        )
        for factor in (0.75, 1.0, 1.25)
    }
    print(f"{name}: formula {found.formula}, simulated {found.simulated}, twin {shares}")
    assert shares[0.75] < 0.5 < shares[1.25]


def test_a_record_of_another_composition_is_named_and_no_other() -> None:
    """One of 50 kb with 8 points more of GC among 30; without one, none, in 36 of 40 seeds."""
    right = clean = 0
    for seed in range(40):
        with_one = assembly(seed, [50_000] * 29, (50_000, 8.0))
        right += named(judged(trained(with_one), with_one, seed)) == ["odd"]
        without = assembly(seed + 1000, [50_000] * 30)
        clean += named(judged(trained(without), without, seed)) == []
    print(f"the planted record, and no other, named in {right} of 40; none in {clean} of 40")
    assert right >= 38
    assert clean >= 36


def test_power_grows_with_length_and_difference() -> None:
    """The power curve: shares of 20 seeds in which the odd record is named."""
    lengths, differences = (5_000, 10_000, 20_000, 50_000, 200_000), (3.0, 5.0, 6.0, 8.0, 12.0)
    power = {}
    for length in lengths:
        for points in differences:
            found = [
                named(judged(HOST, assembly(seed, [50_000] * 12, (length, points))))
                for seed in range(20)
            ]
            power[length, points] = sum("odd" in one for one in found) / 20
            assert sum(len(one) for one in found) - sum("odd" in one for one in found) <= 2
    for length in lengths:
        shares = "  ".join(f"{power[length, points]:.2f}" for points in differences)
        print(f"{length:>7} bp, {differences} points of GC: {shares}")
    assert power[50_000, 8.0] >= 0.9
    assert power[200_000, 3.0] <= 0.1
    for points in (8.0, 12.0):
        assert power[5_000, points] <= power[200_000, points] + 0.1
    assert power[5_000, 12.0] >= 0.8


@pytest.mark.parametrize("name", ["geometric", "staged"])
def test_lengths_of_the_true_model_seldom_seem_to_misfit(name: str) -> None:
    """P-values below 0.05 and 0.01 in about as many of 200 seeds as they should be."""
    model = LIMIT_MODELS["strong"]
    contigs = [20_000] * 15
    if name == "staged":
        model = island_model((0.3, 0.7), (5000, 75), stages=(1, 4))
        contigs = [3_000] * 100
    chances = np.array(
        [drawn_durations(model, model, contigs, seed).p_value for seed in range(200)]
    )
    print(f"{name}: {np.mean(chances < 0.05)} below 0.05, {np.mean(chances < 0.01)} below 0.01")
    assert np.mean(chances < 0.05) <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / 200)
    assert np.mean(chances < 0.01) <= 0.01 + 3 * np.sqrt(0.01 * 0.99 / 200)


def _printed(changes: dict[str, str], cache: Path) -> str:
    # A cache of its own, or code compiled for another processor would be found there.
    environment = {**os.environ, **changes, "NUMBA_CACHE_DIR": str(cache)}
    call = [sys.executable, "-m", "tests.evidence.printed"]
    folder = Path(__file__).resolve().parents[2]
    return subprocess.run(
        call, cwd=folder, env=environment, check=True, capture_output=True, text=True
    ).stdout


def test_same_bits_on_any_processor(tmp_path: Path) -> None:
    """Every number that the checks find, in full."""
    here = _printed({}, tmp_path / "here")
    assert here.count("0x1.") > 100
    for name, changes in ENVIRONMENTS.items():
        assert _printed(changes, tmp_path / name.replace(" ", "_")) == here, name
