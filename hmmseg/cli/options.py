"""Options that several commands share."""

import os
from collections.abc import Callable
from functools import wraps
from typing import Any

import click

__all__ = [
    "fasta",
    "force",
    "merge_gap",
    "min_length",
    "model",
    "output",
    "seed",
    "sequence_options",
    "strands",
    "threads",
    "train_bases",
]

Decorated = Callable[..., Any]


def sequence_options(
    circular: bool = True, soft_mask: bool = False
) -> Callable[[Decorated], Decorated]:
    """Add the options that choose records, and hand them on as one ``sources``.

    ``circular`` and ``soft_mask`` say whether there are options for these, too.
    """

    def decorate(function: Decorated) -> Decorated:
        @wraps(function)
        def with_sources(
            records: str | None,
            min_record: int,
            exclude: str | None,
            gap_min: int,
            soft_mask: str | None = None,
            circular: tuple[str, ...] = (),
            **others: Any,
        ) -> Any:
            from hmmseg.jobs.sources import Sources

            fasta = others.pop("fasta")
            names = (fasta,) if isinstance(fasta, str) else fasta
            sources = Sources(names, records, min_record, exclude, circular, gap_min, soft_mask)
            return function(sources, **others)

        options = [
            click.option("--records", metavar="FILE", help="Use only the records listed here."),
            click.option(
                "--min-record", type=click.IntRange(0), default=0, metavar="LENGTH",
                help="Leave out records shorter than this many bases.",
            ),
            click.option("--exclude", metavar="BED", help="Leave out these intervals."),
            click.option(
                "--gap-min", type=click.IntRange(1), default=25, show_default=True,
                metavar="LENGTH", help="A run of N this long is a gap.",
            ),
        ]  # fmt: skip
        if circular:
            options.append(
                click.option(
                    "--circular",
                    multiple=True,
                    metavar="NAME",
                    help="This record is a circle; may be given again.",
                )
            )
        if soft_mask:
            options.append(
                click.option(
                    "--soft-mask",
                    type=click.Choice(["use", "hide"]),
                    default=None,
                    help="Whether lower-case bases are used, or hidden as missing.  "
                    "[default: as the preset or model says, else use]",
                )
            )
        wrapped: Decorated = with_sources
        for option in reversed(options):
            wrapped = option(wrapped)
        return wrapped

    return decorate


fasta = click.argument("fasta", nargs=-1, required=True, metavar="FASTA...")
force = click.option("--force", is_flag=True, help="Replace an earlier result.")
output = click.option("--output", required=True, metavar="DIR", help="Folder to write.")
model = click.option("--model", required=True, metavar="MODEL.json", help="Model to use.")

min_length = click.option(
    "--min-length", type=click.IntRange(1), default=1, show_default=True, metavar="L",
    help="Drop regions shorter than this many bases.",
)  # fmt: skip

merge_gap = click.option(
    "--merge-gap", type=click.IntRange(0), default=0, show_default=True, metavar="G",
    help="Merge regions of one state at most this far apart, first of all.",
)  # fmt: skip

seed = click.option(
    "--seed", type=click.IntRange(0), default=1, show_default=True, metavar="S",
    help="Of all random draws.",
)  # fmt: skip

train_bases = click.option(
    "--train-bases", type=click.IntRange(0), default=50_000_000, show_default=True, metavar="N",
    help="Train on a random sample of about so many bases; 0 for everything.",
)  # fmt: skip


def _default_threads() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else 1


threads = click.option(
    "--threads", type=click.IntRange(1), default=_default_threads, metavar="T",
    help="Threads to use.  [default: the processors this process may use]",
)  # fmt: skip

strands = click.option(
    "--symmetric/--stranded",
    default=True,
    show_default=True,
    help="Whether both strands are treated alike.",
)
