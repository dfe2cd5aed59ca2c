"""The section *Methods*: a paragraph for a paper, its references, checksums, and a caution."""

from collections.abc import Mapping
from typing import Any

from hmmseg import __version__
from hmmseg.model import Model
from hmmseg.report.parts import Item, Part, Section, Table, Text
from hmmseg.report.results import Results
from hmmseg.report.words import count, in_bases, listed, plural

__all__ = ["CAUTION", "methods_section"]

CAUTION = (
    "This is for research. Human sequence is personal data: whether and how you may process it "
    "depends on local rules and on the consent that was given. Nothing that comes out here is a "
    "diagnosis, and none should be made from it."
)

_REFERENCES = {
    "hmm": "Rabiner L. R. (1989). A tutorial on hidden Markov models and selected applications in "
    "speech recognition. Proceedings of the IEEE 77, 257-286.",
    "baum": "Baum L. E., Petrie T., Soules G., Weiss N. (1970). A maximization technique occurring "
    "in the statistical analysis of probabilistic functions of Markov chains. Annals of "
    "Mathematical Statistics 41, 164-171.",
    "durbin": "Durbin R., Eddy S., Krogh A., Mitchison G. (1998). Biological Sequence Analysis. "
    "Cambridge University Press.",
    "viterbi": "Viterbi A. J. (1967). Error bounds for convolutional codes and an asymptotically "
    "optimum decoding algorithm. IEEE Transactions on Information Theory 13, 260-269.",
    "bic": "Schwarz G. (1978). Estimating the dimension of a model. Annals of Statistics 6, "
    "461-464.",
    "bootstrap": "Efron B., Tibshirani R. J. (1993). An Introduction to the Bootstrap. Chapman & "
    "Hall.",
    "fdr": "Barber R. F., Candès E. J. (2015). Controlling the false discovery rate via "
    "knockoffs. Annals of Statistics 43, 2055-2085.",
}


def methods_section(results: Results) -> Section:
    """Return the section."""
    text, cited = _paragraph(results)
    references = [Text(_REFERENCES[key]) for key in cited]
    parts = [
        Part("For a paper", [Text(text, "quote")]),
        Part("References", references) if references else None,
        _versions(results),
        _checksums(results),
        Part("Caution", [Text(CAUTION)]),
    ]
    same = (
        "The same input and the same seed give the same bytes again; the paragraph below may be "
        "pasted into a paper."
    )
    if not results.provenance:
        same = "No stage left a provenance, so versions and parameters are not known."
    return Section("methods", "Methods", same, [part for part in parts if part is not None])


def _paragraph(results: Results) -> tuple[str, list[str]]:
    """Return the paragraph and the keys of its references."""
    sentences, cited = [], []
    survey, model = results.survey, results.model
    version = _version(results)
    sentences.append(f"Regions of differing composition were sought with hmmseg {version}.")
    if survey is not None:
        whole = survey["assembly"]
        sentences.append(
            f"The assembly has {count(whole['bases'])} bases in "
            f"{plural(whole['records'], 'record')}; runs of N of at least {whole['gap_min']} were "
            "taken as gaps, and other ambiguous letters as missing."
        )
    if model is not None:
        sentences += _training_words(model, results.provenance.get("model"))
        cited += ["hmm", "baum", "durbin"] if model.states > 1 else ["durbin"]
    if results.calls is not None:
        sentences += _calling_words(results.provenance.get("calls"))
        if "Viterbi" in sentences[-1]:
            cited.append("viterbi")
    if results.calibration is not None:
        sentences += _calibration_words(results)
        cited.append("fdr")
    if results.selection is not None:
        sentences.append(
            "States and order were compared by bits per base of held-out sequence and by the "
            "Bayesian information criterion (Schwarz 1978)."
        )
        cited.append("bic")
    if results.comparison is not None:
        held = results.comparison["held_out"]
        sentences.append(
            f"The hidden Markov model was compared with Markov chains on held-out sequence "
            f"({held['folds']} folds of {held['split']}), with bootstrap intervals over blocks "
            "(Efron & Tibshirani 1993)."
        )
        cited += ["bootstrap"] if "bic" in cited else ["bic", "bootstrap"]
    order = list(_REFERENCES)
    return " ".join(sentences), sorted(set(cited), key=order.index)


def _version(results: Results) -> str:
    found = dict.fromkeys(
        entry["software"].get("hmmseg", "") for entry in results.provenance.values()
    )
    return listed([version for version in found if version]) or __version__


