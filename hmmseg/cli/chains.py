"""Commands about Markov chains, and the comparison with hidden Markov models."""

from dataclasses import fields
from functools import wraps
from typing import Any

import click

from hmmseg.cli import options
from hmmseg.cli.calls import print_regions

__all__ = ["chains", "classify", "compare", "fold", "machine", "orders"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


@click.command()
@click.argument("fasta", metavar="FASTA")
@click.option("--region-chain", required=True, metavar="A.json", help="Chain of the regions.")
@click.option(
    "--background-chain", required=True, metavar="B.json", help="Chain of all other sequence."
)
@options.output
@click.option(
    "--window",
    type=click.IntRange(1),
    default=200,
    show_default=True,
    metavar="W",
    help="Bases over which log-odds are summed.",
)
@click.option(
    "--step",
    type=click.IntRange(1),
    default=10,
    show_default=True,
    metavar="S",
    help="Bases from one window to the next, at most a window.",
)
@click.option(
    "--threshold",
    type=float,
    default=None,
    metavar="BITS",
    help="A window above this many bits is a region.  [default: 0, or chosen on --labels]",
)
@click.option("--labels", metavar="BED", help="Known regions, to choose the threshold on by MCC.")
@options.min_length
@options.merge_gap
@options.sequence_options()
@options.threads
@options.force
def classify(
    sources: Any, region_chain: str, background_chain: str, output: str, window: int, step: int,
    threshold: float | None, labels: str | None, min_length: int, merge_gap: int, threads: int,
    force: bool,
) -> None:  # fmt: skip
    """Call regions with two Markov chains in sliding windows.

    The log-odds of every base between the two chains are summed over windows; windows above
    the threshold are merged to regions. Writes what decode writes. The track holds
    1 / (1 + 2**(threshold - best window)).
    """
    from hmmseg.jobs import classify as job
    from hmmseg.regions.intervals import Filters
    from hmmseg.regions.windows import Windows

    found = job.classify(
        sources,
        (region_chain, background_chain),
        output,
        rule=job.Rule(Windows(window, step), threshold, labels),
        filters=Filters(min_length, merge_gap),
        threads=threads,
        force=force,
    )
    print_regions(found)


_order = click.option(
    "--order",
    type=click.IntRange(0, 8),
    default=0,
    show_default=True,
    metavar="N",
    help="Bases before it on which a base depends.",
)
_label = click.option(
    "--label", metavar="NAME", help="Use only intervals of this name, or of NAME with a number."
)
_block = click.option(
    "--block",
    type=click.IntRange(100),
    default=None,
    metavar="LENGTH",
    help="Bases in a block of sequence.  [default: about 200 blocks]",
)
_folds = click.option(
    "--folds",
    type=click.IntRange(2),
    default=5,
    show_default=True,
    metavar="F",
    help="Sequence is held out in so many turns.",
)


@click.command()
@options.fasta
@options.output
@click.option("--labels", metavar="BED", help="Known regions.")
@click.option("--calls", metavar="DIR", help="Instead, a folder of calls that decode wrote.")
@_label
@_order
@options.strands
@click.option(
    "--pseudocount",
    type=click.FloatRange(0),
    default=0.0,
    show_default=True,
    metavar="BASES",
    help="Bases added to each chain's word counts, in all.",
)
@options.sequence_options()
@options.force
def chains(
    sources: Any, output: str, labels: str | None, calls: str | None, label: str | None,
    order: int, symmetric: bool, pseudocount: float, force: bool,
) -> None:  # fmt: skip
    """Count a region chain and a background chain, for classify."""
    from hmmseg.jobs import chains as job

    known = job.Known(labels, calls, label)
    found = job.chains(sources, output, known, job.Counting(order, symmetric, pseudocount), force)
    click.echo("chain\twords\tgc")
    for name, words, gc in found:
        click.echo(f"{name}\t{words}\t{gc:.3f}")


@click.command()
@click.option("--model", required=True, metavar="CHAIN.json", help="A model with one state.")
@options.output
@options.force
def machine(model: str, output: str, force: bool) -> None:
    """Write a chain as a machine whose states are the last bases.

    Writes its transition matrix, entry by entry, and its stationary distribution.
    """
    from hmmseg.jobs import machine as job

    for key, value in job.machine(model, output, force).items():
        if key not in ("format", "version"):
            click.echo(f"{key}\t{value}")


@click.command()
@options.fasta
@options.output
@click.option(
    "--max-order",
    type=click.IntRange(0, 8),
    default=8,
    show_default=True,
    metavar="N",
    help="The highest order to try.",
)
@options.strands
@_folds
@_block
@options.sequence_options()
@options.force
def orders(
    sources: Any, output: str, max_order: int, symmetric: bool, folds: int, block: int | None,
    force: bool,
) -> None:  # fmt: skip
    """Choose the order of a chain, by BIC and by held-out bits per base."""
    from hmmseg.evidence.heldout import OrderRow
    from hmmseg.jobs import orders as job

    found = job.orders(
        sources, output, max_order=max_order, symmetric=symmetric, folds=folds, block=block,
        force=force,
    )  # fmt: skip
    click.echo(job.orders_table([OrderRow(**row) for row in found["orders"]]), nl=False)
    click.echo(f"best by BIC\t{found['best_by_bic']}")
    click.echo(f"best by held-out bits\t{found['best_by_heldout']}")


def _trial(function: options.Decorated) -> options.Decorated:
    """Add the options of a comparison; they become ``sources``, ``truth`` and ``settings``."""

    @wraps(function)
    def with_trial(
        sources: Any, labels: str | None, label: str | None, order: int | None,
        split: str | None, block: int | None, **given: Any,
    ) -> Any:  # fmt: skip
        from hmmseg.evidence.turns import Settings
        from hmmseg.jobs.trial import Truth

        names = [field.name for field in fields(Settings) if field.name in given]
        settings = Settings(**{name: given.pop(name) for name in names})
        return function(sources, Truth(labels, label, order, split, block), settings, **given)

    wrapped: options.Decorated = with_trial
    for option in reversed(_TRIAL):
        wrapped = option(wrapped)
    return wrapped


_TRIAL = (
    click.option("--labels", metavar="BED", help="Known regions; without them bits are compared."),
    _label,
    click.option(
        "--order",
        type=click.IntRange(0, 8),
        default=None,
        metavar="N",
        help="Order of both, with labels.  [default: the one that predicts held-out sequence best]",
    ),
    click.option(
        "--split",
        type=click.Choice(["contigs", "blocks"]),
        default=None,
        help="What is held out.  [default: contigs, or blocks where a contig outweighs a fold]",
    ),
    _folds,
    _block,
    options.strands,
    click.option(
        "--max-hmm-order",
        type=click.IntRange(0, 6),
        default=3,
        show_default=True,
        metavar="N",
        help="Highest order of HMMs.",
    ),
    click.option(
        "--states",
        type=click.IntRange(2, 8),
        default=2,
        show_default=True,
        metavar="K",
        help="States of HMMs, without labels.",
    ),
    click.option(
        "--restarts",
        type=click.IntRange(1),
        default=3,
        show_default=True,
        metavar="R",
        help="Fits of each HMM from different starts, without labels.",
    ),
    click.option(
        "--decoder",
        type=click.Choice(["path", "posterior"]),
        default="path",
        show_default=True,
        help="How the HMM calls: best path, or posterior over 0.5.",
    ),
    options.seed,
    options.sequence_options(),
    options.threads,
    options.force,
)


@click.command()
@options.fasta
@options.output
@click.option(
    "--fold",
    "number",
    type=click.IntRange(1),
    required=True,
    metavar="N",
    help="Which of the folds is held out, from 1 up.",
)
@_trial
def fold(sources: Any, truth: Any, settings: Any, output: str, number: int, force: bool) -> None:
    """Do the work of one fold of a comparison, as a job of its own.

    Takes the options of compare. With a folder of this kind for each fold, named 1, 2 and so on,
    compare --parts ends the comparison.
    """
    from hmmseg.jobs import fold as job

    click.echo(job.fold(sources, output, truth, settings, number, force))


@click.command()
@options.fasta
@options.output
@click.option(
    "--parts", metavar="DIR", help="Do no fold: there is what hmmseg fold wrote, by its number."
)
@click.option(
    "--max-order",
    type=click.IntRange(0, 8),
    default=8,
    show_default=True,
    metavar="N",
    help="Highest order of chains, without labels.",
)
@click.option(
    "--replicates",
    type=click.IntRange(10),
    default=1000,
    show_default=True,
    metavar="B",
    help="Bootstrap replicates.",
)
@_trial
def compare(
    sources: Any, truth: Any, settings: Any, output: str, parts: str | None, force: bool
) -> None:
    """Compare an HMM with Markov chains on sequence that neither has seen.

    With labels both are trained and tested in folds, and measured base by base and region by
    region. Without, their bits per held-out base are compared, their calls, and their accuracy
    on sequence drawn from the fitted HMM. Ends with a verdict, which may be that the two do not
    differ, or that the chain is better.
    """
    from hmmseg.jobs import compare as job
    from hmmseg.jobs.comparison_files import printed

    found = job.compare(sources, output, truth, settings, parts=parts, force=force)
    # The folds were timed elsewhere, if at all.
    for line in printed(found, times=parts is None):
        click.echo(line)
