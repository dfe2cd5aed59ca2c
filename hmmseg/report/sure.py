"""The section *How sure*: chance, calibration, resolution, and records that do not fit."""

from collections.abc import Mapping
from math import isnan
from typing import Any

import pandas as pd

from hmmseg.report import evidence_figures as figures
from hmmseg.report.parts import Item, Missing, Part, Picture, Section, Table
from hmmseg.report.results import Results
from hmmseg.report.words import decimals, in_bases, listed, percent, plural, small

__all__ = ["calibrate_command", "sure_section"]

_MOST_RECORDS = 30


def calibrate_command(folder: str) -> str:
    """Return the command that a folder lacks."""
    return (
        f"hmmseg calibrate FASTA --model {folder}/model.json --calls {folder}/calls "
        f"--output {folder}/calibration"
    )


def sure_section(results: Results) -> Section:
    """Return the section."""
    title, command = "How sure", calibrate_command(results.folder.name)
    if results.calibration is None:
        mean = ""
        if results.regions is not None and len(results.regions):
            typical = float(results.regions["mean_posterior"].median())
            mean = f" (half of the regions have a mean posterior of at least {typical:.2f})"
        return Section(
            "sure", title,
            "No test says yet how many regions chance alone would give: the posterior is the "
            f"probability under the model{mean}, and no better than the model.",
            [Part("", [Missing("Calibration against sequence without regions", command)])],
        )  # fmt: skip
    said = results.calibration.get("statements", {})
    parts = [
        _chance(results, said),
        _posterior(results, said),
        _resolution(results, said),
        _fit(results, said),
    ]
    shown = [part for part in parts if part is not None]
    missing = [name for part, name in zip(parts, _NAMES, strict=True) if part is None]
    if missing:
        shown.append(Part("", [Missing(listed(missing), command)]))
    return Section("sure", title, said.get("significance") or _significance(results), shown)


_NAMES = ("Chance", "Posterior", "Resolution", "Records that do not fit")


def _significance(results: Results) -> str:
    table = results.regions
    if table is None or "q_value" not in table.columns:
        return "The regions have been compared with what chance alone gives."
    kept = table["q_value"][table["q_value"] <= 0.05]
    text = f"{plural(len(kept), 'region')} of {len(table):,} have a q-value of at most 0.05"
    if len(kept):
        false = len(kept) * float(kept.max())
        text += f"; of these, at most {max(false, 0.01):.2g} are expected to be chance"
    return text + "."


def _chance(results: Results, said: Mapping[str, str]) -> Part | None:
    items: list[Item] = []
    table, regions = results.tables.get("false_regions"), results.regions
    if table is not None and len(table):
        bases = (results.calls or {}).get("decoded_bases", 0)
        items += [
            Picture(
                f"null-{state}",
                f"Regions of {state} that reach each score: found in the assembly, and expected by "
                "chance in as much sequence without regions, of each kind; dotted, the upper limit "
                "of that.",
                drawn,
            )
            for state, drawn in figures.draw_null(table, bases / 1e6)
        ]
    if regions is not None and "q_value" in regions.columns and len(regions):
        items.append(
            Picture(
                "q-values", "Regions with at most each q-value, the share of false ones among "
                "them that is to be expected.", figures.draw_q(regions["q_value"]),
            )
        )  # fmt: skip
    return Part(_NAMES[0], items, _significance(results)) if items else None


def _posterior(results: Results, said: Mapping[str, str]) -> Part | None:
    items: list[Item] = []
    table = results.tables.get("reliability")
    if table is not None and len(table):
        items.append(
            Picture(
                "reliability", "In sequence drawn from the model: of the bases with a posterior, "
                "the share that is in the state. On the dotted line it means what it says.",
                figures.draw_reliability(table),
            )
        )  # fmt: skip
    found = results.tables.get("false_discovery")
    if found is not None and len(found):
        items.append(
            Picture(
                "false-discovery", "False bases among those above a threshold: what the posterior "
                "says against what is seen.", figures.draw_discovery(found),
            )
        )  # fmt: skip
    text = said.get("reliability") or "How far the posterior means what it says."
    return Part(_NAMES[1], items, text) if items else None


def _resolution(results: Results, said: Mapping[str, str]) -> Part | None:
    items: list[Item] = []
    table = results.tables.get("resolution")
    if table is not None and len(table):
        keys = ["formula_l50", "formula_l95", "simulated_l50", "simulated_l95"]
        rows = [
            [str(row["state"]), *(_length(row.get(key)) for key in keys)]
            for _, row in table.iterrows()
        ]
        items.append(
            Table(
                ["state", "half found, formula", "95 % found, formula", "half found, simulated",
                 "95 % found, simulated"],
                rows, "How long a region must be to be found half of the time and nearly always.",
            )
        )  # fmt: skip
    curve = results.tables.get("detection")
    if curve is not None and len(curve):
        items.append(
            Picture(
                "detection", "Regions of each length put into sequence of the background, and the "
                "share of them that was found. Dotted: one half and 95 %.",
                figures.draw_detection(curve),
            )
        )  # fmt: skip
    text = said.get("resolution") or "How short a region can be and still be found."
    return Part(_NAMES[2], items, text) if items else None


def _length(value: Any) -> str:
    return "NA" if value is None or isnan(value) else in_bases(float(value))


def _fit(results: Results, said: Mapping[str, str]) -> Part | None:
    table = results.tables.get("homogeneity")
    if table is None:
        return None
    differs = table[table["verdict"] == "differs"]
    judged = int((table["verdict"] != "too short").sum())
    text = said.get("homogeneity") or (
        f"{plural(len(differs), 'record')} of {judged:,} that could be judged "
        f"{'does' if len(differs) == 1 else 'do'} not fit the model."
    )
    if not len(differs):
        return Part(_NAMES[3], [], text)
    worst = differs.sort_values(["adjusted_p", "record"], kind="stable").head(_MOST_RECORDS)
    cut = "" if len(worst) == len(differs) else f" The first {_MOST_RECORDS} of {len(differs):,}."
    rows = _differing(worst)
    heads = ["record", "bases", "G+C", "G+C of the rest", "surprise, z", "composition, p",
             "adjusted p", "effect"]  # fmt: skip
    return Part(
        _NAMES[3],
        [
            Table(
                heads, rows,
                "Records whose sequence the model does not explain as it does the rest: look at "
                f"them before trusting regions in them.{cut}",
            )
        ],
        text,
    )  # fmt: skip


def _differing(table: pd.DataFrame) -> list[list[str]]:
    return [
        [
            str(row["record"]),
            _length(row.get("bases")),
            percent(row.get("gc")),
            percent(row.get("gc_rest")),
            decimals(row.get("surprise_z"), 1),
            small(row.get("composition_p")),
            small(row.get("adjusted_p")),
            small(row.get("effect")),
        ]
        for _, row in table.iterrows()
    ]
