"""The command ``train``: fit a model to sequence."""

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hmmseg import __version__
from hmmseg.inference.streams import Corpus
from hmmseg.jobs.sources import Sources
from hmmseg.model import Model, model_to_dict
from hmmseg.model.parameters import FREE
from hmmseg.outputs import check_target, sha256_of, whole_file, write_json
from hmmseg.progress import Progress, warn
from hmmseg.provenance import write_provenance
from hmmseg.training.baum_welch import Fit
from hmmseg.training.restarts import Plan, Restarts, fit_restarts

__all__ = ["StateRow", "train"]


@dataclass(frozen=True)
class StateRow:
    """One line of the table that training ends with.

    Attributes
    ----------
    name : str
        Of the state.
    reported : bool
        Whether its regions are reported.
    gc : float
        GC fraction of its emissions.
    expected_length : float
        Mean length of a visit, in bases.
    share : float
        Expected share of positions.
    """

    name: str
    reported: bool
    gc: float
    expected_length: float
    share: float


def train(
    sources: Sources, output: str, plan: Plan, init: str | None, threads: int, force: bool
) -> list[StateRow]:
    """Fit a model and write its document.

    Parameters
    ----------
    sources
        What to train on.
    output
        The model document to write; its provenance goes beside it.
    plan
        What to fit and how.
    init
        The file the plan's starting model was read from.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace an existing document.

    Returns
    -------
    list of StateRow
        One for each state.
    """
    check_target(output, force)
    contigs = [contig for _, found in sources.read_contigs() for contig in found]
    order = plan.init.order if plan.init else plan.order
    symmetric = plan.init.symmetric if plan.init else plan.symmetric
    corpus = Corpus(contigs, order, symmetric and order > 0, threads)
    with Progress(plan.restarts * (plan.max_iterations + 1), "training", "iterations") as progress:

        def watch(number: int, iteration: int, bits: float) -> None:
            progress.advance(1, f"start {number + 1}, iteration {iteration}, {bits:.6f} bits/base")

        found = fit_restarts(plan, corpus, threads, watch)
    best = found.fits[found.best]
    if not best.converged:
        warn(
            f"training stopped after {plan.max_iterations} iterations before it converged; raise "
            "--max-iterations or --tolerance"
        )
    document = model_to_dict(found.model)
    document["training"] = _history(sources, plan, corpus, found, best)
    with whole_file(output, force=force) as temporary:
        write_json(temporary, document)
    inputs = [*sources.files(), *([init] if init else [])]
    write_provenance(output, "train", _parameters(sources, plan, init), plan.seed, inputs, [output])
    return _rows(found.model)


def _parameters(sources: Sources, plan: Plan, init: str | None) -> dict[str, Any]:
    own: dict[str, Any] = {
        "init": Path(init) if init else None,
        "states": plan.states,
        "order": plan.order,
        "symmetric": plan.symmetric,
        "start": plan.start_kind,
    }
    if init:
        own = {"init": Path(init)}
    return {
        **sources.parameters(),
        **own,
        "restarts": plan.restarts,
        "max_iterations": plan.max_iterations,
        "tolerance": plan.tolerance,
        "pseudocount": plan.pseudocount,
    }


def _history(
    sources: Sources, plan: Plan, corpus: Corpus, found: Restarts, best: Fit
) -> dict[str, Any]:
    """Return what a model says of its training."""
    return {
        "software": f"hmmseg {__version__}",
        "inputs": [
            {"name": Path(path).name, "sha256": None if path == "-" else sha256_of(path)}
            for path in sources.files()
        ],
        "contigs": len(corpus.contigs),
        "bases": corpus.bases,
        "seed": plan.seed,
        "log_likelihood": best.log_likelihood,
        "bits_per_base": best.bits_per_base,
        "iterations": len(best.trace) - 1,
        "converged": best.converged,
        "best_restart": found.best + 1,
        "restarts": [
            {
                "log_likelihood": one.log_likelihood,
                "iterations": len(one.trace) - 1,
                "converged": one.converged,
                "trace": list(one.trace),
            }
            for one in found.fits
        ],
    }


def _rows(model: Model) -> list[StateRow]:
    if model.start_kind == FREE:
        from hmmseg.training.starts import long_run_share  # noqa: PLC0415 - only here

        share = long_run_share(model)
    else:
        share = model.start_probabilities
    return [
        StateRow(
            name=model.names[i],
            reported=model.reported[i],
            gc=float(model.gc[i]),
            expected_length=float("inf")
            if model.transitions[i, i] == 1
            else float(1 / (1 - model.transitions[i, i])),
            share=float(share[i]),
        )
        for i in range(model.states)
    ]
