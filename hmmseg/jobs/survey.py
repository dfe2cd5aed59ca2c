"""The command ``survey``: describe an assembly before anything is modelled."""

from typing import Any

from hmmseg.jobs.sources import Sources
from hmmseg.outputs import check_target, whole_folder, write_json
from hmmseg.provenance import write_provenance
from hmmseg.sequence.survey import survey as survey_records
from hmmseg.sequence.survey import to_dict, to_tsv

__all__ = ["survey"]


def survey(sources: Sources, output: str, force: bool) -> dict[str, Any]:
    """Describe every record and the assembly, and write ``survey.tsv`` and ``survey.json``.

    Parameters
    ----------
    sources
        The sequence.
    output
        The folder to write.
    force
        Replace an earlier result.

    Returns
    -------
    dict
        The document ``survey.json``.
    """
    check_target(output, force)
    found = survey_records(sources.read(), sources.gap_min)
    document = to_dict(found)
    with whole_folder(output, force=force) as folder:
        (folder / "survey.tsv").write_text(to_tsv(found), encoding="utf-8")
        write_json(folder / "survey.json", document)
        written = [folder / "survey.json", folder / "survey.tsv"]
        write_provenance(folder, "survey", sources.parameters(), None, sources.files(), written)
    return document
