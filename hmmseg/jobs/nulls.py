"""The commands ``nulls`` and ``replicate``: null sequence drawn and called by many jobs."""

from pathlib import Path
from typing import Any

from hmmseg.errors import OutputError
from hmmseg.evidence.null_regions import Found
from hmmseg.jobs.called import read_called
from hmmseg.jobs.null_files import (
    read_found,
    read_null_sequence,
    write_found,
    write_null_sequence,
)
from hmmseg.jobs.null_sequence import CalledFiles, NullPlan, NullSequence, null_sequence_of
from hmmseg.jobs.parts import count_told, whole_parts
from hmmseg.model import load_model
from hmmseg.outputs import PROVENANCE, check_target, whole_folder
from hmmseg.provenance import (
    difference,
    is_intact,
    origin,
    read_provenance,
    write_provenance,
)

__all__ = ["nulls", "read_parts", "replicate"]


def nulls(files: CalledFiles, output: str, plan: NullPlan, force: bool) -> NullSequence:
    """Write all that it takes to draw and call null sequence, so that jobs can share the work.

    Parameters
    ----------
    files
        The calls, and what they were made from.
    output
        The folder to write.
    plan
        What is drawn.
    force
        Replace an earlier result.

    Raises
    ------
    OutputError
        The calls were made from other sequence, with another model or other settings.
    ModelError
        The model cannot be trained anew as it was trained, or lacks what a null needs.
    """
    check_target(output, force)
    inputs = files.inputs()
    model, called = load_model(files.model), read_called(files.calls)
    sequence = null_sequence_of(files, model, called, plan)
    with whole_folder(output, force=force) as folder:
        write_null_sequence(folder, sequence, files.model)
        written = sorted(folder.iterdir())
        parameters = _parameters(files, plan)
        write_provenance(folder, "nulls", parameters, plan.seed, inputs, written)
    return sequence


def replicate(
    planned: str, output: str, part: int, of: int, *, threads: int, force: bool
) -> dict[str, Found]:
    """Draw one part of null sequence, call it, and write the scores.

    Parameters
    ----------
    planned
        The folder that `nulls` has written.
    output
        The folder to write.
    part, of
        Which part, from 1, of how many.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace an earlier result.

    Raises
    ------
    OutputError
        The folder holds no null sequence, or it is damaged.
    """
    check_target(output, force)
    source = read_provenance(planned)
    if source["command"] != "nulls":
        raise OutputError(f"{planned}: made by {source['command']}; give a folder written by nulls")
    if not is_intact(planned, source):
        raise OutputError(f"{planned}: damaged; remove it and make it again by hmmseg nulls")
    sequence = read_null_sequence(Path(planned))
    found = sequence.call(threads, part, of)
    with whole_folder(output, force=force) as folder:
        write_found(folder, found)
        written, inputs = sorted(folder.iterdir()), [Path(planned, PROVENANCE)]
        parameters = {"part": part, "of": of}
        write_provenance(folder, "replicate", parameters, None, inputs, written)
    return found


def read_parts(
    files: CalledFiles, plan: NullPlan, planned: str, parts: str
) -> tuple[NullSequence, dict[str, Found], list[Path]]:
    """Read null sequence and all that was found in parts of it.

    Parameters
    ----------
    files, plan
        As they are to have been when `nulls` was called.
    planned
        The folder that `nulls` has written.
    parts
        Holds a folder for each part.

    Returns
    -------
    tuple of NullSequence, dict of str to Found, and list of Path
        The provenance of each folder is last.

    Raises
    ------
    OutputError
        A folder is missing, damaged, or of something else.
    """
    again = "make it by hmmseg nulls with the options given here"
    try:
        found = read_provenance(planned)
    except OutputError as error:
        raise OutputError(f"{error}; {again}") from None
    expected = origin("nulls", _parameters(files, plan), plan.seed, files.inputs())
    if other := difference(found, expected):
        raise OutputError(f"{planned}: made with another {other}; remove it and {again}")
    if not is_intact(planned, found):
        raise OutputError(f"{planned}: damaged; remove it and {again}")
    of = count_told(parts, "of")
    made = origin("replicate", {"part": 1, "of": of}, None, [Path(planned, PROVENANCE)])
    again = f"make it by hmmseg replicate --part {{}} --of {of}"
    folders = whole_parts(parts, of, made, "part", again)
    sequence = read_null_sequence(Path(planned))
    several = [read_found(folder, list(sequence.nulls)) for folder in folders]
    together = {name: Found.together([one[name] for one in several]) for name in sequence.nulls}
    return sequence, together, [folder / PROVENANCE for folder in (Path(planned), *folders)]


def _parameters(files: CalledFiles, plan: NullPlan) -> dict[str, Any]:
    return {**files.parameters(), **plan.parameters()}
