"""How often the true ends of regions lie within their limits, in thousands of regions."""

import pytest

from hmmseg.regions.calling import PATH, POSTERIOR
from tests.regions.known_ends import MODELS, truth_within

pytestmark = pytest.mark.slow


@pytest.mark.parametrize("decoder", [PATH, POSTERIOR])
@pytest.mark.parametrize("name", MODELS)
def test_the_truth_lies_within_about_as_often_as_it_should(name: str, decoder: str) -> None:
    within = truth_within(MODELS[name], decoder, [100_000] * 40, seed=2)
    share = sum(within) / len(within)
    assert 0.94 <= share <= 0.975, f"{share:.4f} of {len(within)}"
