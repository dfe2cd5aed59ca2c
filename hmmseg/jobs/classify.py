"""The command ``classify``: regions by two Markov chains in sliding windows."""

from pathlib import Path
from typing import Any, NamedTuple

from hmmseg.errors import ModelError, SequenceError, UsageError
from hmmseg.evidence.tuning import ScoreCounts, Tuned
from hmmseg.jobs.decode import Run, write_result
from hmmseg.jobs.sources import Sources
from hmmseg.model import load_model
from hmmseg.outputs import PROVENANCE, check_target, whole_folder, write_json
from hmmseg.progress import warn
from hmmseg.provenance import write_provenance
from hmmseg.regions.intervals import Filters
from hmmseg.regions.labels import Labels
from hmmseg.regions.windows import ChainPair, WindowCaller, Windows

__all__ = ["Rule", "classify", "read_pair"]


class Rule(NamedTuple):
    """When a window is a region.

    Attributes
    ----------
    windows : Windows
        Length and step.
    threshold : float or None
        Bits above which it is; None for 0, or for the labels' choice.
    labels : str or None
        Known regions as BED, on which the threshold is chosen.
    """

    windows: Windows
    threshold: float | None = None
    labels: str | None = None


def read_pair(region: str, background: str) -> ChainPair:
    """Read two chains.

    Raises
    ------
    ModelError
        One is not valid, or they do not fit together; the message names the files.
    """
    models = load_model(region), load_model(background)
    try:
        return ChainPair(*models)
    except ModelError as error:
        raise ModelError(f"{region}, {background}: {error}") from None


def classify(
    sources: Sources,
    chains: tuple[str, str],
    output: str,
    *,
    rule: Rule,
    filters: Filters,
    threads: int,
    force: bool,
) -> dict[str, Any]:
    """Call regions of every record and write a folder as ``decode`` does.

    Parameters
    ----------
    sources
        The sequence.
    chains
        Model documents of the region and the background chain.
    output
        The folder to write.
    rule
        When a window is a region.
    filters
        Merging and shortest length.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace an earlier result.

    Returns
    -------
    dict
        The document ``summary.json``.

    Raises
    ------
    UsageError
        A threshold and labels are both given, or windows leave bases out.
    ModelError
        The chains do not fit together.
    LabelError
        The labels do not fit the sequence, or are of one class only.
    SequenceError
        No contig is as long as the window.
    """
    check_target(output, force)
    windows, threshold, labels = rule
    windows.check()
    if labels is not None and threshold is not None:
        raise UsageError("--threshold and --labels exclude each other; give one of them")
    region, background = chains
    pair = read_pair(region, background)
    tuned = _on_labels(pair, windows, sources, labels, threads) if labels is not None else None
    chosen = tuned.threshold if tuned else threshold or 0.0
    caller = WindowCaller(pair, windows, chosen, filters, threads)
    parameters = {
        **sources.parameters(),
        "region_chain": Path(region),
        "background_chain": Path(background),
        **windows._asdict(),
        "threshold_bits": chosen,
        "labels": Path(labels) if labels is not None else None,
        "min_length": filters.min_length,
        "merge_gap": filters.merge_gap,
    }
    inputs = [*sources.files(), region, background, *([labels] if labels is not None else [])]
    with whole_folder(output, force=force) as folder:
        run = Run(caller, folder)
        found = run.over(sources)
        _check_called(found[0].contigs, run.not_called, windows)
        summary = write_result(folder, *found)
        summary["classifier"] = {
            **windows._asdict(),
            "threshold_bits": chosen,
            "mcc_on_labels": tuned.mcc if tuned else None,
            "contigs_shorter_than_window": run.not_called,
        }
        write_json(folder / "summary.json", summary)
        written = sorted(path for path in folder.iterdir() if path.name != PROVENANCE)
        write_provenance(folder, "classify", parameters, None, inputs, written)
    return summary


def _on_labels(
    pair: ChainPair, windows: Windows, sources: Sources, labels: str, threads: int
) -> Tuned:
    if "-" in sources.fasta:
        raise UsageError(
            "--labels reads the sequence twice, which standard input does not allow; give a file"
        )
    known = Labels.read(labels)
    counts = ScoreCounts(pair, windows, threads)
    lengths = {}
    short = called = 0
    for record, contigs in sources.read_contigs():
        lengths[record.name] = len(record)
        for contig in contigs:
            fits = len(contig) >= windows.window
            short, called = short + (not fits), called + fits
            counts.add(contig, known.on(contig))
    known.check(lengths, sources.selects)
    _check_called(called, short, windows, quiet=True)
    return counts.choose()


def _check_called(called: int, short: int, windows: Windows, quiet: bool = False) -> None:
    if called == 0:
        raise SequenceError(
            f"the window of {windows.window} bases is longer than every contig; give a shorter "
            "--window"
        )
    if short and not quiet:
        warn(f"{short} contigs are shorter than the window of {windows.window} bases: not called")
