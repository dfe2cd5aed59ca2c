"""The command ``annotate``: the whole job, from an assembly to called regions and their report.

Every stage is that of the command of its name, with what was decided as its options. A stage
whose result is there, and would come out the same, is not done again.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from hmmseg.errors import HmmsegError, OutputError, UsageError
from hmmseg.evidence.turns import Settings
from hmmseg.jobs.calibrate import calibrate
from hmmseg.jobs.compare import compare_once
from hmmseg.jobs.decide import decide
from hmmseg.jobs.decisions import Decisions, read_decisions, to_yaml
from hmmseg.jobs.decode import decode
from hmmseg.jobs.explain import Explained
from hmmseg.jobs.features import measure_features
from hmmseg.jobs.null_sequence import CalledFiles, NullPlan
from hmmseg.jobs.report import report
from hmmseg.jobs.sources import Sources
from hmmseg.jobs.survey import survey
from hmmseg.jobs.train import Origin, train
from hmmseg.model.presets import load_preset
from hmmseg.outputs import whole_file
from hmmseg.provenance import provenance_path
from hmmseg.regions.intervals import Filters
from hmmseg.training.restarts import Plan

__all__ = ["Annotation", "annotate"]

DECISIONS = "decisions.yaml"
FEATURES = "features.tsv"
_RESULTS = {
    "survey": "survey",
    "train": "model.json",
    "decode": "calls",
    "calibrate": "calibration",
    "compare": "comparison",
    "report": "report.html",
}

_Say = Callable[[str], None]


@dataclass(frozen=True)
class Annotation:
    """What a whole job ended with.

    Attributes
    ----------
    model : Explained
        The model in words.
    calls : dict
        The document ``summary.json`` of the calls.
    calibration : dict or None
        The document ``calibration.json``; None if that was not asked.
    verdict : str or None
        Whether a hidden state gains anything over a chain; None if that was not asked.
    features : list of list of str
        How regions and known features overlap, as of
        :func:`~hmmseg.jobs.features.measure_features`.
    """

    model: Explained
    calls: dict[str, Any]
    calibration: dict[str, Any] | None
    verdict: str | None
    features: list[list[str]]


def annotate(
    sources: Sources,
    output: str,
    *,
    preset: str | None,
    decisions_file: str | None,
    features: Sequence[str] = (),
    threads: int,
    force: bool,
    say: _Say,
) -> Annotation:
    """Survey, decide, train and call.

    Parameters
    ----------
    sources
        The assembly.
    output
        The folder to write; an earlier one is completed.
    preset
        A preset to use; None leaves the choice open.
    decisions_file
        Decisions to obey instead of deciding.
    features
        BED or GFF3 files of known features, with which the regions are compared in the end.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace earlier results that were made otherwise.
    say
        Called with a line about each stage.

    Raises
    ------
    OutputError
        An earlier result was made from other sequence or by other decisions, and ``force`` is
        not given.
    UsageError
        The decisions cannot be obeyed.
    """
    if "-" in sources.fasta:
        raise UsageError("annotate reads the sequence several times; give a file, not '-'")
    folder = Path(output)
    job = _Job(folder, threads, force, say)
    surveyed = job.stage(
        "survey",
        lambda replaces: survey(sources, str(folder / _RESULTS["survey"]), replaces, reuse=True),
    )
    decisions = _decisions(job, surveyed, sources, preset, decisions_file)
    model, calls = job.model(sources, decisions), job.calls(sources, decisions)
    sure = job.calibration(sources, decisions) if decisions["calibrate"] == "run" else None
    verdict = job.verdict(sources, decisions) if decisions["compare"] == "run" else None
    rows: list[list[str]] = []
    if features:
        table = folder / FEATURES
        rows = measure_features(folder / _RESULTS["decode"], features, table)
        say(f"features: done, {table}")
    job.report()
    return Annotation(model, calls, sure, verdict, rows)


def _decisions(
    job: "_Job",
    surveyed: dict[str, Any],
    sources: Sources,
    preset: str | None,
    decisions_file: str | None,
) -> Decisions:
    """Decide, or read what was decided, and write it down."""
    path = job.folder / DECISIONS
    if decisions_file is None and preset is None and path.exists():
        job.say(f"decisions: as they stand in {path}")
        return read_decisions(path)
    if decisions_file is not None:
        decisions, text = read_decisions(decisions_file), Path(decisions_file).read_text("utf-8")
    else:
        decisions = decide(surveyed, sources, preset)
        text = to_yaml(decisions)
    if path.exists() and path.read_text("utf-8") == text:
        job.say("decisions: already there")
        return decisions
    if path.exists() and not job.force:
        raise OutputError(f"{path}: other decisions stand there; give --force to replace them")
    with whole_file(path, force=job.force) as temporary:
        temporary.write_text(text, encoding="utf-8")
    job.say(f"decisions: preset {decisions['preset']}, {decisions.made['preset'].because}")
    return decisions


class _Job:
    """The stages of one job in one folder."""

    def __init__(self, folder: Path, threads: int, force: bool, say: _Say) -> None:
        self.folder = folder
        self.force = force
        self.say = say
        self._threads = threads

    def stage(self, name: str, work: Callable[[bool], Any]) -> Any:
        """Do one stage, or find that it is done."""
        result = self.folder / _RESULTS[name]
        before = _stamp(result)
        try:
            found = work(self.force)
        except OutputError as error:
            if before is None or self.force:
                raise
            raise OutputError(
                f"{result}: made from other sequence or by other decisions; give --force to "
                f"make it again, or another folder ({error})"
            ) from None
        again = before is not None and before == _stamp(result)
        self.say(f"{name}: {'already there' if again else 'done'}, {result}")
        return found

    def model(self, sources: Sources, decisions: Decisions) -> Explained:
        """Train."""
        origin = Origin(wanted=_wanted(decisions)) if decisions["preset"] else Origin()
        plan = Plan(
            states=decisions["states"],
            order=decisions["order"],
            restarts=decisions["restarts"],
            seed=decisions["seed"],
            max_iterations=decisions["max_iterations"],
            pseudocount=origin.wanted.pseudocount if origin.wanted else 0.0,
        )
        own = replace(_obeying(sources, decisions), without=tuple(decisions["train_without"]))
        model: Explained = self.stage(
            "train",
            lambda replaces: train(
                own, str(self.folder / _RESULTS["train"]), plan, origin, threads=self._threads,
                force=replaces, train_bases=decisions["train_bases"], reuse=True,
            ),
        )  # fmt: skip
        return model

    def calls(self, sources: Sources, decisions: Decisions) -> dict[str, Any]:
        """Call regions."""
        calls: dict[str, Any] = self.stage(
            "decode",
            lambda replaces: decode(
                _obeying(sources, decisions),
                str(self.folder / _RESULTS["train"]),
                str(self.folder / _RESULTS["decode"]),
                decoder=decisions["decoder"],
                threshold=decisions["threshold"],
                filters=Filters(
                    decisions["min_length"], decisions["merge_gap"], decisions["end_window"]
                ),
                threads=self._threads,
                force=replaces,
                reuse=True,
            ),
        )
        return calls

    def calibration(self, sources: Sources, decisions: Decisions) -> dict[str, Any]:
        """Tell how sure the regions are, by the null that judges them alone."""
        plan = NullPlan(bases=decisions["null_bases"], seed=decisions["seed"], others=False)
        model, calls, output = (
            str(self.folder / _RESULTS[stage]) for stage in ("train", "decode", "calibrate")
        )
        files = CalledFiles(sources.fasta, model, calls, sources.exclude)
        found: dict[str, Any] = self.stage(
            "calibrate",
            lambda replaces: calibrate(
                files, output, plan, threads=self._threads, force=replaces, reuse=True
            ),
        )
        return found

    def verdict(self, sources: Sources, decisions: Decisions) -> str:
        """Compare with chains."""
        settings = Settings(seed=decisions["seed"], threads=self._threads)
        words: str = self.stage(
            "compare",
            lambda replaces: compare_once(
                _obeying(sources, decisions), str(self.folder / _RESULTS["compare"]), settings,
                replaces,
            ),
        )  # fmt: skip
        return words

    def report(self) -> None:
        """Make the page of all that stands in the folder."""
        page = self.folder / _RESULTS["report"]
        # It follows from the files beside it, so an earlier one may always be replaced.
        ours = provenance_path(page).is_file()
        self.stage(
            "report",
            lambda replaces: report(
                [str(self.folder)], str(page), figures=None, force=replaces or ours, reuse=True
            ),
        )


def _wanted(decisions: Decisions) -> Any:
    """Return the preset, with the order that was decided."""
    wanted = load_preset(decisions["preset"])
    if len(wanted.states) != decisions["states"]:
        raise UsageError(
            f"decisions: states: preset {wanted.name} has {len(wanted.states)}, not "
            f"{decisions['states']}; change the preset, or set it to null"
        )
    try:
        return wanted.with_order(decisions["order"])
    except HmmsegError as error:
        raise UsageError(f"decisions: order: {error}") from None


def _obeying(sources: Sources, decisions: Decisions) -> Sources:
    return replace(sources, soft_mask=decisions["soft_mask"], circular=tuple(decisions["circular"]))


def _stamp(path: Path) -> tuple[int, int] | None:
    """Return what changes when a result is replaced; None if there is none."""
    try:
        found = path.stat()
    except OSError:
        return None
    return found.st_ino, found.st_mtime_ns
