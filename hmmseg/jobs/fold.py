"""The command ``fold``: the part of a comparison in which one fold is held out."""

from collections.abc import Sequence

from hmmseg.errors import LabelError, UsageError
from hmmseg.evidence.comparison import best_labelled_order
from hmmseg.evidence.turns import Measured, Predicted, Settings, measured, predicted
from hmmseg.jobs.fold_files import COMMAND, parameters_of, write_measured, write_predicted
from hmmseg.jobs.sources import Sources
from hmmseg.jobs.trial import Trial, Truth, set_up
from hmmseg.outputs import check_target, whole_folder
from hmmseg.progress import Progress
from hmmseg.provenance import write_provenance

__all__ = ["fold", "measured_turns", "predicted_turns"]


def fold(
    sources: Sources, output: str, truth: Truth, settings: Settings, number: int, force: bool
) -> str:
    """Train with one fold held out, and write what ``compare`` needs to know of it.

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
    number
        Of the fold, from 1 up.
    force
        Replace an earlier result.

    Returns
    -------
    str
        What was done, in a line.

    Raises
    ------
    UsageError
        There is no such fold, or an option is given that needs labels.
    LabelError
        The labels do not fit the sequence, or what is trained on has one class only.
    SequenceError
        There is too little sequence for the folds.
    """
    if not 1 <= number <= settings.folds:
        raise UsageError(
            f"there is no fold {number} of {settings.folds}; give --fold 1 to {settings.folds}"
        )
    check_target(output, force)
    trial = set_up(sources, truth, settings)
    turn: Measured | Predicted
    if truth.labels is not None:
        [turn] = measured_turns(trial, [number - 1])
        did = f"an HMM and two chains of order {turn.order} tested"
    else:
        [turn] = predicted_turns(trial, [number - 1])
        did = f"{len(turn.models)} {'HMM' if len(turn.models) == 1 else 'HMMs'} tried"
    with whole_folder(output, force=force) as folder:
        if isinstance(turn, Measured):
            written = write_measured(folder, number, turn)
        else:
            written = write_predicted(folder, number, turn)
        parameters = parameters_of(trial, number)
        write_provenance(folder, COMMAND, parameters, settings.seed, trial.files(), written)
    bases = _bases(trial, [number - 1])
    return f"fold {number} of {settings.folds}: {did} on {bases} bases that none had seen"


def measured_turns(trial: Trial, folds: Sequence[int]) -> list[Measured]:
    """Return what comes of holding out each of these folds in turn, with labels.

    Raises
    ------
    LabelError
        What is trained on has one class only.
    """
    pieces, truth, settings = trial.pieces, trial.truth, trial.settings
    try:
        order = truth.order
        if order is None:
            order = best_labelled_order(pieces, trial.folds, settings)
        with Progress(_bases(trial, folds), "comparing", "bases") as progress:
            return [
                measured(pieces, trial.folds, number, order, settings, progress.advance)
                for number in folds
            ]
    except LabelError as error:
        raise LabelError(f"{truth.labels}: {error}") from None


def predicted_turns(trial: Trial, folds: Sequence[int]) -> list[Predicted]:
    """Return what comes of holding out each of these folds in turn, without labels."""
    models = len(folds) * (trial.settings.max_hmm_order + 1)
    with Progress(models, "fitting", "models") as progress:
        return [
            predicted(
                trial.pieces, trial.folds, number, trial.settings, lambda: progress.advance(1)
            )
            for number in folds
        ]


def _bases(trial: Trial, folds: Sequence[int]) -> int:
    """Return how many bases are held out in some folds."""
    pairs = zip(trial.pieces, trial.folds.tolist(), strict=True)
    return sum(len(piece.contig) for piece, number in pairs if number in folds)
