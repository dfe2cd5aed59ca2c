"""The command line: parse, call one function, print, exit."""

import os
import signal
import sys
from collections.abc import Sequence
from typing import NoReturn

import click

from hmmseg import __version__
from hmmseg.cli import calls, chains, evidence, models, pages, selection, whole
from hmmseg.errors import HmmsegError

__all__ = ["main"]


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


for _command in (
    whole.annotate,
    models.survey,
    models.presets,
    models.train,
    models.explain,
    models.adopt,
    selection.select,
    selection.recommend,
    calls.decode,
    evidence.calibrate,
    evidence.nulls,
    evidence.replicate,
    models.score,
    models.simulate,
    calls.diff,
    calls.verify,
    calls.batches,
    calls.cut,
    calls.gather,
    calls.summary,
    chains.chains,
    chains.classify,
    chains.orders,
    chains.machine,
    chains.fold,
    chains.compare,
    pages.report,
):
    cli.add_command(_command)


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
    if arguments is None:
        # A cancelled cluster job must remove what it has half written, too.
        signal.signal(signal.SIGTERM, _interrupt)
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


def _interrupt(number: int, frame: object) -> NoReturn:
    raise KeyboardInterrupt


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
