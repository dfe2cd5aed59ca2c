"""The command ``report``: a result folder as one page that needs nothing else."""

from collections.abc import Sequence
from importlib import metadata
from pathlib import Path
from typing import Any

from hmmseg.errors import UsageError
from hmmseg.outputs import PROVENANCE, check_target, whole_file, whole_folder
from hmmseg.provenance import is_current, write_provenance
from hmmseg.report.assembly import assembly_page
from hmmseg.report.drawing import save
from hmmseg.report.many import many_page
from hmmseg.report.page import Page
from hmmseg.report.results import Results, read_results

__all__ = ["report"]

_DRAWN_BY = ("bokeh", "jinja2", "matplotlib")


def report(
    folders: Sequence[str],
    output: str,
    *,
    figures: str | None,
    force: bool,
    reuse: bool = False,
) -> Path:
    """Write the page, and the figures as files if they are asked for.

    Parameters
    ----------
    folders
        Result folder of an assembly; of several, for a page that compares them.
    output
        The page to write.
    figures
        A folder for the figures; None for no files of them.
    force
        Replace earlier results.
    reuse
        Leave an earlier page if it is what would be made again.

    Returns
    -------
    Path
        The page.

    Raises
    ------
    UsageError
        The same folder is given twice.
    OutputError
        A folder holds no result, or a file of it is damaged.
    """
    names = _names(folders)
    if not reuse:
        _check(output, figures, force)
    found = [read_results(*named) for named in zip(folders, names, strict=True)]
    parameters = _parameters(found)
    inputs = [path for results in found for path in _inputs(results)]
    if reuse and is_current(output, "report", parameters, None, inputs):
        return Path(output)
    _check(output, figures, force)
    page = assembly_page(found[0]) if len(found) == 1 else many_page(found, Path(output))
    with whole_file(output, force=force) as temporary:
        temporary.write_text(page.html(), encoding="utf-8", newline="\n")
    write_provenance(output, "report", parameters, None, inputs, [output])
    if figures is not None:
        with whole_folder(figures, force=force) as folder:
            written = _draw(page, folder)
            write_provenance(folder, "report", parameters, None, inputs, written)
    return Path(output)


def _names(folders: Sequence[str]) -> list[str]:
    """Return what the assemblies are called: the last part of their paths, more if need be."""
    parts = [Path(folder).resolve().parts for folder in folders]
    for depth in range(1, max(map(len, parts)) + 1):
        names = ["/".join(own[-depth:]) for own in parts]
        if len(set(names)) == len(names):
            return names
    raise UsageError("a folder stands twice; give each assembly once")


def _check(output: str, figures: str | None, force: bool) -> None:
    check_target(output, force)
    if figures is not None:
        check_target(figures, force)


def _inputs(results: Results) -> list[Path]:
    """Return the files a page is made from; tracks and tables stand in them by checksum."""
    return [path for path in results.files if path.name != PROVENANCE]


def _parameters(found: Sequence[Results]) -> dict[str, Any]:
    return {
        "assemblies": [results.name for results in found],
        "drawn_by": {name: metadata.version(name) for name in _DRAWN_BY},
    }


def _draw(page: Page, folder: Path) -> list[Path]:
    """Write all figures; return the files."""
    return [
        path
        for section in page.sections
        for picture in section.pictures()
        for path in save(picture.drawing, folder / picture.name)
    ]
