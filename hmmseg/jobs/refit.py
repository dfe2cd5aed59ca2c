"""Training on other sequence as a model was trained on its own."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

from hmmseg.errors import ModelError
from hmmseg.inference.streams import Corpus
from hmmseg.jobs.train import placed
from hmmseg.model import Model
from hmmseg.model.presets import load_preset
from hmmseg.model.specification import Specification
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.sampling import sample_contigs
from hmmseg.training.restarts import Plan, fit_restarts

__all__ = ["Refit", "refit_of", "trained_on"]


@dataclass(frozen=True, eq=False)
class Refit:
    """How a model was trained.

    Attributes
    ----------
    plan : Plan
        What was fitted and how.
    wanted : Specification or None
        The preset, anchored to each sequence anew.
    train_bases : int or None
        Bases in the sample that was trained on.
    without : frozenset of str
        Records that were not trained on.
    by_chance : bool
        Training named the states and chose which of them to report.
    """

    plan: Plan
    wanted: Specification | None
    train_bases: int | None
    without: frozenset[str]
    by_chance: bool

    def __call__(self, contigs: Sequence[Contig]) -> Model:
        """Train."""
        kept = [contig for contig in contigs if contig.record not in self.without]
        if self.train_bases is not None:
            kept, _ = sample_contigs(kept, self.train_bases, self.plan.seed)
        plan = self.plan if self.wanted is None else placed(self.plan, self.wanted, kept)
        order = plan.init.order if plan.init else plan.order
        symmetric = plan.init.symmetric if plan.init else plan.symmetric
        corpus = Corpus(kept, order, symmetric and order > 0)
        return fit_restarts(plan, corpus).model


def trained_on(model: Model, checksum: str | None) -> bool:
    """Tell whether a model says that it was trained on a file with this SHA-256."""
    inputs: list[dict[str, Any]] = (model.training or {}).get("inputs", [])
    return checksum is not None and any(entry.get("sha256") == checksum for entry in inputs)


def refit_of(model: Model, path: str) -> Refit:
    """Return how a model was trained, from its document.

    A preset is anchored to each sequence anew, and random starts are drawn anew. A start that
    came from a file is no longer at hand; in its place stands the model itself, which is as
    good a start.

    Parameters
    ----------
    model
        The model.
    path
        Where it was read, for messages.

    Raises
    ------
    ModelError
        The document does not say how it was trained.
    """
    training = dict(model.training or {})
    if "plan" not in training:
        raise ModelError(
            f"{path}: does not say how it was trained, so it cannot be trained alike on null "
            "sequence; train it with this version, or give --no-null-refit"
        )
    told = dict(training["plan"])
    train_bases, without = told.pop("train_bases"), frozenset(told.pop("without"))
    plan = Plan(**{**told, "fixed": tuple(told["fixed"])})
    preset = training.get("preset")
    if preset is not None:
        wanted = load_preset(preset).with_order(model.order)
        return Refit(plan, wanted, train_bases, without, by_chance=False)
    if any(training.get(key) for key in ("spec", "init", "labels")):
        bare = Model(
            names=model.names, reported=model.reported, order=model.order,
            symmetric=model.symmetric, start_kind=model.start_kind,
            transitions=model.transitions, joint=model.joint, start=model.start_probabilities,
            stages=model.stages,
        )  # fmt: skip
        return Refit(replace(plan, init=bare), None, train_bases, without, by_chance=False)
    return Refit(plan, None, train_bases, without, by_chance=True)
