"""The command ``chains``: a region chain and a background chain from labels or calls."""

from pathlib import Path
from typing import Any, NamedTuple

from hmmseg import __version__
from hmmseg.errors import HmmsegError, UsageError
from hmmseg.jobs.labelled import read_labelled
from hmmseg.jobs.results import read_summary
from hmmseg.jobs.sources import Sources
from hmmseg.model import Model, model_to_dict
from hmmseg.outputs import check_target, sha256_of, whole_folder, write_json
from hmmseg.progress import warn
from hmmseg.provenance import write_provenance
from hmmseg.training.labelled import labelled_chains, labelled_words

__all__ = ["Counting", "Known", "chains"]


class Known(NamedTuple):
    """Where known regions come from: one of two places.

    Attributes
    ----------
    labels : str or None
        A BED file.
    calls : str or None
        A folder that ``decode`` wrote: its regions are taken for known, and the chains say that
        they are not independent of the model that called them.
    name : str or None
        Use only intervals of this name, or of this name with a number.
    """

    labels: str | None = None
    calls: str | None = None
    name: str | None = None


class Counting(NamedTuple):
    """What is counted, as :func:`~hmmseg.training.labelled.labelled_chains` takes it.

    Attributes
    ----------
    order : int
    symmetric : bool
    pseudocount : float
    """

    order: int = 0
    symmetric: bool = True
    pseudocount: float = 0.0


def chains(
    sources: Sources,
    output: str,
    known: Known,
    counting: Counting,
    force: bool,
) -> list[tuple[str, int, float]]:
    """Count two chains and write ``region.json`` and ``background.json``.

    Parameters
    ----------
    sources
        The sequence.
    output
        The folder to write.
    known
        Where the regions are.
    counting
        What is counted.
    force
        Replace an earlier result.

    Returns
    -------
    list of (str, int, float)
        Name, words counted and GC of each chain.

    Raises
    ------
    UsageError
        Not exactly one of labels and calls is given.
    LabelError
        The labels do not fit the sequence, or leave one class only.
    """
    check_target(output, force)
    labels, calls, name = known
    if (labels is None) == (calls is None):
        raise UsageError("give either --labels BED or --calls DIR")
    bed = labels if labels is not None else _regions_of(str(calls))
    contigs, truth = read_labelled(sources, bed, name)
    words = [int(w.sum()) for w in labelled_words(contigs, truth, counting.order)]
    try:
        pair = labelled_chains(contigs, truth, *counting)
    except HmmsegError as error:
        raise type(error)(f"{bed}: {error}") from None
    parameters = {
        **sources.parameters(),
        "labels": Path(labels) if labels is not None else None,
        "calls": Path(calls) if calls is not None else None,
        "label": name,
        **counting._asdict(),
    }
    with whole_folder(output, force=force) as folder:
        written = []
        for model, count in zip(pair, words, strict=True):
            document = model_to_dict(model)
            document["training"] = _history(sources, bed, count, independent=calls is None)
            written.append(folder / f"{model.names[0]}.json")
            write_json(written[-1], document)
        write_provenance(folder, "chains", parameters, None, [*sources.files(), bed], written)
    if calls is not None:
        warn(
            "these chains are counted in a model's own calls, so agreement with that model is no "
            "independent evidence"
        )
    return [_row(model, count) for model, count in zip(pair, words, strict=True)]


def _regions_of(calls: str) -> str:
    read_summary(Path(calls))
    return str(Path(calls, "regions.bed"))


def _history(sources: Sources, bed: str, words: int, independent: bool) -> dict[str, Any]:
    return {
        "software": f"hmmseg {__version__}",
        "inputs": [
            {"name": Path(path).name, "sha256": None if path == "-" else sha256_of(path)}
            for path in (*sources.files(), bed)
        ],
        "words": words,
        "counted_in": "labels" if independent else "the calls of a model",
        "independent": independent,
    }


def _row(model: Model, words: int) -> tuple[str, int, float]:
    return model.names[0], words, float(model.gc[0])
