"""The page that compares assemblies."""

from collections.abc import Iterator, Sequence
from pathlib import Path
from urllib.parse import quote

from hmmseg import __version__
from hmmseg.evidence.findings import describe
from hmmseg.report.many_figures import draw_composition, draw_shares
from hmmseg.report.methods import CAUTION
from hmmseg.report.page import Page
from hmmseg.report.parts import Item, Missing, Part, Picture, Section, Table, Text
from hmmseg.report.results import Results
from hmmseg.report.sure import calibrate_command
from hmmseg.report.words import (
    NOT_KNOWN,
    called,
    count,
    decimals,
    in_bases,
    listed,
    percent,
    plural,
)

__all__ = ["many_page"]

_MOST_DRAWN = 60


def many_page(found: Sequence[Results], output: Path) -> Page:
    """Return the page.

    Parameters
    ----------
    found
        What the folder of each assembly holds.
    output
        Where the page will stand: it leads to the page of each assembly that is near.
    """
    sections = [_found(found), _assemblies(found), _sure(found), _models(found), _methods(found)]
    names = listed([results.name for results in found[:4]])
    more = f" and {len(found) - 4} more" if len(found) > 4 else ""
    return Page(
        title=f"{len(found)} assemblies",
        lead=f"{names}{more}",
        foot=f"Made by hmmseg {__version__}.",
        sections=sections,
        links=list(_links(found, output)),
    )


def _links(found: Sequence[Results], output: Path) -> Iterator[tuple[str, str]]:
    """Yield name and relative place of the pages that lie beside or below this one."""
    for results in found:
        page = (results.folder / "report.html").resolve()
        top = output.resolve().parent
        if page.is_file() and page.is_relative_to(top) and page != output.resolve():
            yield results.name, "/".join(map(quote, page.relative_to(top).parts))


def _with_calls(found: Sequence[Results]) -> list[Results]:
    return [results for results in found if results.calls is not None]


def _found(found: Sequence[Results]) -> Section:
    title, having = "What was found", _with_calls(found)
    if not having:
        command = "hmmseg annotate FASTA --output FOLDER"
        return Section(
            "found", title, "None of the assemblies has been called.",
            [Part("", [Missing("The regions", command)])],
        )  # fmt: skip
    states = list(dict.fromkeys(s for results in having for s in (results.calls or {})["regions"]))
    rows, shares = [], {}
    for results in having:
        calls = results.calls or {}
        for state, numbers in calls["regions"].items():
            shares[results.name, state] = numbers["share"]
            mean = in_bases(numbers["bases"] / numbers["count"]) if numbers["count"] else NOT_KNOWN
            rows.append(
                [results.name, state, count(numbers["count"]), count(numbers["bases"]),
                 percent(numbers["share"]), mean, _expected_wrong(results, state)]
            )  # fmt: skip
    heads = ["assembly", "state", "regions", "bases", "share", "mean length", "expected wrong"]
    items: list[Item] = [
        Table(heads, rows, "Shares are of the decoded bases, gaps left out. Expected wrong: bases "
              "in regions, each times the probability that it is in another state.", 2)
    ]  # fmt: skip
    if len(having) <= _MOST_DRAWN:
        drawn = draw_shares([results.name for results in having], states, shares)
        items.insert(0, Picture("shares", "Share of each assembly in regions.", drawn, wide=True))
    return Section("found", title, _ranges(states, shares), [Part("", items)])


def _ranges(states: Sequence[str], shares: dict[tuple[str, str], float]) -> str:
    """Return between which assemblies the share of each state lies."""
    sentences = []
    for state in states:
        own = {name: share for (name, s), share in shares.items() if s == state}
        low, high = min(own, key=lambda n: own[n]), max(own, key=lambda n: own[n])
        if len(own) == 1:
            sentences.append(f"Only {called(low)} has {state} regions: {percent(own[low])} of it.")
        else:
            sentences.append(
                f"{state} regions make up from {percent(own[low])} ({called(low)}) to "
                f"{percent(own[high])} ({called(high)})."
            )
    text = " ".join(sentences)
    return text[0].upper() + text[1:]


def _expected_wrong(results: Results, state: str) -> str:
    table = results.regions
    if table is None:
        return NOT_KNOWN
    own = table[table["state"] == state]
    return count(float(((1 - own["mean_posterior"]) * own["length"]).sum()))


