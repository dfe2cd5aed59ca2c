"""The command ``survey``: describe an assembly before anything is modelled."""

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from hmmseg.jobs.sources import Sources
from hmmseg.outputs import check_target, whole_folder, write_json
from hmmseg.provenance import earlier_document, write_provenance
from hmmseg.sequence.reading import Record
from hmmseg.sequence.survey import survey as survey_records
from hmmseg.sequence.survey import to_dict, to_tsv
from hmmseg.sequence.windows import gc_windows
from hmmseg.tracks.spool import SpooledTrack

__all__ = ["GC_TRACK", "survey"]

GC_TRACK = "gc.bw"
"""G+C in windows, which a report draws beside the posteriors."""


def survey(sources: Sources, output: str, force: bool, reuse: bool = False) -> dict[str, Any]:
    """Describe every record and the assembly, and write tables and a track of G+C.

    Parameters
    ----------
    sources
        The sequence.
    output
        The folder to write.
    force
        Replace an earlier result.
    reuse
        Return an earlier result if it is what would be made again.

    Returns
    -------
    dict
        The document ``survey.json``.
    """
    origin = ("survey", sources.parameters(), None, sources.files())
    if reuse and (earlier := earlier_document("survey.json", output, *origin)) is not None:
        return earlier
    check_target(output, force)
    with whole_folder(output, force=force) as folder:
        found = survey_records(_tracked(sources, folder / GC_TRACK), sources.gap_min)
        document = to_dict(found)
        (folder / "survey.tsv").write_text(to_tsv(found), encoding="utf-8")
        write_json(folder / "survey.json", document)
        written = [folder / name for name in (GC_TRACK, "survey.json", "survey.tsv")]
        write_provenance(folder, *origin, written)
    return document


def _tracked(sources: Sources, path: Path) -> Iterator[Record]:
    """Yield the records, and write their G+C once the last has been seen."""
    track = SpooledTrack(path)
    lengths: dict[str, int] = {}
    for record in sources.read():
        lengths[record.name] = len(record)
        track.add_runs(record.name, *gc_windows(record, sources.gap_min))
        yield record
    if lengths:
        track.finish(lengths)
