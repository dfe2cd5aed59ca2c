"""Commands about calls."""

from collections.abc import Callable
from typing import Any

import click

from hmmseg.cli import options
from hmmseg.cli.tables import print_table

__all__ = ["batches", "cut", "decode", "diff", "gather", "summary", "verify"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


def calling_options(function: Callable[..., Any]) -> Callable[..., Any]:
    """Add the options that bear on which regions are called."""
    added = [
        click.option(
            "--decoder",
            type=click.Choice(["path", "posterior"]),
            default=None,
            help="Best path, or posterior over a threshold.  [default: path; posterior for stages]",
        ),
        click.option(
            "--threshold",
            type=click.FloatRange(0, 1, max_open=True),
            default=0.5,
            show_default=True,
            metavar="P",
            help="For the posterior decoder.",
        ),
        options.min_length,
        options.merge_gap,
        click.option(
            "--end-window",
            type=click.IntRange(0, 10_000),
            default=0,
            show_default=True,
            metavar="W",
            help="Posterior decoder: put an end amid the W bases most likely to hold it.",
        ),
    ]
    for option in reversed(added):
        function = option(function)
    return function


@click.command()
@click.argument("fasta", metavar="FASTA")
@options.model
@options.output
@calling_options
@click.option(
    "--reuse",
    is_flag=True,
    help="Keep an earlier result that would come out the same; replace any other.",
)
@options.sequence_options(soft_mask=True)
@options.threads
@options.force
def decode(
    sources: Any, model: str, output: str, decoder: str | None, threshold: float, min_length: int,
    merge_gap: int, end_window: int, reuse: bool, threads: int, force: bool,
) -> None:  # fmt: skip
    """Call regions and write their posterior tracks."""
    from hmmseg.jobs import decode as job
    from hmmseg.regions.intervals import Filters

    filters = Filters(min_length, merge_gap, end_window)
    found = (job.decode_once if reuse else job.decode)(
        sources, model, output, decoder=decoder, threshold=threshold, filters=filters,
        threads=threads, force=force,
    )  # fmt: skip
    print_regions(found)


def print_regions(found: dict[str, Any]) -> None:
    """Print the end of a decoding: what was called of each state."""
    rows = []
    for state, numbers in found["regions"].items():
        count, bases = numbers["count"], numbers["bases"]
        mean = f"{bases / count:.0f}" if count else "NA"
        rows.append([state, str(count), str(bases), f"{numbers['share']:.4f}", mean])
    print_table(["state", "regions", "bases", "share", "mean_length"], rows)


_plan = click.option(
    "--batches", "planned", required=True, metavar="DIR", help="Folder written by batches."
)


@click.command()
@options.fasta
@options.model
@options.output
@click.option("--parts", metavar="DIR", help="Where results of batches are kept, each by its key.")
@click.option(
    "--batch-bases",
    type=click.IntRange(1),
    default=50_000_000,
    show_default=True,
    metavar="N",
    help="Bases in a batch.",
)
@calling_options
@options.sequence_options(soft_mask=True)
@options.force
def batches(
    sources: Any, model: str, output: str, parts: str | None, batch_bases: int, force: bool,
    **calling: Any,
) -> None:  # fmt: skip
    """Share records out to batches by their content, and find which are decoded already."""
    from hmmseg.jobs import batches as job

    plan = job.batches(
        sources, model, output, parts=parts, batch_bases=batch_bases, options=calling, force=force
    )
    reused = len(plan.batches) - len(plan.missing)
    click.echo(f"{len(plan.batches)} batches, {reused} of them decoded already")


@click.command()
@options.fasta
@_plan
@options.output
@options.sequence_options()
@options.force
def cut(sources: Any, planned: str, output: str, force: bool) -> None:
    """Write the sequence of each batch that is to be decoded."""
    from hmmseg.jobs import cut as job

    click.echo(f"{job.cut(sources, planned, output, force)} batches")


@click.command()
@click.argument("planned", metavar="BATCHES")
@click.option("--parts", required=True, metavar="DIR", help="Where the batches' results are.")
@options.output
@options.threads
@options.force
def gather(planned: str, parts: str, output: str, threads: int, force: bool) -> None:
    """Put the calls of batches together."""
    from hmmseg.jobs import gather as job

    print_regions(job.gather(planned, parts, output, threads=threads, force=force))


@click.command()
@click.argument("named", nargs=-1, required=True, metavar="NAME=DIR...")
@click.option("--output", required=True, metavar="FILE.tsv", help="Table to write.")
@options.force
def summary(named: tuple[str, ...], output: str, force: bool) -> None:
    """Make one table of several assemblies' calls."""
    from hmmseg.jobs import summary as job

    job.summary(named, output, force)


@click.command()
@click.argument("old", metavar="OLD")
@click.argument("new", metavar="NEW")
@options.output
@options.force
def diff(old: str, new: str, output: str, force: bool) -> None:
    """Compare two results: of an assembly and its revision, or of two models."""
    from hmmseg.jobs import diff as job

    click.echo(job.diff(old, new, output, force))


@click.command()
@click.argument("folder", metavar="DIR")
def verify(folder: str) -> None:
    """Check a result folder against its provenance."""
    from hmmseg.jobs import verify as job

    for line in job.verify(folder):
        click.echo(line)