def _training_words(model: Model, provenance: Mapping[str, Any] | None) -> list[str]:
    names = [f"{n} ({'reported' if r else 'background'})"
             for n, r in zip(model.names, model.reported, strict=True)]  # fmt: skip
    strands = "strand-symmetric " if model.symmetric else ""
    training = model.training or {}
    what = (
        f"A {strands}hidden Markov model with {plural(model.states, 'state')}, {listed(names)}, "
        f"and emissions of order {model.order} (Rabiner 1989; Durbin et al. 1998)"
        if model.states > 1
        else f"A {strands}Markov chain of order {model.order} (Durbin et al. 1998)"
    )
    if not training:
        return [f"{what} was used as given."]
    parameters = (provenance or {}).get("parameters", {})
    start = next(
        (f"from the {key} {parameters[key]}" for key in ("preset", "spec", "init")
         if parameters.get(key)), "from random starts",
    )  # fmt: skip
    if not training.get("iterations"):
        how = f"was placed {start}"
    else:
        how = (
            f"was fitted by expectation maximisation (Baum et al. 1970) {start}, "
            f"{plural(len(training['restarts']), 'start')} with seed {training['seed']}, until an "
            f"iteration gained less than {parameters.get('tolerance', 1e-8):g} bits per base"
        )
    sampled = " (a seeded sample)" if training.get("sampled") else ""
    return [f"{what} {how}, on {in_bases(training['bases'])} of sequence{sampled}."]


def _calling_words(provenance: Mapping[str, Any] | None) -> list[str]:
    parameters = (provenance or {}).get("parameters", {})
    if parameters.get("decoder") == "posterior":
        text = f"Regions are bases whose posterior is above {parameters['threshold']:g}"
    elif parameters.get("decoder") == "path":
        text = "Regions are stretches of one state on the most probable path (Viterbi 1967)"
    else:
        text = "Regions are as they were called"
    if parameters.get("merge_gap"):
        text += f", joined if at most {count(parameters['merge_gap'])} bases apart"
    if parameters.get("min_length", 1) > 1:
        text += f", of at least {count(parameters['min_length'])} bases"
    if parameters.get("end_window"):
        text += (
            f", each end in the middle of the {count(parameters['end_window'])} bases most likely "
            "to hold it"
        )
    return [text + "; posteriors are given the whole contig."]


def _calibration_words(results: Results) -> list[str]:
    document = results.calibration or {}
    null = document.get("null", "the background")
    text = f"Scores were compared with those in sequence without regions ({null})"
    if document.get("null_bases"):
        text += f", {in_bases(float(document['null_bases']))} of it"
    provenance = results.provenance.get("calibration") or {}
    if provenance.get("seed") is not None:
        text += f", seed {provenance['seed']}"
    return [
        f"{text}; a region's q-value is the share of false ones to "
        "be expected among those that score as high (Barber & Candès 2015)."
    ]


def _versions(results: Results) -> Part | None:
    rows = []
    for stage, entry in results.provenance.items():
        given = {k: v for k, v in entry["parameters"].items() if v not in (None, [], "")}
        rows.append(
            [
                stage,
                entry["command"],
                "none" if entry["seed"] is None else str(entry["seed"]),
                ", ".join(f"{key} {_short(value)}" for key, value in given.items()),
                ", ".join(f"{name} {number}" for name, number in entry["software"].items()),
            ]
        )
    if not rows:
        return None
    heads = ["result", "command", "seed", "parameters", "versions"]
    return Part("Versions and parameters", [Table(heads, rows, "From the provenance.", 5)])


def _short(value: Any) -> str:
    if isinstance(value, list):
        return listed([str(item) for item in value[:6]]) + (" and more" if len(value) > 6 else "")
    return str(value)


def _checksums(results: Results) -> Part | None:
    found: set[tuple[str, str, str]] = set()
    for entry in results.provenance.values():
        for item in entry["inputs"]:
            known = item["sha256"] is not None
            size = count(item["bytes"]) if known else "not known"
            found.add((item["name"], size, item["sha256"] if known else "standard input"))
    rows = [list(row) for row in sorted(found)]
    if not rows:
        return None
    items: list[Item] = [Table(["file", "bytes", "SHA-256"], rows, "What the stages have read.", 3)]
    return Part("Inputs", items)
