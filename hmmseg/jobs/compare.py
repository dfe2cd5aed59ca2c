"""The command ``compare``: a hidden Markov model and chains on the same held-out sequence."""

import json
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from hmmseg.errors import LabelError, SequenceError, UsageError
from hmmseg.evidence.comparison import (
    Accuracy,
    Settings,
    accuracy,
    best_labelled_order,
    blind,
)
from hmmseg.evidence.pieces import Piece, block_length, cut, deal
from hmmseg.jobs.comparison_files import Comparison, write_comparison
from hmmseg.jobs.labelled import read_labelled
from hmmseg.jobs.sources import Sources
from hmmseg.model import Model
from hmmseg.outputs import PROVENANCE, check_target, whole_folder
from hmmseg.progress import Progress
from hmmseg.provenance import is_current, write_provenance
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate

__all__ = ["Truth", "compare", "compare_once", "simulated_accuracy"]

_TEST_RECORDS = 50
_MOST_SIMULATED = 5_000_000
_SHORTEST_SIMULATED = 1000


@dataclass(frozen=True)
class Truth:
    """Labels, and how sequence is held out.

    Parameters
    ----------
    labels
        Known regions as BED; None to compare without.
    name
        Use only intervals of this name, or of this name with a number.
    order
        Context length of both ways of calling; None for the one that predicts best.
    split
        ``contigs`` or ``blocks``: what is held out; None for contigs where they make even folds.
    block
        Length of a block in bases; None for about 200 blocks.
    """

    labels: str | None = None
    name: str | None = None
    order: int | None = None
    split: str | None = None
    block: int | None = None


def compare(
    sources: Sources, output: str, truth: Truth, settings: Settings, force: bool
) -> Comparison:
    """Compare, and write the numbers, tables and figures.

    Parameters
    ----------
    sources
        The sequence.
    output
        The folder to write.
    truth
        Labels, and how sequence is held out.
    settings
        How the two are compared.
    force
        Replace an earlier result.

    Raises
    ------
    UsageError
        An option is given that needs labels.
    LabelError
        The labels do not fit the sequence, or a fold has one class only.
    SequenceError
        There is too little sequence for the folds.
    """
    check_target(output, force)
    prepared = _prepare(sources, truth, settings)
    found = prepared.nothing_yet
    if truth.labels is not None:
        known = _with_labels(prepared.pieces, prepared.folds, truth, settings)
        found = replace(found, known=known)
    else:
        found = _without_labels(found, prepared.pieces, prepared.folds, settings)
    _write(sources, output, truth, settings, found, force)
    return found


def compare_once(sources: Sources, output: str, settings: Settings, force: bool) -> str:
    """Compare without labels, unless the same comparison is there already.

    Parameters
    ----------
    sources, output, settings, force
        As for :func:`compare`.

    Returns
    -------
    str
        The verdict in words.
    """
    truth = Truth()
    held_out = _prepare(sources, truth, settings).nothing_yet
    parameters = _parameters(sources, truth, settings, held_out)
    if not is_current(output, "compare", parameters, settings.seed, sources.files()):
        compare(sources, output, truth, settings, force)
    document = json.loads((Path(output) / "comparison.json").read_bytes())
    return str(document["verdict"]["words"])


@dataclass(frozen=True, eq=False)
class _Prepared:
    """Sequence dealt out to folds, and a comparison that says how, without results."""

    pieces: list[Piece]
    folds: "np.ndarray[Any, Any]"
    nothing_yet: Comparison


def _prepare(sources: Sources, truth: Truth, settings: Settings) -> _Prepared:
    if truth.labels is None and (truth.order is not None or truth.name is not None):
        raise UsageError("--order and --label belong to --labels; give the labels, or leave it out")
    if truth.labels is None:
        contigs = [contig for _, found in sources.read_contigs() for contig in found]
        labels = None
    else:
        contigs, labels = read_labelled(sources, truth.labels, truth.name)
    block = truth.block or block_length(sum(len(contig) for contig in contigs))
    pieces = cut(contigs, block, labels)
    split = truth.split or _natural_split(contigs, settings.folds)
    folds = deal(pieces, settings.folds, split == "contigs")
    return _Prepared(pieces, folds, Comparison(len(pieces), split, block))


