"""The command ``explain``: what a model's states are, and what to be careful about."""

from dataclasses import dataclass

from hmmseg.evidence.cautions import cautions
from hmmseg.evidence.findings import StateFinding, describe
from hmmseg.model import load_model

__all__ = ["Explained", "explain"]


@dataclass(frozen=True)
class Explained:
    """A model in words.

    Attributes
    ----------
    findings : list of StateFinding
        One for each state.
    cautions : list of str
        What calls for a person's eye.
    """

    findings: list[StateFinding]
    cautions: list[str]


def explain(model_path: str) -> Explained:
    """Describe the states of a model document."""
    model = load_model(model_path)
    training = model.training or {}
    bases = training.get("bases")
    # A model that was placed, not trained, has no estimates to be doubted.
    trained = isinstance(bases, int) and training.get("iterations", 0) > 0
    return Explained(describe(model), cautions(model, bases if trained else None))
