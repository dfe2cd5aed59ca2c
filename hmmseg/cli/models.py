"""Commands about sequence and models."""

from typing import Any

import click

from hmmseg.cli import options
from hmmseg.errors import UsageError

__all__ = ["score", "simulate", "survey", "train"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


@click.command()
@options.fasta
@options.output
@options.sequence_options()
@options.force
def survey(sources: Any, output: str, force: bool) -> None:
    """Describe an assembly: sizes, gaps, composition, oddities."""
    from hmmseg.jobs import survey as job

    document = job.survey(sources, output, force)
    for key, value in document["assembly"].items():
        if isinstance(value, int | float | str):
            click.echo(f"{key}\t{value}")


@click.command()
@options.fasta
@click.option("--output", required=True, metavar="MODEL.json", help="Model document to write.")
@click.option("--init", metavar="MODEL.json", help="Start from this model.")
@click.option(
    "--states",
    type=click.IntRange(1, 8),
    default=2,
    show_default=True,
    metavar="K",
    help="Hidden states; 1 makes a Markov chain.",
)
@click.option(
    "--order",
    type=click.IntRange(0, 8),
    default=0,
    show_default=True,
    metavar="N",
    help="Bases before it on which a base depends.",
)
@click.option(
    "--symmetric/--stranded",
    default=True,
    show_default=True,
    help="Whether both strands are treated alike.",
)
@click.option(
    "--start",
    type=click.Choice(["stationary", "free"]),
    default="stationary",
    show_default=True,
    help="How a contig begins.",
)
@click.option(
    "--restarts",
    type=click.IntRange(1),
    default=None,
    metavar="R",
    help="Fits from different starts.  [default: 1 with --init, else 5]",
)
@click.option(
    "--seed",
    type=click.IntRange(0),
    default=1,
    show_default=True,
    metavar="S",
    help="Of the random starts.",
)
@click.option(
    "--max-iterations",
    type=click.IntRange(1),
    default=500,
    show_default=True,
    metavar="I",
    help="Iterations of one fit at most.",
)
@click.option(
    "--tolerance",
    type=click.FloatRange(0),
    default=1e-8,
    show_default=True,
    metavar="BITS_PER_BASE",
    help="Stop when an iteration gains less.",
)
@click.option(
    "--pseudocount",
    type=click.FloatRange(0),
    default=0.0,
    show_default=True,
    metavar="BASES",
    help="Bases added to each state's word counts, in all.",
)
@options.sequence_options()
@options.threads
@options.force
def train(
    sources: Any, output: str, init: str | None, restarts: int | None, start: str,
    threads: int, force: bool, **plan: Any,
) -> None:  # fmt: skip
    """Fit a model to sequence with Baum-Welch."""
    from hmmseg.jobs import train as job
    from hmmseg.model import load_model
    from hmmseg.training.restarts import Plan

    if plan["symmetric"] and start == "free" and not init:
        raise UsageError("--start free needs --stranded: a symmetric model starts stationary")
    found = job.train(
        sources, output,
        Plan(
            init=load_model(init) if init else None,
            restarts=restarts or (1 if init else 5),
            start_kind=start,
            **plan,
        ),
        init, threads, force,
    )  # fmt: skip
    click.echo("state\treported\tgc\texpected_length\tshare")
    for row in found:
        reported = "yes" if row.reported else "no"
        click.echo(
            f"{row.name}\t{reported}\t{row.gc:.3f}\t{row.expected_length:.0f}\t{row.share:.4f}"
        )


@click.command()
@options.fasta
@options.model
@options.sequence_options()
@options.threads
def score(sources: Any, model: str, threads: int) -> None:
    """Print the log-likelihood (nats) and bits per base of each record."""
    from hmmseg.jobs import score as job

    click.echo("record\tbases\tlog_likelihood\tbits_per_base")
    for row in job.score(sources, model, threads):
        click.echo(f"{row.record}\t{row.bases}\t{row.log_likelihood!r}\t{row.bits_per_base!r}")


@click.command()
@options.model
@options.output
@click.option("--records", type=click.IntRange(1), required=True, metavar="R", help="How many.")
@click.option("--length", type=click.IntRange(1), required=True, metavar="L", help="In bases.")
@click.option("--seed", type=click.IntRange(0), required=True, metavar="S", help="Of the draws.")
@options.force
def simulate(model: str, output: str, records: int, length: int, seed: int, force: bool) -> None:
    """Draw sequences with a known truth from a model."""
    from hmmseg.jobs import simulate as job

    job.simulate(model, output, records, length, seed, force)
