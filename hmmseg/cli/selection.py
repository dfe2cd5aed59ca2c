"""Commands about the choice of a model."""

import re
from typing import Any

import click

from hmmseg.cli import options

__all__ = ["recommend", "select"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.


class _Numbers(click.ParamType):
    """Whole numbers, such as ``1-3`` or ``0,2,4``."""

    name = "numbers"

    def __init__(self, least: int, most: int) -> None:
        self._least = least
        self._most = most

    def convert(self, value: Any, param: Any, ctx: Any) -> Any:
        """Return a sorted list of numbers."""
        if isinstance(value, list):
            return value
        found: set[int] = set()
        for part in str(value).split(","):
            match = re.fullmatch(r"\s*(\d{1,2})(?:-(\d{1,2}))?\s*", part)
            if not match:
                self.fail(f"'{value}' is not like 1-3 or 0,2,4", param, ctx)
            first, last = int(match[1]), int(match[2] or match[1])
            if not self._least <= first <= last <= self._most:
                self.fail(f"'{part}' is not within {self._least} to {self._most}", param, ctx)
            found |= set(range(first, last + 1))
        return sorted(found)


@click.command()
@options.fasta
@options.output
@click.option(
    "--states",
    type=_Numbers(1, 8),
    default="1-3",
    show_default=True,
    metavar="NUMBERS",
    help="Numbers of states to try; 1 is a chain.",
)
@click.option(
    "--orders",
    type=_Numbers(0, 8),
    default="0-3",
    show_default=True,
    metavar="NUMBERS",
    help="Orders to try.",
)
@options.strands
@click.option(
    "--folds",
    type=click.IntRange(2, 50),
    default=5,
    show_default=True,
    metavar="F",
    help="Folds of the cross-validation.",
)
@click.option(
    "--restarts",
    type=click.IntRange(1),
    default=3,
    show_default=True,
    metavar="R",
    help="Fits of each model from different starts.",
)
@options.seed
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
@click.option(
    "--train-bases",
    type=click.IntRange(0),
    default=10_000_000,
    show_default=True,
    metavar="N",
    help="Use a random sample of about so many bases; 0 for everything.",
)
@options.sequence_options(soft_mask=True)
@options.threads
@options.force
def select(
    sources: Any, output: str, states: list[int], orders: list[int], folds: int, restarts: int,
    train_bases: int, threads: int, force: bool, **plan: Any,
) -> None:  # fmt: skip
    """Compare numbers of states and orders by held-out likelihood.

    A grid may be done in parts, each cell a job of its own; hmmseg recommend puts them together.
    """
    from hmmseg.jobs import select as job
    from hmmseg.training.restarts import Plan

    grid = [
        # A chain has one maximum only.
        Plan(states=k, order=order, restarts=restarts if k > 1 else 1, **plan)
        for k in states
        for order in orders
    ]
    document = job.select(
        sources, output, grid, folds=folds, train_bases=train_bases or None, threads=threads,
        force=force,
    )  # fmt: skip
    _print(document)


@click.command()
@click.argument("folders", nargs=-1, required=True, metavar="DIR...")
@options.output
@options.force
def recommend(folders: tuple[str, ...], output: str, force: bool) -> None:
    """Put parts of a selection together and recommend a model."""
    from hmmseg.jobs import select as job

    _print(job.recommend(folders, output, force))


def _print(document: dict[str, Any]) -> None:
    from hmmseg.jobs.select import table_of

    click.echo(table_of(document), nl=False)
    chosen = document["recommended"]
    if chosen is None:
        click.echo("recommended: not assessable, there is too little sequence")
        return
    caution = f" ({chosen['caution']})" if chosen["caution"] else ""
    click.echo(
        f"recommended: {chosen['states']} states, order {chosen['order']}; {chosen['because']}"
        f"{caution}"
    )
