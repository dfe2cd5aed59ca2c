"""The section *Why this model*: its selection, its training, and the comparison with chains."""

from collections.abc import Mapping, Sequence
from math import isnan
from typing import Any

from hmmseg.report.model_figures import draw_traces
from hmmseg.report.parts import Item, Missing, Part, Picture, Section, Table
from hmmseg.report.results import Results
from hmmseg.report.words import NOT_KNOWN, count, decimals, in_bases, percent, plural, small

__all__ = ["why_section"]


def why_section(results: Results) -> Section:
    """Return the section."""
    parts = [_reason(results), _selection(results), _training(results), _comparison(results)]
    return Section("why", "Why this model", _conclusion(results), [p for p in parts if p])


def _conclusion(results: Results) -> str:
    sentences = []
    if results.comparison is not None:
        sentences.append(str(results.comparison["verdict"]["words"]))
    else:
        sentences.append(
            "Whether a hidden state gains anything over a Markov chain has not been asked."
        )
    recommended = (results.selection or {}).get("recommended")
    if recommended and results.model is not None:
        same = (recommended["states"], recommended["order"]) == (
            results.model.states, results.model.order,
        )  # fmt: skip
        sentences.append(
            f"The selection recommends {plural(recommended['states'], 'state')} of order "
            f"{recommended['order']}, {'which' if same else 'not what'} this model has."
        )
    return " ".join(sentences)


def _reason(results: Results) -> Part | None:
    """Return what was decided beforehand, with the reasons."""
    if results.decisions is None:
        return None
    rows = [
        [key.replace("_", " "), _plain(entry.get("value")), str(entry.get("because") or "")]
        for key, entry in results.decisions.items()
        if isinstance(entry, Mapping)
    ]
    preset = results.decisions.get("preset", {})
    text = f"It starts from the preset {preset.get('value')}: {preset.get('because')}."
    if not preset.get("value"):
        text = "It starts from no preset."
    table = Table(["decision", "value", "because"], rows, "What was decided, and why.", 3,
                  folded="All decisions")  # fmt: skip
    return Part("What was decided", [table], text)


def _plain(value: Any) -> str:
    if isinstance(value, list):
        shown = ", ".join(map(str, value[:12]))
        return f"{shown}, and {len(value) - 12} more" if len(value) > 12 else shown or "none"
    return "none" if value is None else str(value)


def _selection(results: Results) -> Part:
    title = "States and order"
    document, folder = results.selection, results.folder.name
    if document is None:
        command = f"hmmseg select FASTA --states 1-4 --orders 0-2 --output {folder}/selection"
        return Part(title, [Missing("The selection of states and order", command)])
    items: list[Item] = []
    drawn = results.drawings.get("selection")
    if drawn is not None:
        items.append(
            Picture("selection", "Bits per base of sequence that was held out, by order and "
                    "number of states; less is better.", drawn, wide=False)
        )  # fmt: skip
    if results.candidates is not None:
        rows = [
            ["" if cell == NOT_KNOWN and head == "remark" else cell for head, cell in row.items()]
            for row in results.candidates.map(_cell).to_dict(orient="records")
        ]
        heads = [str(head).replace("_", " ") for head in results.candidates.columns]
        items.append(Table(heads, rows, "All models tried.", 0))
    recommended = document.get("recommended")
    if not recommended:
        return Part(title, items, "No model could be recommended.")
    text = (
        f"{plural(recommended['states'], 'state')} of order {recommended['order']}: "
        f"{recommended['because']}."
    )
    if recommended.get("caution"):
        text += f" Caution: {recommended['caution']}."
    return Part(title, items, text)


def _cell(value: Any) -> str:
    """Return a cell of a table, a number with at most seven digits that count."""
    if isinstance(value, str):
        return value
    return NOT_KNOWN if isnan(value) else f"{value:.7g}"


