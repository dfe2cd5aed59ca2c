"""What to do with an assembly, decided from its survey, with a reason for each decision."""

from collections.abc import Mapping, Sequence
from typing import Any

from hmmseg.jobs.decisions import Decision, Decisions
from hmmseg.jobs.sources import Sources
from hmmseg.model.presets import load_preset
from hmmseg.model.specification import Specification

__all__ = ["TRAIN_BASES", "choose_preset", "decide"]

TRAIN_BASES = 50_000_000

# Genomes that methylate CpG have a ratio of 0.2 to 0.6; most others have 0.8 to 1.2.
_CPG_DEPLETED = 0.75
# RNA genes stay near 50 to 65 % GC; below this the rest is far enough away.
_AT_RICH = 0.40
# Bacteria, archaea, organelles and viruses.
_COMPACT = 30_000_000
# Two levels of GC need some tens of bases for each word of a richer model.
_ENOUGH_FOR_WORDS = 500_000
_EXTREME = 0.25
# HMMs and chains of several orders are fitted, to four fifths of the sequence in turn.
_COMPARABLE = 100_000
_QUICKLY_COMPARED = 5_000_000
_SHORT = 1_000
# With fewer nulls not even a single region could have an E of one twentieth.
_NULLS, _FEWEST_NULLS, _MOST_NULLS = 20, 3_000_000, 100_000_000


def choose_preset(assembly: Mapping[str, Any]) -> tuple[str, str]:
    """Return the preset for an assembly, and why.

    Parameters
    ----------
    assembly
        The part ``assembly`` of a survey.
    """
    gc, cpg, bases = assembly["gc"], assembly["cpg_observed_expected"], assembly["known_bases"]
    seen = f"{_size(bases)} at {100 * gc:.1f} % GC, CpG {_ratio(cpg)} of what is expected"
    compact = bases < _COMPACT
    if cpg is not None and cpg < _CPG_DEPLETED and not (compact and gc < _AT_RICH):
        return "cpg-island", (
            f"{seen}: CpG is depleted (below {_CPG_DEPLETED}), so islands that kept it stand out"
        )
    if compact and gc < _AT_RICH:
        more = "; at-rich if centromere-like blocks are wanted" if gc < _EXTREME else ""
        return "gc-island", (
            f"{seen}: a compact AT-rich genome, in which genes of structural RNA are the GC-rich "
            f"islands; gc-domain for a partition at large{more}"
        )
    if compact and bases >= _ENOUGH_FOR_WORDS:
        return "foreign", (
            f"{seen}: a compact genome without a contrast of GC to count on, but large enough to "
            "learn its use of words; gc-domain for a partition at large"
        )
    return "gc-domain", (
        f"{seen}: neither depleted of CpG nor compact and AT-rich, so no kind of island is to be "
        "expected; a partition into GC levels assumes least"
    )


def _size(bases: int) -> str:
    return f"{bases / 1e6:.2f} Mb" if bases >= 1_000_000 else f"{bases / 1e3:.1f} kb"


def _ratio(value: float | None) -> str:
    return "is not there" if value is None else f"{value:.2f}"


def decide(survey: Mapping[str, Any], sources: Sources, preset: str | None) -> Decisions:
    """Decide everything.

    Parameters
    ----------
    survey
        The document of a survey.
    sources
        What was asked for.
    preset
        The preset asked for; None leaves the choice open.
    """
    assembly, records = survey["assembly"], survey["records"]
    name, why = (preset, "asked for") if preset else choose_preset(assembly)
    wanted = load_preset(name)
    proposed = f"as preset {name} proposes"
    made = {
        "preset": Decision(name, why),
        "states": Decision(
            len(wanted.states), "those of the preset: " + ", ".join(w.name for w in wanted.states)
        ),
        "order": Decision(wanted.order, proposed),
        "soft_mask": _soft_mask(wanted, sources, assembly["soft_masked_fraction"]),
        "circular": _circular(records, sources),
        "train_without": _left_out(records, wanted),
        "train_bases": _sample(assembly["known_bases"]),
        "restarts": Decision(
            wanted.restarts,
            "the start says what is wanted; another may lead to something likelier that is not",
        ),
        "seed": Decision(1, "of perturbed starts and of the sample, where there are any"),
        "max_iterations": Decision(500, "far more than usual; training ends when nothing is gained")
        if wanted.trained
        else Decision(0, "the preset is placed relative to the genome and not trained: too little "
                      "of what it finds is there to learn from"),
        "decoder": Decision(wanted.decoder, proposed),
        "threshold": Decision(0.5, "rather inside than outside; for the posterior decoder only"),
        "min_length": Decision(wanted.min_length, proposed),
        "merge_gap": Decision(wanted.merge_gap, proposed),
        "end_window": Decision(wanted.end_window, proposed),
        "calibrate": Decision("run", "tells how many of the regions chance alone would give"),
        "null_bases": _null_bases(assembly["known_bases"]),
        "compare": _comparison(assembly["known_bases"]),
    }  # fmt: skip
    return Decisions(made)


