"""Commands that do several stages at once."""

from typing import Any

import click

from hmmseg.cli import options
from hmmseg.cli.calls import print_regions
from hmmseg.cli.models import print_findings

__all__ = ["annotate"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


@click.command()
@options.fasta
@options.output
@click.option("--preset", metavar="NAME", help="What to look for; see hmmseg presets.")
@click.option("--decisions", metavar="FILE.yaml", help="Obey these decisions.")
@options.sequence_options(soft_mask=True)
@options.threads
@options.force
def annotate(
    sources: Any, output: str, preset: str | None, decisions: str | None, threads: int, force: bool
) -> None:
    """Do the whole job: survey, decide, train, call regions.

    Decisions are written to DIR/decisions.yaml with their reasons. What is already done is not
    done again.
    """
    from hmmseg.errors import UsageError
    from hmmseg.jobs import annotate as job

    if preset and decisions:
        raise UsageError("--preset and --decisions do not go together; give one")
    found = job.annotate(
        sources, output, preset=preset, decisions_file=decisions, threads=threads, force=force,
        say=click.echo,
    )  # fmt: skip
    print_findings(found.model.findings, found.model.cautions)
    print_regions(found.calls)
