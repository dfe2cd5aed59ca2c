"""Commands about sequence and models."""

from typing import Any

import click

from hmmseg.cli import options
from hmmseg.cli.tables import print_table
from hmmseg.errors import UsageError

__all__ = ["adopt", "explain", "presets", "print_findings", "score", "simulate", "survey", "train"]

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
@click.option("--preset", metavar="NAME", help="Start from a preset; see hmmseg presets.")
@click.option("--spec", metavar="FILE.yaml", help="Start from what this file says is wanted.")
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
@options.strands
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
    help="Fits from different starts.  [default: 5; 1 with a start or labels]",
)
@options.seed
@click.option(
    "--max-iterations",
    type=click.IntRange(0),
    default=None,
    metavar="I",
    help="Iterations of one fit at most; 0 leaves the start as it is.  [default: 500]",
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
    default=None,
    metavar="BASES",
    help="Bases added to each state's word counts, in all.  [default: 0, or as the preset says]",
)
@click.option("--labels", metavar="BED", help="Intervals whose state, in column 4, is known.")
@click.option(
    "--fix",
    "fixed",
    multiple=True,
    metavar="PARAMETER",
    help="Keep STATE.emissions, STATE.length, transitions or start; may be given again.",
)
@options.train_bases
@options.sequence_options(soft_mask=True)
@options.threads
@options.force
def train(
    sources: Any, output: str, preset: str | None, spec: str | None, init: str | None,
    start: str, labels: str | None, train_bases: int, threads: int, force: bool, **plan: Any,
) -> None:  # fmt: skip
    """Fit a model to sequence with Baum-Welch."""
    from hmmseg.jobs import train as job
    from hmmseg.training.restarts import Plan

    _check_start(preset, spec, init, plan["symmetric"], start)
    origin, proposed = job.origin(preset, spec, init, labels)
    for key, value in proposed.items():
        plan[key] = value if plan[key] is None else plan[key]
    found = job.train(
        sources, output, Plan(start_kind=start, **plan), origin,
        threads=threads, force=force, train_bases=None if labels else train_bases or None,
    )  # fmt: skip
    print_findings(found.findings, found.cautions)


def _check_start(
    preset: str | None, spec: str | None, init: str | None, symmetric: bool, start: str
) -> None:
    """Refuse options that contradict one another."""
    given = [name for name, x in (("--preset", preset), ("--spec", spec), ("--init", init)) if x]
    if len(given) > 1:
        raise UsageError(f"{' and '.join(given)} do not go together; give one")
    if given:
        context = click.get_current_context()
        for name in ("states", "order", "symmetric", "start"):
            if context.get_parameter_source(name) is click.core.ParameterSource.COMMANDLINE:
                raise UsageError(
                    f"--{name} does not go with {given[0]}, which says it; leave it out"
                )
    elif symmetric and start == "free":
        raise UsageError("--start free needs --stranded: a symmetric model starts stationary")


_FINDINGS = (
    "state", "reported", "gc", "cpg_oe", "expected_length", "share", "words", "in_words",
)  # fmt: skip


def print_findings(findings: Any, cautions: Any) -> None:
    """Print what a model found, as a table and in words; cautions to standard error."""
    from hmmseg.progress import warn

    rows = []
    for row in findings:
        cpg = row.cpg_observed_expected
        words = ", ".join(f"{word} x{times:.2f}" for word, times in row.words)
        numbers = [f"{row.gc:.3f}", "NA" if cpg is None else f"{cpg:.2f}"]
        numbers += [f"{row.expected_length:.0f}", f"{row.share:.4f}"]
        reported = "yes" if row.reported else "no"
        rows.append([row.name, reported, *numbers, words or "NA", row.text])
    print_table(_FINDINGS, rows)
    for line in cautions:
        warn(line)


@click.command()
@click.argument("model", metavar="MODEL.json")
def explain(model: str) -> None:
    """Say what a model's states are, and what to be careful about."""
    from hmmseg.jobs import explain as job

    found = job.explain(model)
    print_findings(found.findings, found.cautions)


@click.command()
@click.argument("model", metavar="MODEL.json")
@click.option("--output", required=True, metavar="COPY.json", help="Model document to write.")
@options.force
def adopt(model: str, output: str, force: bool) -> None:
    """Check a model and copy it, to be used as it is."""
    from hmmseg.jobs import adopt as job

    found = job.adopt(model, output, force)
    click.echo(f"order {found.order}; states: {', '.join(found.names)}")


@click.command()
@click.argument("name", required=False, metavar="[NAME]")
def presets(name: str | None) -> None:
    """List the presets, or print one's document.

    The printed document is a specification: save it, change it, and give it to train --spec.
    """
    from hmmseg.model.presets import PRESETS, load_preset, preset_text

    if name is not None:
        click.echo(preset_text(name), nl=False)
        return
    for preset in PRESETS:
        wanted = load_preset(preset)
        mask = {"use": "used", "hide": "hidden"}[wanted.soft_mask]
        lengths = ", ".join(
            f"{s.name}{'' if s.reported else ' (not reported)'} {s.expected_length:,.0f}"
            for s in wanted.states
        )
        click.echo(f"{preset}")
        for label, text in (
            ("for", wanted.purpose),
            ("finds", wanted.finds),
            ("also finds", wanted.also_finds),
            ("states", f"order {wanted.order}; expected lengths in bases: {lengths}"),
            ("lower case", f"{mask}{'' if wanted.trained else '; not trained, placed by GC'}"),
            (
                "calls",
                f"decode --decoder {wanted.decoder} --min-length {wanted.min_length} "
                f"--merge-gap {wanted.merge_gap}"
                + (f" --end-window {wanted.end_window}" if wanted.end_window else ""),
            ),
            ("source", wanted.source),
        ):
            click.echo(click.wrap_text(text, 96, f"  {label + ':':<12}", " " * 14))
        click.echo()


@click.command()
@options.fasta
@options.model
@click.option("--per-base", metavar="FILE.bw", help="Write the bits of every base as bigWig.")
@click.option("--path", metavar="BED", help="Tell the probability of this path of states, too.")
@click.option(
    "--chain-start",
    type=click.Choice(["counted", "stationary", "free"]),
    default=None,
    help="Of a chain: whether a contig's first bases count by the model's words, by the "
    "stationary distribution, or not at all.",
)
@options.sequence_options()
@options.threads
@options.force
def score(
    sources: Any, model: str, per_base: str | None, path: str | None, chain_start: str | None,
    threads: int, force: bool,
) -> None:  # fmt: skip
    """Print the log-likelihood (nats) and bits per base of each record.

    Bits of a base are -log2 P(base | all bases before it); under a symmetric model of order 1
    or more the mean of both strands, each read in its own direction.

    The columns of --path are log P(sequence, path), its parts, and log P(path | sequence).
    Positions in no interval are in the background state.
    """
    from hmmseg.jobs import score as job

    extras = job.Extras(chain_start, path, per_base, force)
    click.echo("\t".join(["record", "bases", "log_likelihood", "bits_per_base", *extras.columns]))
    for row in job.score(sources, model, threads, extras):
        numbers = (row.log_likelihood, row.bits_per_base, *row.more)
        click.echo("\t".join([row.record, str(row.bases), *map(repr, numbers)]))


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