def _soft_mask(wanted: Specification, sources: Sources, share: float) -> Decision:
    seen = f"{100 * share:.1f} % of the assembly is lower case"
    if sources.soft_mask is not None:
        return Decision(sources.soft_mask, f"asked for; {seen}")
    if wanted.soft_mask == "hide" and share == 0:
        return Decision("use", "no base is lower case, so there is nothing to hide")
    return Decision(wanted.soft_mask, f"as preset {wanted.name} proposes; {seen}")


def _circular(records: Sequence[Mapping[str, Any]], sources: Sources) -> Decision:
    found = [record["record"] for record in records if record["topology"] == "circular"]
    if found:
        how = "asked for, or said in their headers" if sources.circular else "said in their headers"
        return Decision(found, how)
    hint = "name here what is a circle, so that regions across the origin stay whole"
    return Decision([], f"no header says so; {hint}")


def _left_out(records: Sequence[Mapping[str, Any]], wanted: Specification) -> Decision:
    """Choose the records that are called but not trained on."""
    twice = [r["record"] for r in records if r["duplicate_of"]]
    odd = [r["record"] for r in records if r["stands_out"] and r["record"] not in twice]
    short = [
        r["record"]
        for r in records
        if r["length"] < _SHORT and r["record"] not in twice and r["record"] not in odd
    ]
    if wanted.name == "foreign":
        odd = []  # what stands out is what is looked for
    reasons = [
        f"{len(names)} {reason}"
        for names, reason in (
            (twice, "the same as an earlier record"),
            (odd, "of a composition that stands out, perhaps no part of this genome"),
            (short, f"shorter than {_SHORT:,} bases"),
        )
        if names
    ]
    chosen = [r["record"] for r in records if r["record"] in {*twice, *odd, *short}]
    kept = sum(r["length"] for r in records if r["record"] not in set(chosen))
    if not reasons:
        return Decision([], "no record is a duplicate, stands out in composition, or is very short")
    if kept < sum(r["length"] for r in records) / 2:
        return Decision([], f"{'; '.join(reasons)}; but that is most of the assembly, so all train")
    return Decision(chosen, f"{'; '.join(reasons)}; they are called all the same")


def _null_bases(bases: int) -> Decision:
    chosen = min(max(_NULLS * bases, _FEWEST_NULLS), _MOST_NULLS)
    return Decision(
        chosen,
        f"{chosen / bases:.2g} times the assembly, of the kind that judges; hmmseg calibrate "
        "draws all three kinds, and more of them for a small or a very large assembly",
    )


def _comparison(bases: int) -> Decision:
    if bases < _COMPARABLE:
        return Decision("skip", f"{_size(bases)} are too few to hold some out")
    if bases > _QUICKLY_COMPARED:
        return Decision(
            "skip",
            f"at {_size(bases)} it would take far longer than everything else; say run, or give "
            "hmmseg compare a part of the assembly",
        )
    return Decision("run", "tells on held-out sequence what a hidden state gains over a chain")


def _sample(bases: int) -> Decision:
    if bases <= TRAIN_BASES:
        return Decision(TRAIN_BASES, f"the assembly has {_size(bases)}, so all of it is used")
    return Decision(
        TRAIN_BASES,
        f"of {_size(bases)}, a random sample of blocks; parameters gain nothing by more",
    )
