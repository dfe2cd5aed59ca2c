"""Commands that write pages."""

import click

from hmmseg.cli import options

__all__ = ["report"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


@click.command()
@click.argument("folders", nargs=-1, required=True, metavar="FOLDER...")
@click.option("--output", required=True, metavar="FILE.html", help="Page to write.")
@click.option("--figures", metavar="DIR", help="Write the figures as files, too.")
@options.force
def report(folders: tuple[str, ...], output: str, figures: str | None, force: bool) -> None:
    """Make a page of an assembly's results, in one file.

    FOLDER is what annotate wrote, or results/ASSEMBLY of the workflow; of several, the page
    compares the assemblies.
    """
    from hmmseg.jobs import report as job

    click.echo(job.report(folders, output, figures=figures, force=force))
