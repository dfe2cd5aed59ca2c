"""The command ``calibrate``: how sure are the regions that were called."""

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hmmseg.errors import ModelError, UsageError
from hmmseg.evidence.assembly import Assembly
from hmmseg.evidence.judgement import Judged, false_regions, judge
from hmmseg.evidence.null_regions import Found, Scoring, call_nulls, replicates_of
from hmmseg.evidence.nulls import NULLS, Null, null_order
from hmmseg.jobs.calibration_files import Outcome, write_calibration
from hmmseg.jobs.called import Called, read_called
from hmmseg.jobs.checks import check
from hmmseg.jobs.refit import Refit, refit_of, trained_on
from hmmseg.model import Model, load_model
from hmmseg.outputs import PROVENANCE, check_target, sha256_of, whole_folder
from hmmseg.progress import Progress
from hmmseg.provenance import earlier_document, write_provenance
from hmmseg.regions.calling import Caller
from hmmseg.regions.odds import LogOdds

__all__ = ["NullPlan", "calibrate", "null_bases_of"]

_TIMES = 20
_FEWEST_BASES, _MOST_BASES = 20_000_000, 500_000_000
_REFITTED = 5_000_000
"""Assemblies below this are trained anew on each null replicate."""


@dataclass(frozen=True)
class NullPlan:
    """What is drawn and how it is judged.

    Parameters
    ----------
    null
        Which null judges the regions; None for ``drift``, or ``chain`` where boundaries are
        judged.
    bases
        Bases of each null; None for 20 times the assembly, within 20 to 500 Mb.
    refit
        Whether the model is trained anew on each replicate; None for below 5 Mb, if it was
        trained on this very sequence.
    q
        Regions up to this q are kept.
    others
        Whether the nulls that do not judge are drawn, too.
    seed
        Of the draws.
    """

    null: str | None = None
    bases: int | None = None
    refit: bool | None = None
    q: float = 0.05
    others: bool = True
    seed: int = 1


def null_bases_of(bases: int) -> int:
    """Return how many bases of null sequence an assembly of some bases gets by default."""
    return min(max(_TIMES * bases, _FEWEST_BASES), _MOST_BASES)


def calibrate(  # noqa: PLR0913 - as many as the command has
    fasta: Sequence[str],
    model_path: str,
    calls: str,
    output: str,
    plan: NullPlan,
    *,
    exclude: str | None = None,
    threads: int = 1,
    force: bool = False,
    reuse: bool = False,
) -> dict[str, Any]:
    """Judge called regions by what is called in sequence without any.

    Parameters
    ----------
    fasta
        Files of the sequence that was called.
    model_path
        The model that called.
    calls
        The folder of calls.
    output
        The folder to write.
    plan
        What is drawn and how it is judged.
    exclude
        Intervals that the calls left out.
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
        The calls were made from other sequence, with another model or other settings.
    ModelError
        The model cannot be trained anew as it was trained, or lacks what a null needs.
    """
    if not reuse:
        check_target(output, force)
    if "-" in fasta:
        raise UsageError("calibrate compares the sequence with the calls; give a file, not '-'")
    model, called = load_model(model_path), read_called(calls)
    given = [path for path in (*fasta, model_path, exclude) if path]
    inputs: list[str | Path] = [*given, Path(calls, PROVENANCE)]
    parameters = {
        "model": Path(model_path),
        "exclude": Path(exclude) if exclude else None,
        "null": plan.null,
        "null_bases": plan.bases,
        "null_refit": plan.refit,
        "q": plan.q,
        "others": plan.others,
    }
    origin = ("calibrate", parameters, plan.seed, inputs)
    if reuse and (earlier := earlier_document("calibration.json", output, *origin)) is not None:
        return earlier
    check_target(output, force)
    called.check_model(model_path, model)
    outcome = _outcome(called, model, (fasta, model_path, exclude), plan, threads)
    with whole_folder(output, force=force) as folder:
        said = check(
            called.sources(fasta, exclude), model, called.table, folder,
            records=called.records, seed=plan.seed, threads=threads,
        )  # fmt: skip
        document = write_calibration(folder, outcome, called, said)
        written = sorted(path for path in folder.iterdir() if path.name != PROVENANCE)
        write_provenance(folder, *origin, written)
    return document