def _natural_split(contigs: list[Contig], folds: int) -> str:
    """Return ``contigs`` where they are many and none outweighs a fold."""
    lengths = [len(contig) for contig in contigs]
    return "contigs" if max(lengths) * folds <= sum(lengths) else "blocks"


def _with_labels(
    pieces: list[Piece], folds: "np.ndarray[Any, Any]", truth: Truth, settings: Settings
) -> Accuracy:
    try:
        order = truth.order
        if order is None:
            order = best_labelled_order(pieces, folds, settings)
        total = sum(len(piece.contig) for piece in pieces)
        with Progress(total, "comparing", "bases") as progress:
            return accuracy(pieces, folds, order, settings, progress.advance)
    except LabelError as error:
        raise LabelError(f"{truth.labels}: {error}") from None


def _without_labels(
    found: Comparison, pieces: list[Piece], folds: "np.ndarray[Any, Any]", settings: Settings
) -> Comparison:
    kinds = settings.max_order + settings.max_hmm_order + 2
    with Progress(kinds, "comparing", "models") as progress:
        unknown = blind(pieces, folds, settings, lambda name: progress.advance(1, name))
    bases = sum(len(piece.contig) for piece in pieces)
    try:
        simulated = simulated_accuracy(unknown.model, bases, settings)
    except (LabelError, SequenceError):
        # The model draws hardly any region, or hardly anything else.
        simulated = None
    return replace(found, unknown=unknown, simulated=simulated)


def simulated_accuracy(model: Model, bases: int, settings: Settings) -> Accuracy:
    """Measure both ways of calling on sequence drawn from a model, whose path is known.

    Parameters
    ----------
    model
        Where sequence is drawn from; its reported states are the truth.
    bases
        How much to draw, 5 Mb at most.
    settings
        How the two are compared.

    Raises
    ------
    LabelError
        The model draws regions only, or none.
    """
    length = max(min(bases, _MOST_SIMULATED) // _TEST_RECORDS, _SHORTEST_SIMULATED)
    reported = np.array(model.reported)
    contigs, truth = [], []
    drawn = simulate(model, [length] * _TEST_RECORDS, settings.seed)
    for number, (sequence, path) in enumerate(drawn):
        contigs.append(Contig(f"simulated_{number + 1}", 0, sequence, False, length))
        steps = np.diff(reported[path].astype(np.int8), prepend=0, append=0)
        truth.append(np.flatnonzero(steps).reshape(-1, 2).astype(np.int64))
    pieces = cut(contigs, length, truth)
    folds = deal(pieces, min(settings.folds, _TEST_RECORDS), whole_contigs=True)
    strands = replace(settings, symmetric=model.symmetric)
    return accuracy(pieces, folds, model.order, strands)


def _write(
    sources: Sources,
    output: str,
    truth: Truth,
    settings: Settings,
    found: Comparison,
    force: bool,
) -> None:
    parameters = _parameters(sources, truth, settings, found)
    inputs = [*sources.files(), *([truth.labels] if truth.labels is not None else [])]
    with whole_folder(output, force=force) as folder:
        write_comparison(folder, found, settings)
        written = sorted(path for path in folder.iterdir() if path.name != PROVENANCE)
        write_provenance(folder, "compare", parameters, settings.seed, inputs, written)


def _parameters(
    sources: Sources, truth: Truth, settings: Settings, found: Comparison
) -> dict[str, Any]:
    """Return what stands in the provenance."""
    chosen = asdict(settings)
    del chosen["seed"]
    return {
        **sources.parameters(),
        **chosen,
        "labels": Path(truth.labels) if truth.labels is not None else None,
        "label": truth.name,
        "order": truth.order,
        "split": found.split,
        "block": found.block,
    }
