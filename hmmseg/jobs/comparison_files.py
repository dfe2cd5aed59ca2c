"""What ``compare`` writes: one document, tables, and figures."""

from collections.abc import Iterator
from dataclasses import dataclass
from math import isfinite
from pathlib import Path
from typing import Any

from hmmseg.evidence.bootstrap import Interval
from hmmseg.evidence.comparison import Accuracy, Blind
from hmmseg.evidence.rivals import CLASSIFIER, HMM
from hmmseg.evidence.tallies import MEASURES
from hmmseg.evidence.turns import Settings
from hmmseg.evidence.verdicts import MARGIN
from hmmseg.jobs.fold_files import tuned_to_dict
from hmmseg.outputs import write_json
from hmmseg.report.comparison import draw_accuracy, draw_heldout

__all__ = ["Comparison", "accuracy_table", "heldout_table", "printed", "write_comparison"]

_DECIMALS = 6

SIMULATED = (
    "sequence drawn from the fitted HMM, whose regions are known because they were drawn: it "
    "says what the two ways of calling can do if the model is right, not what is in the genome"
)
NOT_INDEPENDENT = (
    "the chains were counted in the HMM's own calls on the other folds, so agreement is no "
    "independent evidence for either"
)


@dataclass(frozen=True, eq=False)
class Comparison:
    """What was found.

    Attributes
    ----------
    pieces : int
        Blocks of sequence.
    split : str
        What was held out.
    known : Accuracy or None
        Against the labels.
    unknown : Blind or None
        Without labels.
    simulated : Accuracy or None
        On sequence drawn from the fitted HMM.
    """

    pieces: int
    split: str
    known: Accuracy | None = None
    unknown: Blind | None = None
    simulated: Accuracy | None = None


def write_comparison(folder: Path, found: Comparison, settings: Settings) -> None:
    """Write the files of a comparison.

    Parameters
    ----------
    folder
        Where they are to stand.
    found
        What was found.
    settings
        How the two were compared.
    """
    known, unknown, simulated = found.known, found.unknown, found.simulated
    document: dict[str, Any] = {
        "format": "hmmseg-comparison",
        "version": 1,
        "labels": known is not None,
        "held_out": {"split": found.split, "folds": settings.folds, "blocks": found.pieces},
        "intervals": f"95 % from {settings.replicates} bootstrap replicates of blocks",
        "margin_f1": MARGIN,
    }
    if known is not None:
        document["verdict"] = known.verdict._asdict()
        document["accuracy"] = _accuracy(known)
        (folder / "accuracy.tsv").write_text(accuracy_table(known), encoding="utf-8")
        draw_accuracy(folder / "accuracy", known.tallies, "Held-out sequence against the labels")
    if unknown is not None:
        document["verdict"] = unknown.verdict._asdict()
        document |= _blind(unknown)
        (folder / "heldout.tsv").write_text(heldout_table(unknown), encoding="utf-8")
        rows = [(kind.states, kind.order, bits) for kind, bits in unknown.rows]
        draw_heldout(folder / "heldout", rows)
    if simulated is not None:
        document["simulated"] = {"what": SIMULATED, **_accuracy(simulated)}
        document["simulated"]["verdict"] = simulated.verdict._asdict()
        (folder / "simulated.tsv").write_text(accuracy_table(simulated), encoding="utf-8")
        draw_accuracy(folder / "simulated", simulated.tallies, "Sequence drawn from the fitted HMM")
    write_json(folder / "comparison.json", document)


def printed(found: Comparison, times: bool = True) -> Iterator[str]:
    """Yield the lines that a person sees at the end, with times or without; no file has them."""
    for what, table in ((found.known, "held-out sequence"), (found.simulated, "simulated")):
        if what is None:
            continue
        if found.unknown is not None:
            yield from heldout_table(found.unknown).splitlines()
        yield f"# {table}: {what.bases} bases, {what.true_regions} regions, order {what.order}"
        for line in accuracy_table(what).splitlines():
            yield line.rpartition("\t")[0]
        for way, seconds in what.seconds_per_mb.items() if times else ():
            yield f"# {way}: {seconds:.3f} s per Mb"
    if found.unknown is not None and found.simulated is None:
        yield from heldout_table(found.unknown).splitlines()
    verdict = found.known or found.unknown
    if verdict is not None:
        yield verdict.verdict.words


def accuracy_table(found: Accuracy) -> str:
    """Return the measures as tab-separated text with a header."""
    ways = [
        f"{way}{part}" for way in (HMM, CLASSIFIER, "difference") for part in ("", "_low", "_high")
    ]
    lines = ["\t".join(["measure", *ways, "meaning"])]
    for name, meaning in MEASURES.items():
        cells = [_cell(x) for interval in found.measures[name] for x in interval]
        lines.append("\t".join([name, *cells, meaning]))
    return "\n".join(lines) + "\n"


def heldout_table(found: Blind) -> str:
    """Return bits per held-out base as tab-separated text with a header."""
    lines = ["model\tstates\torder\tparameters\tbits_per_base\tlow\thigh"]
    for kind, bits in found.rows:
        cells = [kind.name, str(kind.states), str(kind.order), str(kind.parameters)]
        lines.append("\t".join([*cells, *(_cell(x) for x in bits)]))
    return "\n".join(lines) + "\n"


def _number(value: float) -> float | None:
    return round(value, _DECIMALS) if isfinite(value) else None


def _cell(value: float) -> str:
    return f"{value:.{_DECIMALS}f}" if isfinite(value) else "NA"


def _interval(interval: Interval) -> dict[str, float | None]:
    return {key: _number(value) for key, value in interval._asdict().items()}


def _accuracy(found: Accuracy) -> dict[str, Any]:
    curves = {
        way: {
            "said": [_number(x) for x in curve.said.tolist()],
            "seen": [_number(x) for x in curve.seen.tolist()],
            "bases": curve.bases.tolist(),
        }
        for way, curve in ((way, tally.curve()) for way, tally in found.tallies.items())
    }
    return {
        "order": found.order,
        "bases": found.bases,
        "true_regions": found.true_regions,
        "classifier_tuned": [tuned_to_dict(tuned) for tuned in found.tuned],
        "measures": {
            name: {
                key: _interval(interval)
                for key, interval in zip((HMM, CLASSIFIER, "difference"), three, strict=True)
            }
            for name, three in found.measures.items()
        },
        "reliability": curves,
    }


def _blind(found: Blind) -> dict[str, Any]:
    agreement = None
    if found.agreement is not None:
        both = found.agreement
        agreement = {
            "what": NOT_INDEPENDENT,
            "bases_called_by_both": both.both,
            "bases_called_by_hmm_only": both.hmm_only,
            "bases_called_by_classifier_only": both.classifier_only,
            "mcc": _number(both.mcc),
            "jaccard": _number(both.jaccard),
        }
    return {
        "held_out_bits": [
            {
                "model": kind.name,
                "states": kind.states,
                "order": kind.order,
                "parameters": kind.parameters,
                "bits_per_base": _interval(bits),
            }
            for kind, bits in found.rows
        ],
        "best_chain": found.best_chain.name,
        "best_hmm": found.best_hmm.name,
        "gain_bits_per_base": _interval(found.gain),
        "agreement": agreement,
    }
