"""The command ``train``: fit a model to sequence."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import isfinite
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg import __version__
from hmmseg.errors import LabelError
from hmmseg.evidence.agreement import difference
from hmmseg.evidence.findings import describe
from hmmseg.inference.streams import Corpus
from hmmseg.jobs.explain import Explained, explain
from hmmseg.jobs.sources import Sources
from hmmseg.model import load_model, model_to_dict
from hmmseg.model.anchoring import anchored
from hmmseg.model.presets import load_preset
from hmmseg.model.specification import Specification
from hmmseg.model.specification_file import load_specification
from hmmseg.outputs import check_target, sha256_of, whole_file, write_json
from hmmseg.progress import Progress, warn
from hmmseg.provenance import is_current, write_provenance
from hmmseg.sequence.contigs import Contig
from hmmseg.training.baum_welch import Fit
from hmmseg.training.constraints import Prior
from hmmseg.training.labels import label_names, labels_of_contigs, read_labels
from hmmseg.training.restarts import Plan, Restarts, fit_restarts
from hmmseg.training.starts import labelled_start, word_counts

__all__ = ["Origin", "origin", "placed", "train"]


_ITERATIONS = 500


@dataclass(frozen=True)
class Origin:
    """Where training starts, if not at random, and what is known beforehand.

    Parameters
    ----------
    init
        A model document.
    wanted
        A specification, which is anchored to the sequence.
    file
        The file it was read from; None for a preset.
    labels
        A BED file of intervals whose state, in column 4, is known. Without another start, its
        names are those of the states.
    """

    init: str | None = None
    wanted: Specification | None = None
    file: str | None = None
    labels: str | None = None

    def parameters(self) -> dict[str, Any]:
        """Return what is to stand in the provenance."""
        labels = {"labels": Path(self.labels).name} if self.labels else {}
        if self.file is not None:
            return {"spec": Path(self.file).name, **labels}
        if self.wanted is not None:
            return {"preset": self.wanted.name, **labels}
        return {"init": Path(self.init).name if self.init else None, **labels}

    def files(self) -> list[str]:
        """Return the files that bear on the result."""
        return [path for path in (self.init, self.file, self.labels) if path]


def origin(
    preset: str | None, spec: str | None, init: str | None, labels: str | None = None
) -> tuple[Origin, dict[str, Any]]:
    """Return where training starts, and the settings of a plan that it proposes.

    Parameters
    ----------
    preset
        Name of a preset.
    spec
        File of a specification.
    init
        File of a model.
    labels
        File of intervals whose state is known.
    """
    settled = bool(init or labels)
    proposed = {"restarts": 1 if settled else 5, "max_iterations": _ITERATIONS, "pseudocount": 0.0}
    if not preset and not spec:
        return Origin(init, labels=labels), proposed
    wanted = load_preset(preset) if preset else load_specification(spec or "")
    return Origin(None, wanted, spec, labels), {
        "restarts": wanted.restarts,
        "max_iterations": _ITERATIONS if wanted.trained else 0,
        "pseudocount": wanted.pseudocount,
    }


def train(
    sources: Sources,
    output: str,
    plan: Plan,
    start: Origin,
    *,
    threads: int,
    force: bool,
    train_bases: int | None = None,
    reuse: bool = False,
) -> Explained:
    """Fit a model and write its document.

    Parameters
    ----------
    sources
        What to train on.
    output
        The model document to write; its provenance goes beside it.
    plan
        What to fit and how; its starting model is set from the origin. No iteration means that
        the starting model is written as it is.
    start
        Where training starts.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace an existing document.
    train_bases
        Train on a seeded sample of about so many bases; None for everything.
    reuse
        Return an earlier result if it is what would be made again.
    """
    if not reuse:
        check_target(output, force)
    if start.init:
        plan = replace(plan, init=load_model(start.init))
    if start.wanted is not None:
        sources = sources.with_soft_mask(start.wanted.soft_mask)
    parameters = _parameters(sources, plan, start, train_bases)
    inputs = [*sources.files(), *start.files()]
    if reuse and is_current(output, "train", parameters, plan.seed, inputs):
        return explain(output)
    check_target(output, force)
    contigs, sampled = sources.read_sample(train_bases, plan.seed)
    if start.wanted is not None:
        plan = placed(plan, start.wanted, contigs)
    plan, known = _with_labels(plan, start.labels, sources, contigs)
    order = plan.init.order if plan.init else plan.order
    symmetric = plan.init.symmetric if plan.init else plan.symmetric
    corpus = Corpus(contigs, order, symmetric and order > 0, threads, labels=known)
    with Progress(plan.restarts * (plan.max_iterations + 1), "training", "iterations") as progress:

        def watch(number: int, iteration: int, bits: float) -> None:
            progress.advance(1, f"start {number + 1}, iteration {iteration}, {bits:.6f} bits/base")

        found = fit_restarts(plan, corpus, threads, watch)
    best = found.fits[found.best]
    _tell(plan, found)
    document = model_to_dict(found.model)
    document["training"] = {
        **_history(inputs, plan, corpus, found, best),
        "plan": _planned(plan, sources, train_bases),
        **start.parameters(),
        "soft_mask": sources.soft_mask or "use",
        "sampled": sampled,
    }
    with whole_file(output, force=force) as temporary:
        write_json(temporary, document)
    write_provenance(output, "train", parameters, plan.seed, inputs, [output])
    return explain(output)


def placed(plan: Plan, wanted: Specification, contigs: Sequence[Contig]) -> Plan:
    """Return the plan with what a specification says, anchored to the sequence."""
    model = anchored(wanted, word_counts(contigs, wanted.order))
    strengths = [
        np.array([getattr(wish, key) for wish in wanted.states])
        for key in ("pseudocount", "length_pseudocount")
    ]
    prior = None
    if any(strength.any() for strength in strengths):
        around = Prior.around(model, *strengths)
        even = Prior.even(model, plan.pseudocount)
        words = around.words
        if words is not None and even.words is not None:
            words = words + even.words
        prior = Prior(words, around.steps)
    return replace(plan, init=model, prior=prior, fixed=(*wanted.fixed, *plan.fixed))


def _with_labels(
    plan: Plan, labels: str | None, sources: Sources, contigs: list[Contig]
) -> tuple[Plan, list[NDArray[np.uint8]] | None]:
    """Return the plan, started from labels if it has no start, and the labels of positions."""
    if labels is None:
        return plan, None
    lengths = {contig.record: contig.record_length for contig in contigs}
    lines = read_labels(labels, lengths, others_too=sources.selects)
    if plan.init is not None:
        return plan, labels_of_contigs(lines, contigs, plan.init.names)
    names = label_names(lines)
    if len(names) > plan.states:
        raise LabelError(
            f"{labels}: names {len(names)} states ({', '.join(names)}), but --states is "
            f"{plan.states}"
        )
    free = plan.states - len(names)
    names += [f"unlabelled-{i + 1}" if free > 1 else "unlabelled" for i in range(free)]
    found = labels_of_contigs(lines, contigs, names)
    start = labelled_start(
        contigs, found, names, plan.order, symmetric=plan.symmetric, start_kind=plan.start_kind
    )
    return replace(plan, init=start), found


def _tell(plan: Plan, found: Restarts) -> None:
    """Warn of what a person should know about the search."""
    best = found.fits[found.best]
    if not best.converged and plan.max_iterations:
        warn(
            f"training stopped after {plan.max_iterations} iterations before it converged; raise "
            "--max-iterations or --tolerance"
        )
    if len(found.fits) > 1:
        order = sorted(range(len(found.fits)), key=lambda i: -found.fits[i].objective)
        second = found.fits[order[1]]
        apart = best.objective - second.objective
        if text := difference(found.model, second.model):
            warn(
                f"the best two of {len(found.fits)} starts, {apart:.1f} nats apart, found "
                f"different things: {text}; give more --restarts, or say what is wanted with "
                "--preset or --spec"
            )


def _parameters(
    sources: Sources, plan: Plan, start: Origin, train_bases: int | None
) -> dict[str, Any]:
    own = start.parameters()
    if start.wanted is not None:
        own |= {"order": start.wanted.order}
    elif plan.init is None:
        own |= {
            "states": plan.states,
            "order": plan.order,
            "symmetric": plan.symmetric,
            "start": plan.start_kind,
        }
    return {
        **sources.parameters(),
        **own,
        "restarts": plan.restarts,
        "max_iterations": plan.max_iterations,
        "tolerance": plan.tolerance,
        "pseudocount": plan.pseudocount,
        "fixed": list(plan.fixed),
        "train_bases": train_bases,
    }


def _history(
    inputs: Sequence[str], plan: Plan, corpus: Corpus, found: Restarts, best: Fit
) -> dict[str, Any]:
    """Return what a model says of its training."""
    return {
        "software": f"hmmseg {__version__}",
        "inputs": [
            {"name": Path(path).name, "sha256": None if path == "-" else sha256_of(path)}
            for path in inputs
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
                "states": _briefly(one),
                "trace": list(one.trace),
            }
            for one in found.fits
        ],
    }


def _planned(plan: Plan, sources: Sources, train_bases: int | None) -> dict[str, Any]:
    """Return what it takes to train alike on other sequence."""
    return {
        "states": plan.states,
        "order": plan.order,
        "symmetric": plan.symmetric,
        "start_kind": plan.start_kind,
        "restarts": plan.restarts,
        "seed": plan.seed,
        "max_iterations": plan.max_iterations,
        "tolerance": plan.tolerance,
        "pseudocount": plan.pseudocount,
        "fixed": list(plan.fixed),
        "train_bases": train_bases,
        "without": list(sources.without),
    }


def _briefly(fit: Fit) -> list[dict[str, float | None]]:
    """Return what one fit found, in numbers."""
    return [
        {
            "gc": state.gc,
            "expected_length": state.expected_length if isfinite(state.expected_length) else None,
            "share": state.share,
        }
        for state in describe(fit.model)
    ]
