"""Commands about calls."""

from typing import Any

import click

from hmmseg.cli import options

__all__ = ["batches", "decode", "gather", "summary", "verify"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


@click.command()
@click.argument("fasta", metavar="FASTA")
@options.model
@options.output
@click.option(
    "--decoder",
    type=click.Choice(["path", "posterior"]),
    default=None,
    help="Best path, or posterior over a threshold.  [default: path; posterior for stages]",
)
@click.option(
    "--threshold",
    type=click.FloatRange(0, 1, max_open=True),
    default=0.5,
    show_default=True,
    metavar="P",
    help="For the posterior decoder.",
)
@click.option(
    "--min-length",
    type=click.IntRange(1),
    default=1,
    show_default=True,
    metavar="L",
    help="Drop regions shorter than this many bases.",
)
@click.option(
    "--merge-gap",
    type=click.IntRange(0),
    default=0,
    show_default=True,
    metavar="G",
    help="Merge regions of one state at most this far apart, first of all.",
)
@options.sequence_options(soft_mask=True)
@options.threads
@options.force
def decode(
    sources: Any, model: str, output: str, decoder: str | None, threshold: float, min_length: int,
    merge_gap: int, threads: int, force: bool,
) -> None:  # fmt: skip
    """Call regions and write their posterior tracks."""
    from hmmseg.jobs import decode as job
    from hmmseg.regions.intervals import Filters

    filters = Filters(min_length, merge_gap)
    found = job.decode(
        sources, model, output, decoder=decoder, threshold=threshold, filters=filters,
        threads=threads, force=force,
    )  # fmt: skip
    print_regions(found)


def print_regions(found: dict[str, Any]) -> None:
    click.echo("state\tregions\tbases\tshare")
    for state, numbers in found["regions"].items():
        click.echo(f"{state}\t{numbers['count']}\t{numbers['bases']}\t{numbers['share']:.4f}")


@click.command()
@options.fasta
@options.output
@click.option(
    "--batch-bases",
    type=click.IntRange(1),
    default=50_000_000,
    show_default=True,
    metavar="N",
    help="Bases in a batch.",
)
@options.sequence_options(circular=False)
@options.force
def batches(sources: Any, output: str, batch_bases: int, force: bool) -> None:
    """Share records out to batches of about equal size."""
    from hmmseg.jobs import batches as job

    click.echo(f"{job.batches(sources, output, batch_bases, force)} batches")


@click.command()
@click.argument("folders", nargs=-1, required=True, metavar="DIR...")
@options.output
@options.force
def gather(folders: tuple[str, ...], output: str, force: bool) -> None:
    """Put the calls of batches together."""
    from hmmseg.jobs import gather as job

    print_regions(job.gather(folders, output, force))


@click.command()
@click.argument("named", nargs=-1, required=True, metavar="NAME=DIR...")
@click.option("--output", required=True, metavar="FILE.tsv", help="Table to write.")
@options.force
def summary(named: tuple[str, ...], output: str, force: bool) -> None:
    """Make one table of several assemblies' calls."""
    from hmmseg.jobs import summary as job

    job.summary(named, output, force)


@click.command()
@click.argument("folder", metavar="DIR")
def verify(folder: str) -> None:
    """Check a result folder against its provenance."""
    from hmmseg.jobs import verify as job

    for line in job.verify(folder):
        click.echo(line)
