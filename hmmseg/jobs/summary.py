"""The command ``summary``: several assemblies' calls in one table."""

from collections.abc import Sequence
from pathlib import Path

from hmmseg.errors import UsageError
from hmmseg.jobs.results import read_summary
from hmmseg.outputs import check_target, whole_file

__all__ = ["summary"]

_COLUMNS = (
    "assembly",
    "records",
    "bases",
    "decoded_bases",
    "state",
    "regions",
    "region_bases",
    "share",
    "mean_length",
)


def summary(named: Sequence[str], output: str, force: bool) -> int:
    """Write a table with a row for each assembly and reported state.

    Parameters
    ----------
    named
        ``NAME=FOLDER`` of each assembly, the folder written by ``decode`` or ``gather``.
    output
        The table to write, tab-separated.
    force
        Replace an existing file.

    Returns
    -------
    int
        Rows in the table.

    Raises
    ------
    UsageError
        An argument is not of that form, or a name stands twice.
    """
    check_target(output, force)
    rows = []
    seen: set[str] = set()
    for argument in named:
        name, separator, folder = argument.partition("=")
        if not (name and separator and folder):
            raise UsageError(f"'{argument}' is not NAME=FOLDER")
        if name in seen:
            raise UsageError(f"the name {name} stands twice; give each assembly its own")
        seen.add(name)
        found = read_summary(Path(folder))
        whole = [name, found["records"], found["bases"], found["decoded_bases"]]
        for state, numbers in found["regions"].items():
            count, bases = numbers["count"], numbers["bases"]
            mean = f"{bases / count:.1f}" if count else "NA"
            rows.append([*whole, state, count, bases, f"{numbers['share']:.6f}", mean])
    with whole_file(output, force=force) as temporary:
        lines = ["\t".join(str(cell) for cell in row) for row in (_COLUMNS, *rows)]
        temporary.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return len(rows)
