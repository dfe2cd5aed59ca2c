"""The command line: parse, call one function, print, exit."""

import os
import sys
from collections.abc import Callable, Sequence
from functools import wraps
from typing import Any

import click

from hmmseg import __version__
from hmmseg.errors import HmmsegError, UsageError

__all__ = ["main"]

# Rooms are imported inside the commands, so that --help need not wait for compilers and plots.

_Decorated = Callable[..., Any]


class _Group(click.Group):
    """Lists the commands in the order in which they are used."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(self.commands)


@click.group(cls=_Group, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="hmmseg", message="%(prog)s %(version)s")
@click.option("--debug", is_flag=True, help="Show the traceback of an error.")
def cli(debug: bool) -> None:
    """Find where the composition of a genome assembly changes.

    Trains hidden Markov models on unlabelled sequence, calls regions and writes their posterior
    probabilities. FASTA may be plain, gzip or bgzip, or '-' for standard input; names that end
    in .gb, .gbk or .gbff are read as GenBank.
    """


def _sequence_options(circular: bool = True) -> Callable[[_Decorated], _Decorated]:
    """Add the options that choose records, and hand them on as one ``sources``."""

    def decorate(function: _Decorated) -> _Decorated:
        @wraps(function)
        def with_sources(
            records: str | None,
            min_record: int,
            exclude: str | None,
            gap_min: int,
            circular: tuple[str, ...] = (),
            **others: Any,
        ) -> Any:
            from hmmseg.jobs.sources import Sources

            fasta = others.pop("fasta")
            names = (fasta,) if isinstance(fasta, str) else fasta
            sources = Sources(names, records, min_record, exclude, circular, gap_min)
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
        wrapped: _Decorated = with_sources
        for option in reversed(options):
            wrapped = option(wrapped)
        return wrapped

    return decorate


_fasta = click.argument("fasta", nargs=-1, required=True, metavar="FASTA...")
_force = click.option("--force", is_flag=True, help="Replace an earlier result.")
_output = click.option("--output", required=True, metavar="DIR", help="Folder to write.")
_model = click.option("--model", required=True, metavar="MODEL.json", help="Model to use.")


def _default_threads() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else 1


_threads = click.option(
    "--threads", type=click.IntRange(1), default=_default_threads, metavar="T",
    help="Threads to use.  [default: the processors this process may use]",
)  # fmt: skip


@cli.command()
@_fasta
@_output
@_sequence_options()
@_force
def survey(sources: Any, output: str, force: bool) -> None:
    """Describe an assembly: sizes, gaps, composition, oddities."""
    from hmmseg.jobs import survey as job

    document = job.survey(sources, output, force)
    for key, value in document["assembly"].items():
        if isinstance(value, int | float | str):
            click.echo(f"{key}\t{value}")


@cli.command()
@_fasta
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
@_sequence_options()
@_threads
@_force
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


@cli.command()
@click.argument("fasta", metavar="FASTA")
@_model
@_output
@click.option(
    "--decoder",
    type=click.Choice(["path", "posterior"]),
    default="path",
    show_default=True,
    help="Best path, or posterior over a threshold.",
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
@_sequence_options()
@_threads
@_force
def decode(
    sources: Any, model: str, output: str, decoder: str, threshold: float, min_length: int,
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
    _print_regions(found)


def _print_regions(found: dict[str, Any]) -> None:
    click.echo("state\tregions\tbases\tshare")
    for state, numbers in found["regions"].items():
        click.echo(f"{state}\t{numbers['count']}\t{numbers['bases']}\t{numbers['share']:.4f}")


@cli.command()
@_fasta
@_model
@_sequence_options()
@_threads
def score(sources: Any, model: str, threads: int) -> None:
    """Print the log-likelihood (nats) and bits per base of each record."""
    from hmmseg.jobs import score as job

    click.echo("record\tbases\tlog_likelihood\tbits_per_base")
    for row in job.score(sources, model, threads):
        click.echo(f"{row.record}\t{row.bases}\t{row.log_likelihood!r}\t{row.bits_per_base!r}")


@cli.command()
@_model
@_output
@click.option("--records", type=click.IntRange(1), required=True, metavar="R", help="How many.")
@click.option("--length", type=click.IntRange(1), required=True, metavar="L", help="In bases.")
@click.option("--seed", type=click.IntRange(0), required=True, metavar="S", help="Of the draws.")
@_force
def simulate(model: str, output: str, records: int, length: int, seed: int, force: bool) -> None:
    """Draw sequences with a known truth from a model."""
    from hmmseg.jobs import simulate as job

    job.simulate(model, output, records, length, seed, force)


@cli.command()
@click.argument("folder", metavar="DIR")
def verify(folder: str) -> None:
    """Check a result folder against its provenance."""
    from hmmseg.jobs import verify as job

    for line in job.verify(folder):
        click.echo(line)


@cli.command()
@_fasta
@_output
@click.option(
    "--batch-bases",
    type=click.IntRange(1),
    default=50_000_000,
    show_default=True,
    metavar="N",
    help="Bases in a batch.",
)
@_sequence_options(circular=False)
@_force
def batches(sources: Any, output: str, batch_bases: int, force: bool) -> None:
    """Share records out to batches of about equal size."""
    from hmmseg.jobs import batches as job

    click.echo(f"{job.batches(sources, output, batch_bases, force)} batches")


@cli.command()
@click.argument("folders", nargs=-1, required=True, metavar="DIR...")
@_output
@_force
def gather(folders: tuple[str, ...], output: str, force: bool) -> None:
    """Put the calls of batches together."""
    from hmmseg.jobs import gather as job

    _print_regions(job.gather(folders, output, force))


@cli.command()
@click.argument("named", nargs=-1, required=True, metavar="NAME=DIR...")
@click.option("--output", required=True, metavar="FILE.tsv", help="Table to write.")
@_force
def summary(named: tuple[str, ...], output: str, force: bool) -> None:
    """Make one table of several assemblies' calls."""
    from hmmseg.jobs import summary as job

    job.summary(named, output, force)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments
        As on the command line, without the program's name; those of the process by default.

    Returns
    -------
    int
        0 done, 1 the data or a file is at fault, 2 the call is.
    """
    given = list(sys.argv[1:] if arguments is None else arguments)
    debug = "--debug" in given
    # A flag of the whole program may stand anywhere.
    given = [word for word in given if word != "--debug"]
    try:
        cli.main(given, prog_name="hmmseg", standalone_mode=False)
    except BrokenPipeError:
        # Whoever reads our output has seen enough.
        sys.stdout = open(os.devnull, "w")  # noqa: SIM115
        return 1
    except (HmmsegError, click.ClickException, click.Abort, OSError, MemoryError) as error:
        if debug and not isinstance(error, click.ClickException):
            raise
        message, code = _explained(error)
        click.echo(f"hmmseg: {_printable(message)}", err=True)
        return code
    return 0


def _explained(error: BaseException) -> tuple[str, int]:
    """Return the line that explains an error, and the exit code."""
    match error:
        case click.ClickException():
            return f"{' '.join(error.format_message().split()).rstrip('.')}; see --help", 2
        case HmmsegError():
            return str(error), error.exit_code
        case OSError():
            return f"{error.filename or 'input or output'}: {error.strerror or error}", 1
        case MemoryError():
            return "out of memory; give fewer records at a time, see --records", 1
        case _:
            return "interrupted; nothing was written", 1


def _printable(message: str) -> str:
    """Return the message without what would break the line."""
    return "".join(c if c.isprintable() else "?" for c in message)


if __name__ == "__main__":
    sys.exit(main())
