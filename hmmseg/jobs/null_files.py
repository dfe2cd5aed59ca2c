"""Null sequence that is not drawn yet, and what was found in parts of it, as files.

Arrays stand in NumPy's ``.npz``, exact to the last bit and without dates.
"""

import json
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import OutputError
from hmmseg.evidence.assembly import Assembly
from hmmseg.evidence.drift import Drift
from hmmseg.evidence.null_regions import Found
from hmmseg.evidence.nulls import Piece
from hmmseg.jobs.null_sequence import NullPlan, NullSequence
from hmmseg.jobs.refit import refit_of
from hmmseg.model import load_model
from hmmseg.outputs import write_json
from hmmseg.regions.calling import Caller
from hmmseg.regions.intervals import Filters
from hmmseg.sequence.contigs import Contig

__all__ = ["read_found", "read_null_sequence", "write_found", "write_null_sequence"]

FORMAT = "hmmseg-nulls"
VERSION = 1

_DOCUMENT, _ARRAYS, _MODEL, _FOUND = "nulls.json", "assembly.npz", "model.json", "regions.npz"

Arrays = Mapping[str, NDArray[Any]]


def write_null_sequence(folder: Path, sequence: NullSequence, model: str) -> None:
    """Write all that it takes to draw and call null sequence.

    Parameters
    ----------
    folder
        Where to.
    sequence
        What is drawn.
    model
        The model document, which is copied.
    """
    caller, assembly = sequence.caller, sequence.assembly
    document = {
        "format": FORMAT,
        "version": VERSION,
        "plan": asdict(sequence.plan),
        "refit": sequence.refit is not None,
        "decoder": caller.decoder,
        "threshold": caller.threshold,
        "filters": caller.filters._asdict(),
        "bases": assembly.bases,
        "order": assembly.order,
        "drift": {key: getattr(assembly.drift, key) for key in ("mean", "spread", "spans")},
    }
    names = {piece.record: piece.contig.record for piece in assembly.pieces}
    document["records"] = [names.get(at) for at in range(len(assembly.drift.levels))]
    write_json(folder / _DOCUMENT, document)
    (folder / _MODEL).write_bytes(Path(model).read_bytes())
    levels = assembly.drift.levels
    arrays = {
        "counts": assembly.counts,
        "levels": np.concatenate(levels),
        "windows": np.array([len(one) for one in levels], np.int64),
        **_packed("contigs", assembly.contigs),
        **_packed("pieces", assembly.pieces),
    }
    np.savez(folder / _ARRAYS, **arrays)  # type: ignore[arg-type]


def read_null_sequence(folder: Path) -> NullSequence:
    """Read what `write_null_sequence` has written, of a folder that has been found whole.

    Raises
    ------
    OutputError
        The folder holds nothing of the kind.
    """
    try:
        document = json.loads((folder / _DOCUMENT).read_bytes())
        if document["format"] != FORMAT or document["version"] != VERSION:
            raise ValueError("another document")
    except (OSError, ValueError, KeyError, TypeError):
        raise OutputError(
            f"{folder}: holds no null sequence; give a folder written by hmmseg nulls"
        ) from None
    with np.load(folder / _ARRAYS) as arrays:
        assembly = _assembly(document, arrays)
    model = load_model(folder / _MODEL)
    filters = Filters(**document["filters"])
    caller = Caller(model, document["decoder"], document["threshold"], filters)
    refit = refit_of(model, str(folder / _MODEL)) if document["refit"] else None
    return NullSequence(assembly, caller, NullPlan(**document["plan"]), refit)


def write_found(folder: Path, found: Mapping[str, Found]) -> None:
    """Write what was found in each null."""
    arrays: dict[str, NDArray[Any]] = {}
    for name, one in found.items():
        arrays |= {
            f"{name}_bases": np.array(one.bases),
            f"{name}_classes": one.classes,
            f"{name}_scores": one.scores,
        }
    np.savez(folder / _FOUND, **arrays)  # type: ignore[arg-type]


def read_found(folder: Path, names: Sequence[str]) -> dict[str, Found]:
    """Read what was found in nulls of these names."""
    with np.load(folder / _FOUND) as arrays:
        return {
            name: Found(
                int(arrays[f"{name}_bases"]), arrays[f"{name}_classes"], arrays[f"{name}_scores"]
            )
            for name in names
        }


def _packed(what: str, pieces: Sequence[Piece]) -> dict[str, NDArray[Any]]:
    """Return pieces as a few arrays, whose names begin alike."""
    places = [
        (p.record, p.contig.start, p.length, p.contig.closed, p.contig.record_length)
        for p in pieces
    ]
    return {
        f"{what}_places": np.array(places, np.int64).reshape(-1, 5),
        f"{what}_missing": np.concatenate([p.missing for p in pieces]),
        f"{what}_runs": np.array([len(p.missing) for p in pieces], np.int64),
    }


def _unpacked(what: str, names: Sequence[str], arrays: Arrays) -> list[Piece]:
    places = arrays[f"{what}_places"].tolist()
    missing = _apart(arrays[f"{what}_missing"], arrays[f"{what}_runs"])
    found = []
    for (record, start, length, closed, whole), runs in zip(places, missing, strict=True):
        contig = Contig(names[record], start, np.empty(0, np.uint8), bool(closed), whole)
        found.append(Piece(contig, length, runs, record))
    return found


def _assembly(document: Mapping[str, Any], arrays: Arrays) -> Assembly:
    drift = Drift(_apart(arrays["levels"], arrays["windows"]), **document["drift"])
    names = document["records"]
    contigs, pieces = (_unpacked(what, names, arrays) for what in ("contigs", "pieces"))
    bases, order = document["bases"], document["order"]
    return Assembly(contigs, pieces, bases, order, arrays["counts"], drift)


def _apart(together: NDArray[Any], lengths: NDArray[np.int64]) -> list[NDArray[Any]]:
    """Return stretches of these lengths."""
    return np.split(together, np.cumsum(lengths)[:-1])
