"""Null sequence for a folder of calls: how much of which kind, and how it is called."""

from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError, UsageError
from hmmseg.evidence.amount import null_bases_of
from hmmseg.evidence.assembly import Assembly, AssemblySurvey
from hmmseg.evidence.null_regions import (
    Found,
    Replicates,
    Scoring,
    call_nulls,
    replicates_of,
)
from hmmseg.evidence.nulls import NULLS, Null, null_order
from hmmseg.jobs.called import Called
from hmmseg.jobs.refit import Refit, refit_of, trained_on
from hmmseg.model import Model
from hmmseg.outputs import PROVENANCE, sha256_of
from hmmseg.progress import Progress
from hmmseg.regions.calling import Caller
from hmmseg.regions.odds import LogOdds

__all__ = ["CalledFiles", "NullPlan", "NullSequence", "null_sequence_of", "part_numbers"]

_REFITTED = 5_000_000
"""Assemblies below this are trained anew on each null replicate."""


@dataclass(frozen=True)
class CalledFiles:
    """A folder of calls, and the files that it was made from.

    Parameters
    ----------
    fasta
        Files of the sequence that was called.
    model
        The model that called.
    calls
        The folder of calls.
    exclude
        Intervals that the calls left out.
    """

    fasta: tuple[str, ...]
    model: str
    calls: str
    exclude: str | None = None

    def inputs(self) -> list[str | Path]:
        """Return the files that bear on the result.

        Raises
        ------
        UsageError
            The sequence is on standard input, which can be read once only.
        """
        if "-" in self.fasta:
            raise UsageError("the sequence is compared with the calls; give a file, not '-'")
        given = [path for path in (*self.fasta, self.model, self.exclude) if path]
        return [*given, Path(self.calls, PROVENANCE)]

    def parameters(self) -> dict[str, Any]:
        """Return what is to stand in the provenance."""
        return {
            "model": Path(self.model),
            "exclude": Path(self.exclude) if self.exclude else None,
        }


@dataclass(frozen=True)
class NullPlan:
    """What is drawn.

    Parameters
    ----------
    null
        Which null judges the regions; None for ``drift``, or ``chain`` where boundaries are
        files.
    bases
        Bases of each null; None for 20 times the assembly, within 20 to 500 Mb.
    refit
        Whether the model is trained anew on each replicate; None for below 5 Mb, if it was
        trained on this very sequence.
    others
        Whether the nulls that do not judge are drawn, too.
    seed
        Of the draws.
    """

    null: str | None = None
    bases: int | None = None
    refit: bool | None = None
    others: bool = True
    seed: int = 1

    def parameters(self) -> dict[str, Any]:
        """Return what is to stand in the provenance, but for the seed."""
        return {
            "null": self.null,
            "null_bases": self.bases,
            "null_refit": self.refit,
            "others": self.others,
        }


@dataclass(frozen=True, eq=False)
class NullSequence:
    """Null sequence of an assembly, none of it drawn yet.

    Attributes
    ----------
    assembly : Assembly
    caller : Caller
        How the assembly was called.
    plan : NullPlan
    refit : Refit or None
        How the model is trained anew on each replicate; None if it is not.
    """

    assembly: Assembly
    caller: Caller
    plan: NullPlan
    refit: Refit | None

    @cached_property
    def scoring(self) -> Scoring:
        """What is counted."""
        by_chance = self.refit is not None and self.refit.by_chance
        return Scoring(not self.caller.model.background, by_chance)

    @property
    def judging(self) -> str:
        """Name of the null that judges."""
        return self.plan.null or ("chain" if self.scoring.boundaries else "drift")

    @cached_property
    def nulls(self) -> dict[str, Null]:
        """What is drawn, by name."""
        found = self.assembly.nulls(self.caller.model)
        return found if self.plan.others else {self.judging: found[self.judging]}

    @cached_property
    def replicates(self) -> Replicates:
        """The replicates of the assembly, the same for each null."""
        bases = self.plan.bases
        if bases is None:
            bases = null_bases_of(self.assembly.bases)
        whole = self.refit is not None
        return replicates_of(self.assembly.pieces, bases, self.plan.seed, whole=whole)

    def call(self, threads: int, part: int = 1, of: int = 1) -> dict[str, Found]:
        """Draw and call null sequence, all of it or one of several parts.

        Parameters
        ----------
        threads
            Threads to use; the result does not depend on it.
        part, of
            Which part, from 1, of how many.

        Returns
        -------
        mapping of str to Found
            By the null's name.
        """
        replicates = self.replicates
        mine = part_numbers(replicates.bases, len(self.nulls), of) == part
        found = {}
        with Progress(int((mine * replicates.bases).sum()), "calibrating", "bases") as progress:
            for (name, null), chosen in zip(self.nulls.items(), mine, strict=True):
                found[name] = call_nulls(
                    null, replicates.taken(chosen), self.caller, self.scoring,
                    [self.plan.seed, NULLS.index(name)],
                    refit=self.refit, threads=threads, watch=progress.advance,
                )  # fmt: skip
        return found


def part_numbers(bases: NDArray[np.int64], nulls: int, of: int) -> NDArray[np.int64]:
    """Return the part, from 1, in which each task is done; parts are alike in bases.

    Parameters
    ----------
    bases
        int64[task]: of each task, the same for each null.
    nulls
        How many nulls there are.
    of
        How many parts there are.

    Returns
    -------
    int64[null, task]
    """
    ends = np.cumsum(np.tile(bases, nulls))
    begins = ends - np.tile(bases, nulls)
    return (1 + begins * of // ends[-1]).reshape(nulls, -1)


def null_sequence_of(
    files: CalledFiles, model: Model, called: Called, plan: NullPlan
) -> NullSequence:
    """Return the null sequence for calls, after they were compared with model and sequence.

    Parameters
    ----------
    files
        The files.
    model, called
        What is in them.
    plan
        What is drawn.

    Raises
    ------
    OutputError
        The calls were made from other sequence, with another model or other settings.
    ModelError
        The model cannot be trained anew as it was trained, or lacks what a null needs.
    """
    called.check_model(files.model, model)
    assembly = _surveyed(files, model, called)
    caller = Caller(model, called.decoder(model), called.threshold, called.filters)
    refit = refit_of(model, files.model) if _refitted(files, model, plan, assembly) else None
    sequence = NullSequence(assembly, caller, plan, refit)
    if sequence.judging == "background" and not model.background:
        raise ModelError(
            f"{files.model}: every state is reported, so there is no background to draw from; "
            "choose --null chain or drift"
        )
    return sequence


def _surveyed(files: CalledFiles, model: Model, called: Called) -> Assembly:
    """Read the sequence once, and make sure that the calls are of it."""
    odds = LogOdds(model, [i for i, kept in enumerate(model.reported) if kept])
    survey, seen = AssemblySurvey(null_order(model.order)), set()
    for record, contigs in called.sources(files.fasta, files.exclude).read_contigs():
        if record.name in called.records:
            called.check_record(record, contigs, odds)
            survey.add(len(record), record.circular, contigs)
            seen.add(record.name)
    called.check_whole(seen, survey.bases)
    return survey.assembly()


def _refitted(files: CalledFiles, model: Model, plan: NullPlan, assembly: Assembly) -> bool:
    """Tell whether the model is trained anew on each replicate."""
    if plan.refit is not None:
        return plan.refit
    known = "plan" in (model.training or {})
    small = assembly.bases < _REFITTED
    return small and known and all(trained_on(model, sha256_of(path)) for path in files.fasta)
