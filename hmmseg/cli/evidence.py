"""Commands about how sure results are."""

import click

from hmmseg.cli import options

__all__ = ["calibrate"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


@click.command()
@options.fasta
@options.model
@click.option("--calls", required=True, metavar="DIR", help="Folder of calls to judge.")
@options.output
@click.option(
    "--null",
    type=click.Choice(["chain", "drift", "background"]),
    default=None,
    help="Null sequence that judges the regions.  [default: drift; chain if every state is "
    "reported]",
)
@click.option(
    "--null-bases",
    type=click.IntRange(1),
    default=None,
    metavar="N",
    help="Bases of each null.  [default: 20 times the assembly, within 20 to 500 Mb]",
)
@click.option(
    "--null-refit/--no-null-refit",
    default=None,
    help="Whether to train anew on each null replicate.  [default: below 5 Mb, if the model was "
    "trained on this sequence]",
)
@click.option(
    "--q",
    type=click.FloatRange(0, 1, min_open=True),
    default=0.05,
    show_default=True,
    metavar="Q",
    help="Keep regions up to this q-value.",
)
@click.option(
    "--others/--no-others",
    default=True,
    show_default=True,
    help="Whether the nulls that do not judge are drawn, too.",
)
@options.seed
@click.option("--exclude", metavar="BED", help="The intervals that the calls left out.")
@options.threads
@options.force
def calibrate(
    fasta: tuple[str, ...], model: str, calls: str, output: str, null: str | None,
    null_bases: int | None, null_refit: bool | None, q: float, others: bool, seed: int,
    exclude: str | None, threads: int, force: bool,
) -> None:  # fmt: skip
    """Tell how many of the called regions chance alone would give.

    Draws sequence without regions to the assembly's contigs and gaps, in three ways, calls it as
    the assembly was called, and compares the scores. Writes the regions with their E, p and q
    values, and those up to a q as BED.
    """
    from hmmseg.jobs import calibrate as job

    plan = job.NullPlan(null, null_bases, null_refit, q, others, seed)
    found = job.calibrate(
        fasta, model, calls, output, plan, exclude=exclude, threads=threads, force=force
    )
    for statement in found["statements"].values():
        click.echo(statement)
