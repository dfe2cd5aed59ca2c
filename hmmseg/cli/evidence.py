"""Commands about how sure results are."""

from collections.abc import Callable
from functools import wraps
from typing import Any

import click

from hmmseg.cli import options

__all__ = ["calibrate", "nulls", "replicate"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


def null_options(function: Callable[..., Any]) -> Callable[..., Any]:
    """Add the options that say what is judged and what is drawn; hand on ``files`` and ``plan``."""

    @wraps(function)
    def with_plan(
        fasta: tuple[str, ...], model: str, calls: str, exclude: str | None, null: str | None,
        null_bases: int | None, null_refit: bool | None, others: bool, seed: int, **rest: Any,
    ) -> Any:  # fmt: skip
        from hmmseg.jobs.null_sequence import CalledFiles, NullPlan

        files = CalledFiles(fasta, model, calls, exclude)
        return function(files, NullPlan(null, null_bases, null_refit, others, seed), **rest)

    added = [
        options.fasta,
        options.model,
        click.option("--calls", required=True, metavar="DIR", help="Folder of calls to judge."),
        options.output,
        click.option(
            "--null",
            type=click.Choice(["chain", "drift", "background"]),
            default=None,
            help="Null sequence that judges the regions.  [default: drift; chain if every state "
            "is reported]",
        ),
        click.option(
            "--null-bases",
            type=click.IntRange(1),
            default=None,
            metavar="N",
            help="Bases of each null.  [default: 20 times the assembly, within 20 to 500 Mb]",
        ),
        click.option(
            "--null-refit/--no-null-refit",
            default=None,
            help="Whether to train anew on each null replicate.  [default: below 5 Mb, if the "
            "model was trained on this sequence]",
        ),
        click.option(
            "--others/--no-others",
            default=True,
            show_default=True,
            help="Whether the nulls that do not judge are drawn, too.",
        ),
        options.seed,
        click.option("--exclude", metavar="BED", help="The intervals that the calls left out."),
    ]
    decorated: Callable[..., Any] = with_plan
    for option in reversed(added):
        decorated = option(decorated)
    return decorated


@click.command()
@null_options
@click.option(
    "--q",
    type=click.FloatRange(0, 1, min_open=True),
    default=0.05,
    show_default=True,
    metavar="Q",
    help="Keep regions up to this q-value.",
)
@click.option(
    "--nulls", "planned", metavar="DIR", help="Null sequence of these options, by hmmseg nulls."
)
@click.option(
    "--parts", metavar="DIR", help="Folder of all its parts, each drawn by hmmseg replicate."
)
@options.threads
@options.force
def calibrate(
    files: Any, plan: Any, output: str, q: float, planned: str | None, parts: str | None,
    threads: int, force: bool,
) -> None:  # fmt: skip
    """Tell how many of the called regions chance alone would give.

    Draws sequence without regions to the assembly's contigs and gaps, in three ways, calls it as
    the assembly was called, and compares the scores. Writes the regions with their E, p and q
    values, and those up to a q as BED. The drawing may be done by other jobs before; then --nulls
    and --parts say where it stands.
    """
    from hmmseg.jobs import calibrate as job

    if (planned is None) != (parts is None):
        raise click.UsageError("--nulls and --parts belong together; give both or neither")
    drawn = None if planned is None or parts is None else (planned, parts)
    found = job.calibrate(files, output, plan, q=q, drawn=drawn, threads=threads, force=force)
    for statement in found["statements"].values():
        click.echo(statement)


@click.command()
@null_options
@options.force
def nulls(files: Any, plan: Any, output: str, force: bool) -> None:
    """Prepare null sequence, so that many jobs can draw it.

    Compares the calls with the sequence and writes what hmmseg replicate needs, which is small.
    """
    from hmmseg.jobs import nulls as job

    sequence = job.nulls(files, output, plan, force)
    bases = int(sequence.replicates.bases.sum())
    click.echo("null\treplicates\tbases")
    for name in sequence.nulls:
        click.echo(f"{name}\t{sequence.replicates.count}\t{bases}")


@click.command()
@click.argument("nulls", metavar="NULLS")
@options.output
@click.option(
    "--part", type=click.IntRange(1), required=True, metavar="P", help="Which part, from 1."
)
@click.option("--of", type=click.IntRange(1), required=True, metavar="N", help="Of so many parts.")
@options.threads
@options.force
def replicate(nulls: str, output: str, part: int, of: int, threads: int, force: bool) -> None:
    """Draw one part of null sequence and call it.

    NULLS is a folder written by hmmseg nulls. When all parts are there, each under its number in
    one folder, hmmseg calibrate puts them together.
    """
    from hmmseg.jobs import nulls as job

    if part > of:
        raise click.UsageError(f"--part {part} is beyond --of {of}; give a part up to that")
    found = job.replicate(nulls, output, part, of, threads=threads, force=force)
    click.echo("null\tbases\tregions")
    for name, one in found.items():
        click.echo(f"{name}\t{one.bases}\t{len(one.scores)}")