def _assemblies(found: Sequence[Results]) -> Section:
    title = "The assemblies"
    surveyed = [results for results in found if results.survey is not None]
    if not surveyed:
        command = "hmmseg survey FASTA --output FOLDER/survey"
        return Section(
            "assemblies", title, "None of the assemblies has been surveyed.",
            [Part("", [Missing("The survey", command)])],
        )  # fmt: skip
    rows = []
    for results in surveyed:
        whole = (results.survey or {})["assembly"]
        rows.append(
            [
                results.name,
                in_bases(whole["bases"]),
                count(whole["records"]),
                in_bases(whole["scaffold_n50"]),
                percent(whole["gc"]),
                decimals(whole["cpg_observed_expected"], 2),
                percent(whole["n_fraction"]),
                count(whole["records_standing_out"]),
            ]
        )
    known = [r for r in surveyed if (r.survey or {})["assembly"]["gc"] is not None]
    gcs = {r.name: (r.survey or {})["assembly"]["gc"] for r in known}
    text = f"Of {len(surveyed)} of {len(found)} assemblies a survey is there."
    if len(gcs) > 1:
        low, high = min(gcs, key=lambda n: gcs[n]), max(gcs, key=lambda n: gcs[n])
        text = (
            f"G+C goes from {percent(gcs[low])} ({called(low)}) to {percent(gcs[high])} "
            f"({called(high)})."
        )
    heads = ["assembly", "bases", "records", "N50", "G+C", "CpG of expected", "N", "stand out"]
    table = Table(heads, rows, "Stand out: records whose composition differs from the rest.")
    return Section("assemblies", title, text, [Part("", [table])])


def _sure(found: Sequence[Results]) -> Section:
    title = "How sure"
    having = [results for results in found if results.calibration is not None]
    if not having:
        return Section(
            "sure", title,
            "No test says yet how many of the regions chance alone would give.",
            [Part("", [Missing("Calibration", calibrate_command("FOLDER"))])],
        )  # fmt: skip
    rows, kept, every = [], 0, 0
    for results in having:
        document, table = results.calibration or {}, results.regions
        size = 0 if table is None else len(table)
        good = 0
        if table is not None and "q_value" in table.columns:
            good = int((table["q_value"] <= 0.05).sum())
        kept, every = kept + good, every + size
        differ = results.tables.get("homogeneity")
        differing = NOT_KNOWN
        if differ is not None:
            differing = count(int((differ["verdict"] == "differs").sum()))
        rows.append(
            [results.name, count(size), count(good), str(document.get("null", NOT_KNOWN)),
             differing]
        )  # fmt: skip
    heads = ["assembly", "regions", "with q at most 0.05", "compared with", "records that differ"]
    absent = len(found) - len(having)
    text = f"{count(kept)} of {count(every)} regions have a q-value of at most 0.05"
    text += f"; {absent} of {len(found)} assemblies were not calibrated." if absent else "."
    return Section("sure", title, text, [Part("", [Table(heads, rows, "By assembly.")])])


def _models(found: Sequence[Results]) -> Section:
    title = "The models"
    having = [results for results in found if results.model is not None]
    rows, points = [], []
    for results in having:
        assert results.model is not None
        for row in describe(results.model):
            points.append((results.name, row.name, row.gc, row.expected_length))
            rows.append(
                [results.name, row.name, "yes" if row.reported else "no", percent(row.gc),
                 decimals(row.cpg_observed_expected, 2), in_bases(row.expected_length),
                 percent(row.share)]
            )  # fmt: skip
    heads = ["assembly", "state", "reported", "G+C", "CpG of expected", "mean length", "share"]
    parts = []
    if rows:
        picture = Picture(
            "composition",
            "Mean length and G+C of each state; what is alike in all assemblies lies together.",
            draw_composition(points),
        )
        parts.append(Part("States", [picture, Table(heads, rows, "States of each model.", 3)]))
    verdicts = [
        Text(f"{results.name}: {results.comparison['verdict']['words']}")
        for results in found
        if results.comparison is not None
    ]
    command = "hmmseg compare FASTA --output FOLDER/comparison"
    chains: list[Item] = [*verdicts] or [Missing("The comparison with chains", command)]
    parts.append(Part("Hidden states or a chain", chains))
    sets = {tuple(results.model.names) for results in having if results.model is not None}
    same = "all with the same states" if len(sets) == 1 else f"with {len(sets)} sets of states"
    text = f"{plural(len(having), 'model')}, {same}." if having else "There is no model yet."
    return Section("models", title, text, parts)


def _methods(found: Sequence[Results]) -> Section:
    rows = []
    for results in found:
        for stage, entry in results.provenance.items():
            inputs = [f"{i['name']} {(i['sha256'] or 'not known')[:12]}" for i in entry["inputs"]]
            rows.append(
                [results.name, stage, entry["software"].get("hmmseg", NOT_KNOWN),
                 "none" if entry["seed"] is None else str(entry["seed"]), ", ".join(inputs)]
            )  # fmt: skip
    versions = sorted({row[2] for row in rows})
    text = (
        f"All results are of hmmseg {versions[0]}; the page of each assembly has its methods."
        if len(versions) == 1
        else f"The results are of several versions: {listed(versions)}."
        if versions
        else "No stage left a provenance."
    )
    heads = ["assembly", "result", "hmmseg", "seed", "inputs and the start of their SHA-256"]
    table = Table(heads, rows, "From the provenance.", 5, folded="All results")
    return Section(
        "methods", "Methods", text, [Part("", [table]), Part("Caution", [Text(CAUTION)])]
    )
