"""The command ``calibrate``: how sure are the regions that were called."""

from collections.abc import Mapping
from typing import Any

from hmmseg.evidence.judgement import false_regions, judge
from hmmseg.evidence.null_regions import Found
from hmmseg.jobs.calibration_files import Outcome, write_calibration
from hmmseg.jobs.called import Called, read_called
from hmmseg.jobs.checks import check
from hmmseg.jobs.null_sequence import CalledFiles, NullPlan, NullSequence, null_sequence_of
from hmmseg.jobs.nulls import read_parts
from hmmseg.model import load_model
from hmmseg.outputs import PROVENANCE, check_target, whole_folder
from hmmseg.provenance import earlier_document, write_provenance

__all__ = ["calibrate"]


def calibrate(
    files: CalledFiles,
    output: str,
    plan: NullPlan,
    *,
    q: float = 0.05,
    drawn: tuple[str, str] | None = None,
    threads: int = 1,
    force: bool = False,
    reuse: bool = False,
) -> dict[str, Any]:
    """Judge called regions by what is called in sequence without any.

    Parameters
    ----------
    files
        The calls, and what they were made from.
    output
        The folder to write.
    plan
        What is drawn.
    q
        Regions up to this q are kept.
    drawn
        Null sequence that was called before: the folder that ``nulls`` has written, and one that
        holds what ``replicate`` has written for each part. None to draw and call it now.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace an earlier result.
    reuse
        Return an earlier result if it is what would be made again.

    Returns
    -------
    dict
        The document ``calibration.json``.

    Raises
    ------
    OutputError
        The calls were made from other sequence, with another model or other settings, or a part
        of the null sequence is missing, damaged or of something else.
    ModelError
        The model cannot be trained anew as it was trained, or lacks what a null needs.
    """
    if not reuse:
        check_target(output, force)
    inputs = files.inputs()
    model, called = load_model(files.model), read_called(files.calls)
    parameters = {**files.parameters(), **plan.parameters(), "q": q}
    origin = ("calibrate", parameters, plan.seed)
    earlier = earlier_document("calibration.json", output, *origin, inputs) if reuse else None
    if earlier is not None:
        return earlier
    check_target(output, force)
    if drawn is None:
        sequence = null_sequence_of(files, model, called, plan)
        found = sequence.call(threads)
    else:
        # The calls were compared with the sequence when this was prepared, and are as they were.
        called.check_intact()
        sequence, found, parts = read_parts(files, plan, *drawn)
        inputs += parts
    outcome = _outcome(called, sequence, found, q)
    with whole_folder(output, force=force) as folder:
        said = check(
            called.sources(files.fasta, files.exclude), model, called.table, folder,
            records=called.records, seed=plan.seed, threads=threads,
        )  # fmt: skip
        document = write_calibration(folder, outcome, called, said)
        written = sorted(path for path in folder.iterdir() if path.name != PROVENANCE)
        write_provenance(folder, *origin, inputs, written)
    return document


def _outcome(
    called: Called, sequence: NullSequence, found: Mapping[str, Found], q: float
) -> Outcome:
    """Judge the regions by every null."""
    assembly, scoring, model = sequence.assembly, sequence.scoring, sequence.caller.model
    reported = {i: name for i, name in enumerate(model.names) if model.reported[i]}
    judged = {
        name: judge(called.table, assembly.contigs, null, scoring, reported, assembly.bases)
        for name, null in found.items()
    }
    tables = [false_regions(n, judged[n], found[n], scoring, reported) for n in found]
    return Outcome(
        null=sequence.judging,
        judged=judged[sequence.judging],
        kept={n: int((one.regions["q_value"] <= q).sum()) for n, one in judged.items()},
        false_regions=tables,
        null_bases={name: one.bases for name, one in found.items()},
        null_regions={name: len(one.scores) for name, one in found.items()},
        bases=assembly.bases,
        order=assembly.order,
        drift=assembly.drift,
        refitted=sequence.refit is not None,
        boundaries=scoring.boundaries,
        q=q,
    )
