"""What a result folder holds: each stage's files, if the stage was run."""

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pandas as pd
import yaml

from hmmseg.errors import OutputError
from hmmseg.model import Model, load_model
from hmmseg.outputs import sha256_of
from hmmseg.progress import warn
from hmmseg.provenance import provenance_path, read_provenance
from hmmseg.tracks.sizes import read_chrom_sizes
from hmmseg.tracks.table import read_regions_table

__all__ = ["Results", "read_results"]

_SURVEY, _MODEL, _CALLS = "survey", "model.json", "calls"
_CALIBRATION, _COMPARISON, _SELECTION = "calibration", "comparison", "selection"
_DIFF = "diff"
_STAGES = (_SURVEY, _MODEL, _CALLS, _CALIBRATION, _COMPARISON, _SELECTION, _DIFF)

_WORDS = ("record", "state", "null", "old_record", "new_record", "old_region", "new_region")
"""Columns that hold words even where they look like numbers."""
_COMPARED = ("accuracy", "heldout", "simulated")
_TABLES = (
    "false_regions",
    "resolution",
    "detection",
    "reliability",
    "false_discovery",
    "homogeneity",
    "lengths",
)


@dataclass(frozen=True, eq=False)
class Results:
    """What was found about one assembly; a stage that was not run is None or empty.

    Attributes
    ----------
    folder : Path
        Where it is.
    name : str
        What the assembly is called: the name of the folder.
    survey : dict or None
        The document of the survey.
    model : Model or None
        The trained model.
    calls : dict or None
        The summary of the calls.
    regions : DataFrame or None
        The regions called, with what a calibration says of each.
    record_lengths : dict
        Length of every record in bases; of the calls, else of the survey.
    tracks : dict
        Posterior track of each reported state.
    gc_track : Path or None
        G+C in windows.
    calibration : dict or None
        The document of the calibration.
    tables : dict
        Tables of the calibration by name; those that are there.
    comparison : dict or None
        The document of the comparison with chains.
    selection : dict or None
        The document of the selection.
    candidates : DataFrame or None
        The models of the selection.
    drawings : dict
        Figures, as SVG, that the stages have drawn.
    decisions : dict or None
        What was decided for the whole job.
    features : DataFrame or None
        Overlap with known features.
    diff : dict or None
        What became of records and regions since an earlier version.
    changes : DataFrame or None
        The same region by region.
    provenance : dict
        Provenance of each stage by its name.
    files : tuple of Path
        Everything that was read.
    """

    folder: Path
    name: str
    survey: dict[str, Any] | None
    model: Model | None
    calls: dict[str, Any] | None
    regions: pd.DataFrame | None
    record_lengths: dict[str, int]
    tracks: dict[str, Path]
    gc_track: Path | None
    calibration: dict[str, Any] | None
    tables: dict[str, pd.DataFrame]
    comparison: dict[str, Any] | None
    selection: dict[str, Any] | None
    candidates: pd.DataFrame | None
    drawings: dict[str, bytes]
    decisions: dict[str, Any] | None
    features: pd.DataFrame | None
    diff: dict[str, Any] | None
    changes: pd.DataFrame | None
    provenance: dict[str, dict[str, Any]]
    files: tuple[Path, ...]


@dataclass
class _Reader:
    """Reads files that may be absent, and remembers those that are there."""

    folder: Path
    files: list[Path] = field(default_factory=list)

    def found(self, *parts: str) -> Path | None:
        path = self.folder.joinpath(*parts)
        if not path.is_file():
            return None
        self.files.append(path)
        return path

    def document(self, *parts: str) -> dict[str, Any] | None:
        path = self.found(*parts)
        if path is None:
            return None
        try:
            text = path.read_text(encoding="utf-8")
            document = yaml.safe_load(text) if path.suffix == ".yaml" else json.loads(text)
        except (ValueError, yaml.YAMLError) as error:
            reason = str(error).splitlines()[0]
            raise OutputError(f"{path}: cannot be read ({reason}); make it again") from None
        if not isinstance(document, dict):
            raise OutputError(f"{path}: not a document of this program; make it again")
        return document

    def table(self, *parts: str) -> pd.DataFrame | None:
        path = self.found(*parts)
        if path is None:
            return None
        try:
            return pd.read_csv(
                path, sep="\t", quoting=3, na_values=["NA"], keep_default_na=False,
                dtype=dict.fromkeys(_WORDS, str),
            )  # fmt: skip
        except (ValueError, pd.errors.ParserError) as error:
            reason = str(error).splitlines()[0]
            raise OutputError(f"{path}: not a table ({reason}); make it again") from None


