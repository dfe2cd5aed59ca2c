"""The section *What was found*: counts, bases, shares, and how uncertain they are."""

from collections.abc import Mapping

import pandas as pd

from hmmseg.report.bins import Binned
from hmmseg.report.parts import Item, Missing, Numbers, Part, Section, Table
from hmmseg.report.results import Results
from hmmseg.report.words import count, in_bases, listed, percent, plural, small

__all__ = ["SURE", "THRESHOLDS", "UNSURE", "found_section"]

SURE, UNSURE = 0.95, 0.05
THRESHOLDS = (UNSURE, SURE)

_MOST_GONE = 50
_DECODE = "hmmseg decode FASTA --model {folder}/model.json --output {folder}/calls"


def found_section(results: Results, tracks: Mapping[str, Binned]) -> Section:
    """Return the section.

    Parameters
    ----------
    results
        What the folder holds.
    tracks
        Posterior of each reported state.
    """
    title = "What was found"
    if results.calls is None or results.regions is None:
        what = "Nothing has been called yet, so there are no regions to count."
        return Section(
            "found", title, what,
            [Part("", [Missing("The regions", _DECODE.format(folder=results.folder.name))])],
        )  # fmt: skip
    rows = [
        _Row(state, results.regions, results.calls, tracks.get(state))
        for state in results.calls["regions"]
    ]
    parts = [
        Part("", [_headline(results, rows), _states(rows)]),
        *_quality(results),
        *_features(results),
        *_changes(results),
    ]
    return Section("found", title, _conclusion(rows, results.calls["decoded_bases"]), parts)


class _Row:
    """One reported state in numbers."""

    def __init__(
        self, state: str, regions: pd.DataFrame, calls: Mapping[str, object], track: Binned | None
    ) -> None:
        own = regions[regions["state"] == state]
        self.state = state
        self.count = len(own)
        self.bases = int(own["length"].sum())
        self.decoded = int(calls["decoded_bases"])  # type: ignore[call-overload]
        self.median = float(own["length"].median()) if len(own) else float("nan")
        self.longest = int(own["length"].max()) if len(own) else 0
        # Mean posterior times length is how many of a region's bases are expected to be right.
        self.right = float((own["mean_posterior"] * own["length"]).sum())
        self.wrong = self.bases - self.right
        self.significant = None
        if "q_value" in own.columns:
            self.significant = int((own["q_value"] <= 0.05).sum())
        self.track = track

    @property
    def share(self) -> float:
        return self.bases / self.decoded if self.decoded else 0.0

    @property
    def missed(self) -> float | None:
        """Bases of the state that are expected outside the regions."""
        return None if self.track is None else max(self.track.total - self.right, 0.0)

    def share_of(self, bases: float | None) -> str:
        return percent(None if bases is None or not self.decoded else bases / self.decoded)

    def between(self) -> str:
        """Return the shares of bases that are surely, and just possibly, of the state."""
        if self.track is None:
            return "NA"
        low, high = (self.share_of(self.track.above[t]) for t in (SURE, UNSURE))
        return f"{low} to {high}"


def _conclusion(rows: list[_Row], decoded: int) -> str:
    if not any(row.count for row in rows):
        names = listed([row.state for row in rows])
        return f"No region of {names} was called in {count(decoded)} bases."
    sentences = []
    for row in rows:
        if not row.count:
            sentences.append(f"No {row.state} region was called.")
            continue
        has = "covers" if row.count == 1 else "cover"
        text = (
            f"{plural(row.count, f'{row.state} region')} {has} {count(row.bases)} bases, "
            f"{percent(row.share)} of what was decoded; by the model's own account "
            f"{count(row.wrong)} of them ({percent(row.wrong / row.bases)}) are expected to be "
            "wrong"
        )
        if row.missed is not None:
            text += f", and {count(row.missed)} bases of the kind lie outside"
        sentences.append(text + ".")
    return " ".join(sentences)


