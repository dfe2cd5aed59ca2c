"""Commands that do several stages at once."""

from typing import Any

import click

from hmmseg.cli import options
from hmmseg.cli.calls import print_regions
from hmmseg.cli.models import print_findings
from hmmseg.cli.tables import print_table

__all__ = ["annotate"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


@click.command()
@options.fasta
@options.output
@click.option("--preset", metavar="NAME", help="What to look for; see hmmseg presets.")
@click.option("--decisions", metavar="FILE.yaml", help="Obey these decisions.")
@click.option(
    "--features",
    multiple=True,
    metavar="FILE",
    help="BED or GFF3 of known features to compare with the regions; may be given again.",
)
@options.sequence_options(soft_mask=True)
@options.threads
@options.force
def annotate(
    sources: Any, output: str, preset: str | None, decisions: str | None,
    features: tuple[str, ...], threads: int, force: bool,
) -> None:  # fmt: skip
    """Do the whole job: survey, decide, train, call, calibrate, compare with chains, report.

    Decisions are written to DIR/decisions.yaml with their reasons. What is already done is not
    done again.
    """
    from hmmseg.errors import UsageError
    from hmmseg.jobs import annotate as job
    from hmmseg.jobs.features import COLUMNS

    if preset and decisions:
        raise UsageError("--preset and --decisions do not go together; give one")
    found = job.annotate(
        sources, output, preset=preset, decisions_file=decisions, features=features,
        threads=threads, force=force, say=click.echo,
    )  # fmt: skip
    print_findings(found.model.findings, found.model.cautions)
    print_regions(found.calls)
    if found.calibration is not None:
        for statement in found.calibration["statements"].values():
            click.echo(statement)
    if found.verdict is not None:
        click.echo(found.verdict)
    if found.features:
        print_table(COLUMNS, found.features)
