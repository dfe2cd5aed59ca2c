"""The command ``compare``: a hidden Markov model and chains on the same held-out sequence."""

import json
from dataclasses import replace
from pathlib import Path

import numpy as np

from hmmseg.errors import LabelError, SequenceError
from hmmseg.evidence.comparison import Accuracy, Blind, accuracy, blind
from hmmseg.evidence.pieces import cut, deal
from hmmseg.evidence.turns import Predicted, Settings, measured
from hmmseg.jobs.comparison_files import Comparison, write_comparison
from hmmseg.jobs.fold import measured_turns, predicted_turns
from hmmseg.jobs.fold_files import folders_of, read_measured, read_predicted
from hmmseg.jobs.sources import Sources
from hmmseg.jobs.trial import Trial, Truth, set_up
from hmmseg.model import Model
from hmmseg.outputs import PROVENANCE, check_target, whole_folder
from hmmseg.progress import Progress
from hmmseg.provenance import is_current, write_provenance
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate

__all__ = ["compare", "compare_once", "simulated_accuracy"]

_TEST_RECORDS = 50
_MOST_SIMULATED = 5_000_000
_SHORTEST_SIMULATED = 1000


def compare(
    sources: Sources,
    output: str,
    truth: Truth,
    settings: Settings,
    *,
    parts: str | None = None,
    force: bool = False,
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
    parts
        The folder that holds the result of ``fold`` for each fold, under its number; None: all
        folds are done here.
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
    OutputError
        The result of a fold is missing or damaged, or was made with something else.
    """
    check_target(output, force)
    return _compare(set_up(sources, truth, settings), output, parts, force)


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
    trial = set_up(sources, Truth(), settings)
    if not is_current(output, "compare", trial.parameters(), settings.seed, trial.files()):
        check_target(output, force)
        _compare(trial, output, None, force)
    document = json.loads((Path(output) / "comparison.json").read_bytes())
    return str(document["verdict"]["words"])


def _compare(trial: Trial, output: str, parts: str | None, force: bool) -> Comparison:
    folders = None if parts is None else folders_of(parts, trial)
    every = range(trial.settings.folds)
    found = Comparison(len(trial.pieces), trial.split)
    if trial.truth.labels is not None:
        known = measured_turns(trial, every) if folders is None else read_measured(folders)
        result = accuracy(trial.pieces, trial.folds, known, trial.settings)
        found = replace(found, known=result)
    else:
        turns = predicted_turns(trial, every) if folders is None else read_predicted(folders)
        unknown = _without_labels(trial, turns)
        found = replace(found, unknown=unknown, simulated=_on_simulated(trial, unknown.model))
    _write(trial, output, found, folders or [], force)
    return found


def _without_labels(trial: Trial, turns: list[Predicted]) -> Blind:
    with Progress(trial.settings.max_order + 1, "comparing", "chains") as progress:
        return blind(
            trial.pieces,
            trial.folds,
            turns,
            trial.settings,
            lambda name: progress.advance(1, name),
        )


def _on_simulated(trial: Trial, model: Model) -> Accuracy | None:
    """Return how both do on drawn sequence; None if the model draws hardly more than one class."""
    bases = sum(len(piece.contig) for piece in trial.pieces)
    try:
        return simulated_accuracy(model, bases, trial.settings)
    except (LabelError, SequenceError):
        return None


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
    turns = [
        measured(pieces, folds, fold, model.order, strands) for fold in range(int(folds.max()) + 1)
    ]
    return accuracy(pieces, folds, turns, strands)


def _write(trial: Trial, output: str, found: Comparison, folders: list[Path], force: bool) -> None:
    inputs = [*map(Path, trial.files()), *(folder / PROVENANCE for folder in folders)]
    seed = trial.settings.seed
    with whole_folder(output, force=force) as folder:
        write_comparison(folder, found, trial.settings)
        written = sorted(path for path in folder.iterdir() if path.name != PROVENANCE)
        write_provenance(folder, "compare", trial.parameters(), seed, inputs, written)
