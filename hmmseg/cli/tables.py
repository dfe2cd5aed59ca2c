"""Tables on standard output: in columns for a person, with tabs for a program."""

import shutil
import sys
from collections.abc import Sequence

import click

__all__ = ["print_table"]

_NUMBER = set("0123456789.,-+e%")


def print_table(head: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """Print a table: aligned on a terminal, tab-separated elsewhere.

    On a terminal a last column of words is cut at its edge, so that a row stays a line.

    Parameters
    ----------
    head
        Names of the columns.
    rows
        Cells.
    """
    if not sys.stdout.isatty():
        for row in (head, *rows):
            click.echo("\t".join(row))
        return
    widths = [max(map(len, column)) for column in zip(head, *rows, strict=True)]
    numbers = [all(set(row[i]) <= _NUMBER for row in rows) for i in range(len(head))]
    edge = shutil.get_terminal_size().columns
    for row in (head, *rows):
        cells = [
            cell.rjust(width) if number else cell.ljust(width)
            for cell, width, number in zip(row, widths, numbers, strict=True)
        ]
        line = "  ".join(cells).rstrip()
        click.echo(line if len(line) <= edge else f"{line[: edge - 1]}…")
