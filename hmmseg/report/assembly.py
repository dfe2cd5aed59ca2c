"""The page of one assembly, put together from its result folder."""

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from hmmseg import __version__
from hmmseg.report.bins import LEVELS, NOTHING, Binned, Layout, read_binned
from hmmseg.report.colours import colour_of
from hmmseg.report.found import THRESHOLDS, found_section
from hmmseg.report.methods import methods_section
from hmmseg.report.model_figures import draw_overview
from hmmseg.report.page import Page
from hmmseg.report.parts import Item, Picture
from hmmseg.report.results import Results
from hmmseg.report.shape import shape_section
from hmmseg.report.sure import sure_section
from hmmseg.report.where import carried, longest_first, where_section
from hmmseg.report.why import why_section
from hmmseg.report.words import in_bases, percent, plural

__all__ = ["assembly_page"]

_SHOWN = 20


def assembly_page(results: Results) -> Page:
    """Return the page of an assembly."""
    layout = Layout.fitting(longest_first(results.record_lengths), len(results.tracks) + 1)
    tracks = {
        state: read_binned(path, layout, THRESHOLDS) for state, path in results.tracks.items()
    }
    strong = None if results.gc_track is None else read_binned(results.gc_track, layout)
    overview: list[Item] = [_overview(layout, tracks)] if tracks else []
    sections = [
        found_section(results, tracks),
        where_section(results, overview),
        sure_section(results),
        why_section(results),
        shape_section(results),
        methods_section(results),
    ]
    carries = None
    if tracks and results.regions is not None:
        carries = carried(results, layout, tracks, strong)
    return Page(
        title=results.name,
        lead=_lead(results),
        foot=f"Made by hmmseg {__version__} from the files of the folder {results.folder.name}.",
        sections=sections,
        data=None if carries is None else carries.data,
        blobs=() if carries is None else carries.blobs,
    )


def _lead(results: Results) -> str:
    words = []
    if results.survey is not None:
        whole = results.survey["assembly"]
        words.append(
            f"{in_bases(whole['bases'])} in {plural(whole['records'], 'record')}, "
            f"{percent(whole['gc'])} G+C"
        )
    elif results.record_lengths:
        bases = sum(results.record_lengths.values())
        words.append(f"{in_bases(bases)} in {plural(len(results.record_lengths), 'record')}")
    model = results.model
    if model is not None:
        kind = (
            "Markov chain" if model.states == 1 else f"hidden Markov model of {model.states} states"
        )
        words.append(f"a {kind}, order {model.order}")
    return "; ".join(words)


def _overview(layout: Layout, tracks: Mapping[str, Binned]) -> Picture:
    """Return the longest records at a glance."""
    offsets = layout.offsets
    rows: list[tuple[str, int, list[NDArray[np.float64]]]] = []
    for number, (name, length) in enumerate(list(layout.record_lengths.items())[:_SHOWN]):
        part = slice(offsets[number], offsets[number + 1])
        values = []
        for track in tracks.values():
            mean = track.mean[part].astype(np.float64)
            values.append(np.where(mean == NOTHING, np.nan, mean / LEVELS))
        rows.append((name, length, values))
    kinds = " and ".join(tracks)
    caption = (
        f"The {len(rows)} longest records at a glance: the darker, the higher the posterior of "
        f"{kinds}; gaps are white."
        if len(rows) > 1
        else f"The record at a glance: the darker, the higher the posterior of {kinds}."
    )
    colours = [colour_of(i) for i in range(len(tracks))]
    return Picture("overview", caption, draw_overview(rows, colours), wide=True)
