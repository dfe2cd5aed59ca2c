"""What ``fold`` writes and ``compare`` reads of it: a document, and counts as arrays."""

import json
from collections.abc import Sequence
from dataclasses import fields
from pathlib import Path
from typing import Any

import numpy as np

from hmmseg.errors import UsageError
from hmmseg.evidence.calibration import Scale
from hmmseg.evidence.rivals import CLASSIFIER, HMM
from hmmseg.evidence.tallies import Tally
from hmmseg.evidence.tuning import Tuned
from hmmseg.evidence.turns import Measured, Predicted
from hmmseg.jobs.parts import whole_parts
from hmmseg.jobs.trial import Trial
from hmmseg.model.document import model_from_dict, model_to_dict
from hmmseg.outputs import write_json
from hmmseg.provenance import origin
from hmmseg.regions.windows import Windows

__all__ = [
    "COMMAND",
    "folders_of",
    "parameters_of",
    "read_measured",
    "read_predicted",
    "tuned_to_dict",
    "write_measured",
    "write_predicted",
]

COMMAND = "fold"
_FORMAT, _VERSION = "hmmseg-fold", 1
_DOCUMENT, _COUNTS = "fold.json", "counts.npz"
_OF_ALL_FOLDS = frozenset({"replicates", "max_order"})
"""Settings that bear on what is made of the folds together."""


def parameters_of(trial: Trial, number: int) -> dict[str, Any]:
    """Return what stands in the provenance of a fold, numbered from 1."""
    everything = trial.parameters()
    return {**{k: v for k, v in everything.items() if k not in _OF_ALL_FOLDS}, "fold": number}


def tuned_to_dict(tuned: Tuned) -> dict[str, Any]:
    """Return what was chosen for the classifier, as documents hold it."""
    return {
        **tuned.windows._asdict(),
        "threshold_bits": tuned.threshold,
        "mcc": tuned.mcc,
        "calibration": tuned.scale._asdict(),
    }


def write_measured(folder: Path, number: int, turn: Measured) -> list[Path]:
    """Write what came of one fold with labels; return the files."""
    content = {"order": turn.order, "classifier_tuned": tuned_to_dict(turn.tuned)}
    write_json(folder / _DOCUMENT, _document(number, content))
    arrays = {
        f"{way}_{field.name}": getattr(tally, field.name)
        for way, tally in turn.tallies.items()
        for field in fields(tally)
    }
    # NumPy gives the members of the archive one date, so that equal counts are equal bytes.
    np.savez_compressed(folder / _COUNTS, **arrays)
    return [folder / _DOCUMENT, folder / _COUNTS]


def read_measured(folders: Sequence[Path]) -> list[Measured]:
    """Read what came of each fold with labels; how long it took is not known any more."""
    turns = []
    for folder in folders:
        document = _read(folder)
        tuned = document["classifier_tuned"]
        with np.load(folder / _COUNTS) as arrays:
            tallies = {
                way: Tally(*(arrays[f"{way}_{field.name}"] for field in fields(Tally)))
                for way in (HMM, CLASSIFIER)
            }
        chosen = Tuned(
            Windows(tuned["window"], tuned["step"]),
            tuned["threshold_bits"],
            tuned["mcc"],
            Scale(**tuned["calibration"]),
        )
        turns.append(Measured(document["order"], chosen, tallies, {}))
    return turns


def write_predicted(folder: Path, number: int, turn: Predicted) -> list[Path]:
    """Write what came of one fold without labels; return the files."""
    models = [
        {"model": model_to_dict(model), "held_out_bits": bits.tolist()}
        for model, bits in zip(turn.models, turn.bits, strict=True)
    ]
    write_json(folder / _DOCUMENT, _document(number, {"models": models}))
    return [folder / _DOCUMENT]


def read_predicted(folders: Sequence[Path]) -> list[Predicted]:
    """Read what came of each fold without labels."""
    turns = []
    for folder in folders:
        models = _read(folder)["models"]
        turns.append(
            Predicted(
                [model_from_dict(entry["model"]) for entry in models],
                [np.array(entry["held_out_bits"]) for entry in models],
            )
        )
    return turns


def folders_of(parts: str, trial: Trial) -> list[Path]:
    """Return the folder of each fold, all of them whole and made as is asked for now.

    Raises
    ------
    OutputError
        One is missing or damaged, or was made with something else.
    UsageError
        Nobody can tell, because the sequence is not in a file.
    """
    files, seed = trial.files(), trial.settings.seed
    if "-" in files:
        raise UsageError(
            "--parts needs sequence in files: standard input leaves no checksum to compare"
        )
    # The sequence is read for its checksum once, not for each fold.
    expected = origin(COMMAND, parameters_of(trial, 1), seed, files)
    again = "make it by hmmseg fold --fold {} with the options given here"
    return whole_parts(parts, trial.settings.folds, expected, "fold", again)


def _document(number: int, content: dict[str, Any]) -> dict[str, Any]:
    return {"format": _FORMAT, "version": _VERSION, "fold": number, **content}


def _read(folder: Path) -> dict[str, Any]:
    """Return the document of a folder that has been found whole."""
    found: dict[str, Any] = json.loads((folder / _DOCUMENT).read_bytes())
    return found