def read_results(folder: str | Path, name: str | None = None) -> Results:
    """Read what stands in the result folder of an assembly.

    Parameters
    ----------
    folder
        Written by ``annotate`` or by the workflow.
    name
        What to call the assembly; the folder's name by default.

    Raises
    ------
    OutputError
        Nothing of a result is there, or a file of it is damaged.
    """
    root = Path(folder)
    if not root.is_dir():
        raise OutputError(f"{folder}: no such folder; give one that annotate or the workflow wrote")
    if not any((root / stage).exists() for stage in _STAGES):
        raise OutputError(
            f"{folder}: holds none of {', '.join(_STAGES)}; give a folder that annotate or the "
            "workflow wrote for an assembly"
        )
    reader = _Reader(root)
    survey = reader.document(_SURVEY, "survey.json")
    calls = reader.document(_CALLS, "summary.json")
    regions = _regions(reader, calls)
    judged = _judged(reader, regions)
    stale = regions is not None and judged is None and (root / _CALIBRATION).exists()
    tables = {} if stale else dict(_tables(reader))
    results = Results(
        folder=root,
        name=name or root.resolve().name,
        survey=survey,
        model=_model(reader),
        calls=calls,
        regions=regions if judged is None else judged,
        record_lengths=_lengths(reader, survey),
        tracks=_tracks(reader, calls),
        gc_track=reader.found(_SURVEY, "gc.bw"),
        calibration=None if stale else reader.document(_CALIBRATION, "calibration.json"),
        tables=tables,
        comparison=reader.document(_COMPARISON, "comparison.json"),
        selection=reader.document(_SELECTION, "selection.json"),
        candidates=reader.table(_SELECTION, "selection.tsv"),
        drawings=_drawings(reader),
        decisions=reader.document("decisions.yaml"),
        features=reader.table("features.tsv"),
        diff=reader.document(_DIFF, "diff.json"),
        changes=reader.table(_DIFF, "regions.tsv"),
        provenance=dict(_provenances(reader)),
        files=(),
    )
    _warn_of_other_model(results)
    object.__setattr__(results, "files", tuple(sorted(set(reader.files))))
    return results


def _model(reader: _Reader) -> Model | None:
    path = reader.found(_MODEL)
    return None if path is None else load_model(path)


def _regions(reader: _Reader, calls: Mapping[str, Any] | None) -> pd.DataFrame | None:
    path = reader.found(_CALLS, "regions.tsv")
    return None if path is None or calls is None else read_regions_table(path)


def _judged(reader: _Reader, regions: pd.DataFrame | None) -> pd.DataFrame | None:
    """Return the table of the regions with what a calibration of the same regions says of each."""
    path = reader.found(_CALIBRATION, "regions.tsv")
    if path is None or regions is None:
        return None
    judged = read_regions_table(path)
    keys = ["region_id", "record", "start", "end", "mean_posterior"]
    if len(judged) == len(regions) and bool((judged[keys] == regions[keys]).all(axis=None)):
        return judged
    warn(
        f"{path}: not of the regions that stand in {reader.folder / _CALLS} now, so the page "
        "leaves this calibration out; calibrate again"
    )
    return None


def _tables(reader: _Reader) -> Iterator[tuple[str, pd.DataFrame]]:
    for name in _TABLES:
        table = reader.table(_CALIBRATION, f"{name}.tsv")
        if table is not None:
            yield name, table


def _warn_of_other_model(results: Results) -> None:
    """Warn if the calls were made by another model than the one beside them."""
    path = results.folder / _MODEL
    for entry in results.provenance.get(_CALLS, {}).get("inputs", ()):
        if entry["name"] == _MODEL and path.is_file() and entry["sha256"] != sha256_of(path):
            warn(f"{path}: not the model that made the calls beside it; call again")


def _lengths(reader: _Reader, survey: Mapping[str, Any] | None) -> dict[str, int]:
    path = reader.found(_CALLS, "chrom.sizes")
    if path is not None:
        return read_chrom_sizes(path)
    records: Sequence[Mapping[str, Any]] = (survey or {}).get("records", ())
    return {row["record"]: row["length"] for row in records}


def _tracks(reader: _Reader, calls: Mapping[str, Any] | None) -> dict[str, Path]:
    states = (calls or {}).get("regions", {})
    found = {state: reader.found(_CALLS, f"{state}.posterior.bw") for state in states}
    return {state: path for state, path in found.items() if path is not None}


def _drawings(reader: _Reader) -> dict[str, bytes]:
    drawn = [(_SELECTION, "selection"), *((_COMPARISON, name) for name in _COMPARED)]
    found = {name: reader.found(stage, f"{name}.svg") for stage, name in drawn}
    return {name: path.read_bytes() for name, path in found.items() if path is not None}


def _provenances(reader: _Reader) -> Iterator[tuple[str, dict[str, Any]]]:
    for stage in _STAGES:
        target = reader.folder / stage
        if target.exists() and provenance_path(target).is_file():
            reader.files.append(provenance_path(target))
            yield stage.removesuffix(".json"), read_provenance(target)