def _training(results: Results) -> Part:
    title = "Training"
    training = (results.model.training if results.model is not None else None) or {}
    runs: Sequence[Mapping[str, Any]] = training.get("restarts", [])
    if not runs:
        command = f"hmmseg train FASTA --output {results.folder.name}/model.json"
        return Part(title, [Missing("Training", command)])
    bases, best = training["bases"], training["best_restart"] - 1
    items: list[Item] = []
    if any(len(run["trace"]) > 1 for run in runs):
        items.append(
            Picture(
                "training", "Bits per base of the training sequence, iteration by iteration, from "
                "every start.", draw_traces([run["trace"] for run in runs], bases, best),
            )
        )  # fmt: skip
    if len(runs) > 1:
        items.append(_starts(runs, best))
    kept = runs[best]
    if not kept["iterations"]:
        text = f"The model was placed relative to {in_bases(bases)}, not trained."
    else:
        ended = "converged" if kept["converged"] else "was stopped before it converged"
        text = (
            f"On {in_bases(bases)} the fit that was kept {ended} after "
            f"{plural(kept['iterations'], 'iteration')}, at {training['bits_per_base']:.5f} bits "
            "per base"
        )
        if len(runs) > 1:
            likelihoods = sorted((run["log_likelihood"] for run in runs), reverse=True)
            near = sum(likelihoods[0] - value < 1.0 for value in likelihoods)
            text += (
                f"; {near} of {len(runs)} starts came within 1 nat of it, and the next best "
                f"is {likelihoods[0] - likelihoods[1]:.3g} nats behind"
            )
        text += "."
    return Part(title, items, text)


def _starts(runs: Sequence[Mapping[str, Any]], best: int) -> Table:
    top = max(run["log_likelihood"] for run in runs)
    rows = [
        [
            f"{number + 1}{' (kept)' if number == best else ''}",
            count(run["iterations"]),
            "yes" if run["converged"] else "no",
            f"{top - run['log_likelihood']:.3f}",
            ", ".join(percent(state["gc"]) for state in run["states"]),
            ", ".join(
                "without end" if s["expected_length"] is None else in_bases(s["expected_length"])
                for s in run["states"]
            ),
        ]
        for number, run in enumerate(runs)
    ]
    heads = ["start", "iterations", "converged", "nats behind", "G+C of states", "mean lengths"]
    return Table(heads, rows, "Every start, and what it led to.", folded="All starts")


def _comparison(results: Results) -> Part:
    title = "Hidden states or a chain"
    document, folder = results.comparison, results.folder.name
    if document is None:
        command = f"hmmseg compare FASTA --output {folder}/comparison"
        return Part(title, [Missing("The comparison with Markov chains", command)])
    items: list[Item] = []
    for name, caption in (
        ("accuracy", "Held-out sequence against the labels: ROC, precision and recall, and "
         "reliability."),
        ("heldout", "Bits per base of sequence that was held out, by order; less is better."),
        ("simulated", "On sequence drawn from the fitted HMM, whose regions are known: what the "
         "two ways of calling can do if the model is right."),
    ):  # fmt: skip
        drawn = results.drawings.get(name)
        if drawn is not None:
            items.append(Picture(name, caption, drawn, wide=name != "heldout"))
    if document.get("held_out_bits"):
        items.append(_held_out(document))
    for key in ("accuracy", "simulated"):
        if document.get(key):
            items.append(_measures(document[key], key))
    held = document["held_out"]
    text = f"Measured on sequence held out: {held['folds']} folds of {held['split']}."
    if not document.get("labels"):
        text += (
            " Without labels there is no ROC of the genome itself, only of sequence drawn from the "
            "model."
        )
    return Part(title, items, text)


def _held_out(document: Mapping[str, Any]) -> Table:
    rows = [
        [
            entry["model"],
            count(entry["parameters"]),
            decimals(entry["bits_per_base"]["value"], 5),
            " to ".join(decimals(entry["bits_per_base"][key], 5) for key in ("low", "high")),
        ]
        for entry in document["held_out_bits"]
    ]
    return Table(
        ["model", "parameters", "bits per held-out base", "95 % interval"], rows,
        f"Held out: {document['held_out']['split']} in {document['held_out']['folds']} folds.",
        folded="All orders",
    )  # fmt: skip


def _measures(accuracy: Mapping[str, Any], key: str) -> Table:
    rows = []
    for name, three in accuracy["measures"].items():
        cells = [
            f"{small(way['value'])} ({small(way['low'])} to {small(way['high'])})"
            for way in three.values()
        ]
        rows.append([name.replace("_", " "), *cells])
    what = "sequence held out" if key == "accuracy" else "sequence drawn from the HMM"
    ways = list(next(iter(accuracy["measures"].values())))
    names = {"hmm": "HMM", "classifier": "chains in windows"}
    return Table(
        ["measure", *(names.get(way, way) for way in ways)], rows,
        f"On {what}: {count(accuracy['bases'])} bases with {count(accuracy['true_regions'])} true "
        "regions; 95 % intervals.",
        folded="All measures",
    )  # fmt: skip
