"""The command ``survey``: describe an assembly before anything is modelled."""

import json
from pathlib import Path
from typing import Any

from hmmseg.jobs.sources import Sources
from hmmseg.outputs import check_target, whole_folder, write_json
from hmmseg.provenance import is_current, write_provenance
from hmmseg.sequence.survey import survey as survey_records
from hmmseg.sequence.survey import to_dict, to_tsv

__all__ = ["survey"]


def survey(sources: Sources, output: str, force: bool, reuse: bool = False) -> dict[str, Any]:
    """Describe every record and the assembly, and write ``survey.tsv`` and ``survey.json``.

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
    if reuse and is_current(output, "survey", sources.parameters(), None, sources.files()):
        document: dict[str, Any] = json.loads((Path(output) / "survey.json").read_bytes())
        return document
    check_target(output, force)
    found = survey_records(sources.read(), sources.gap_min)
    document = to_dict(found)
    with whole_folder(output, force=force) as folder:
        (folder / "survey.tsv").write_text(to_tsv(found), encoding="utf-8")
        write_json(folder / "survey.json", document)
        written = [folder / "survey.json", folder / "survey.tsv"]
        write_provenance(folder, "survey", sources.parameters(), None, sources.files(), written)
    return document
