"""What the model and the assembly say about calls holds in simulation, over many seeds."""

import pytest

from hmmseg.evidence.resolution import resolution
from tests.evidence.planted import LIMIT_MODELS, plain_share_detected

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