def _outcome(
    called: Called,
    model: Model,
    files: tuple[Sequence[str], str, str | None],
    plan: NullPlan,
    threads: int,
) -> Outcome:
    """Draw all nulls, call them, and judge."""
    fasta, model_path, exclude = files
    assembly = _survey(called, model, fasta, exclude)
    refit = _refit(model, model_path, fasta, plan, assembly)
    scoring = Scoring(not model.background, refit is not None and refit.by_chance)
    nulls, drift = assembly.nulls(model)
    chosen = plan.null or ("chain" if scoring.boundaries else "drift")
    if chosen not in nulls:
        raise ModelError(
            f"{model_path}: every state is reported, so there is no background to draw from; "
            "choose --null chain or drift"
        )
    if not plan.others:
        nulls = {chosen: nulls[chosen]}
    found = _found(called, model, assembly, nulls, scoring, refit, plan, threads)
    reported = {i: name for i, name in enumerate(model.names) if model.reported[i]}
    judged = {
        name: judge(called.table, assembly.contigs, null, scoring, reported, assembly.bases)
        for name, null in found.items()
    }
    tables = [false_regions(n, judged[n], found[n], scoring, reported) for n in found]
    return Outcome(
        null=chosen,
        judged=judged[chosen],
        kept={name: _kept(one, plan.q) for name, one in judged.items()},
        false_regions=tables,
        null_bases={name: one.bases for name, one in found.items()},
        null_regions={name: len(one.scores) for name, one in found.items()},
        bases=assembly.bases,
        order=null_order(model.order),
        drift=drift,
        refitted=refit is not None,
        boundaries=scoring.boundaries,
        q=plan.q,
    )


def _kept(judged: Judged, q: float) -> int:
    return int((judged.regions["q_value"] <= q).sum())


def _survey(called: Called, model: Model, fasta: Sequence[str], exclude: str | None) -> Assembly:
    """Read the sequence once, and make sure that the calls are of it."""
    odds = LogOdds(model, [i for i, kept in enumerate(model.reported) if kept])
    found, seen = Assembly(null_order(model.order)), set()
    for record, contigs in called.sources(fasta, exclude).read_contigs():
        if record.name in called.records:
            called.check_record(record, contigs, odds)
            found.add(len(record), record.circular, contigs)
            seen.add(record.name)
    called.check_whole(seen, found.bases)
    return found


def _refit(
    model: Model, model_path: str, fasta: Sequence[str], plan: NullPlan, assembly: Assembly
) -> Refit | None:
    """Return how the model is trained anew; None if it is not."""
    wanted = plan.refit
    if wanted is None:
        known = "plan" in (model.training or {})
        small = assembly.bases < _REFITTED
        wanted = small and known and all(trained_on(model, sha256_of(path)) for path in fasta)
    return refit_of(model, model_path) if wanted else None


def _found(  # noqa: PLR0917 - one for each thing that bears on it
    called: Called,
    model: Model,
    assembly: Assembly,
    nulls: dict[str, Null],
    scoring: Scoring,
    refit: Refit | None,
    plan: NullPlan,
    threads: int,
) -> dict[str, Found]:
    """Call regions in every null."""
    caller = Caller(model, called.decoder(model), called.threshold, called.filters)
    bases = plan.bases if plan.bases is not None else null_bases_of(assembly.bases)
    replicates = replicates_of(assembly.pieces, bases, plan.seed, whole=refit is not None)
    each = sum(assembly.pieces[at].length for some in replicates.chosen for at in some)
    with Progress(each * len(nulls), "calibrating", "bases") as progress:
        return {
            name: call_nulls(
                null, replicates, caller, scoring, [plan.seed, NULLS.index(name)],
                refit=refit, threads=threads, watch=progress.advance,
            )
            for name, null in nulls.items()
        }  # fmt: skip