def _headline(results: Results, rows: list[_Row]) -> Numbers:
    calls = results.calls or {}
    bases = sum(row.bases for row in rows)
    decoded = calls["decoded_bases"]
    return Numbers(
        [
            (count(sum(row.count for row in rows)), "regions"),
            (in_bases(bases), "in regions"),
            (percent(bases / decoded if decoded else 0.0), "of what was decoded"),
            (count(sum(row.wrong for row in rows)), "bases expected to be wrong"),
            (in_bases(decoded), "decoded"),
            (count(calls["records"]), "record" if calls["records"] == 1 else "records"),
        ]
    )


def _states(rows: list[_Row]) -> Table:
    heads = [
        "state",
        "regions",
        "bases",
        "share",
        f"share at posterior {SURE:g} to {UNSURE:g}",
        "expected share",
        "expected wrong",
        "expected outside",
        "median length",
        "longest",
    ]
    significant = any(row.significant is not None for row in rows)
    cells = [
        [
            row.state,
            count(row.count),
            count(row.bases),
            percent(row.share),
            row.between(),
            row.share_of(None if row.track is None else row.track.total),
            count(row.wrong),
            "NA" if row.missed is None else count(row.missed),
            in_bases(row.median) if row.count else "NA",
            in_bases(row.longest) if row.count else "NA",
            *([str(row.significant)] if significant else []),
        ]
        for row in rows
    ]
    return Table(
        [*heads, *(["with q at most 0.05"] if significant else [])],
        cells,
        "Shares are of the decoded bases, gaps left out. The expected share is the sum of the "
        "posterior over all bases. Expected wrong: bases in regions, each times the probability "
        "that it is in another state. Expected outside: bases of the state that the posterior "
        "places outside its regions.",
    )


def _quality(results: Results) -> list[Part]:
    """Return a part about records that were left out."""
    skipped = (results.calls or {}).get("skipped_records", [])
    if not skipped:
        return []
    text = f"{plural(len(skipped), 'record')} without a known base outside gaps gave no call."
    return [Part("Records left out", [], text)]


def _features(results: Results) -> list[Part]:
    """Return a part about known features, if they were given."""
    table = results.features
    if table is None:
        return []
    rows = [
        [v if isinstance(v, str) else count(v) if isinstance(v, int) else small(v) for v in row]
        for row in table.itertuples(index=False)
    ]
    words = sum(not pd.api.types.is_numeric_dtype(kind) for kind in table.dtypes)
    shown = Table(
        [str(name).replace("_", " ") for name in table.columns],
        rows,
        "Regions and known features.",
        max(words, 1),
    )
    text = f"The regions were compared with {plural(len(rows), 'kind')} of known features."
    return [Part("Known features", [shown], text)]


def _changes(results: Results) -> list[Part]:
    """Return a part about what changed since an earlier version, if that was asked."""
    if results.diff is None:
        return []
    regions = results.diff["regions"]
    kinds = list(next(iter(regions.values()), {}))
    rows = [[state, *(count(counts[kind]) for kind in kinds)] for state, counts in regions.items()]
    items: list[Item] = [Table(["state", *kinds], rows, "Regions by what became of them.")]
    table = results.changes
    if table is not None:
        gone = table[table["status"].isin(["lost", "gained"])]
        if len(gone):
            items.append(_gone(gone))
    return [Part("Since the earlier version", items, str(results.diff["statement"]))]


def _gone(table: pd.DataFrame) -> Table:
    """Return the regions that were lost or gained, the longest first."""
    side = table["status"].map({"lost": "old", "gained": "new"})
    shown = pd.DataFrame(
        {
            "status": table["status"],
            "state": table["state"],
            **{
                what: table[f"new_{what}"].where(side == "new", table[f"old_{what}"])
                for what in ("region", "record", "start", "end")
            },
        }
    )
    length = shown["end"] - shown["start"]
    longest = shown.loc[length.sort_values(ascending=False, kind="stable").index[:_MOST_GONE]]
    rows = [
        [status, state, region, record, count(start), count(end)]
        for status, state, region, record, start, end in longest.to_numpy(dtype=object).tolist()
    ]
    cut = f"The longest {_MOST_GONE} of {len(shown):,}. " if len(shown) > _MOST_GONE else ""
    return Table(
        ["", "state", "region", "record", "start", "end"], rows,
        f"{cut}Places of what was lost are those in the earlier version.", 4,
        folded="Regions lost and gained",
    )  # fmt: skip
