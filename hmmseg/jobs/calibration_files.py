"""What ``calibrate`` writes, and what it says."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd

from hmmseg.evidence.drift import SPAN, Drift
from hmmseg.evidence.judgement import Judged
from hmmseg.jobs.called import Called
from hmmseg.outputs import write_json
from hmmseg.tracks.bed import write_regions_bed
from hmmseg.tracks.table import write_regions_table

__all__ = ["Outcome", "write_calibration"]

_DECIMALS = {"score": 3, "bits": 3}
_FEWEST_SPANS = 3.0
_FORMAT = "%.6g"


@dataclass(frozen=True, eq=False)
class Outcome:
    """What came of a calibration.

    Attributes
    ----------
    null : str
        The null that judges the regions.
    judged : Judged
        The regions, judged by it.
    kept : mapping of str to int
        Regions that each null would keep.
    false_regions : list of DataFrame
        Of each null.
    null_bases, null_regions : mapping of str to int
        What was drawn of each null, and what was called in it.
    bases : int
        That were decoded for the calls.
    order : int
        Of the chains.
    drift : Drift
        Of the assembly.
    refitted : bool
        The model was trained anew on each replicate.
    boundaries : bool
        Boundaries were judged, not regions.
    q : float
        Up to which regions are kept.
    """

    null: str
    judged: Judged
    kept: Mapping[str, int]
    false_regions: list[pd.DataFrame]
    null_bases: Mapping[str, int]
    null_regions: Mapping[str, int]
    bases: int
    order: int
    drift: Drift
    refitted: bool
    boundaries: bool
    q: float

    @property
    def smallest_q(self) -> float | None:
        """The least q in reach of any region; None without regions."""
        return min(self.judged.smallest_q.values(), default=None)

    def to_dict(self) -> dict[str, Any]:
        """Return the document ``calibration.json``."""
        return {
            "format": "hmmseg-calibration",
            "version": 1,
            "null": self.null,
            "null_bases": self.null_bases[self.null],
            "null_refit": self.refitted,
            "null_order": self.order,
            "judged": "boundaries" if self.boundaries else "regions",
            "bases": self.bases,
            "smallest_q": _rounded(self.smallest_q),
            "smallest_q_by_state": {k: _rounded(v) for k, v in self.judged.smallest_q.items()},
            "q": self.q,
            "regions": len(self.judged.regions),
            "kept": self.kept[self.null],
            "drift": {"gc": _rounded(self.drift.mean), "spread": _rounded(self.drift.spread)},
            "nulls": {
                name: {
                    "bases": self.null_bases[name],
                    "regions": self.null_regions[name],
                    "kept": self.kept[name],
                }
                for name in self.null_bases
            },
            "statements": {"significance": self.statement()},
        }

    def statement(self) -> str:
        """Return in words how sure the regions are."""
        return " ".join([self._found(), *self._too_small(), *self._too_long()])

    def _found(self) -> str:
        what = "boundaries" if self.boundaries else "regions"
        total, drawn = len(self.judged.regions), self.null_bases[self.null]
        count = self.null_regions[self.null]
        return (
            f"{self.kept[self.null]} of {total} regions are kept at q <= {self.q:g}: "
            f"{drawn / 1e6:.1f} Mb of null sequence ({self.null}"
            f"{', the model trained anew on each replicate' if self.refitted else ''}) gave "
            f"{count} {what}, {count / drawn * 1e6 if drawn else 0:.3g} a Mb, of any score."
        )

    def _too_long(self) -> list[str]:
        """Say which regions a null that follows slow changes cannot judge."""
        longest = SPAN // 2
        count = int((self.judged.regions["length"] > longest).sum())
        if self.null != "drift" or not count:
            return []
        return [
            f"{count} {'region is' if count == 1 else 'regions are'} longer than "
            f"{longest // 1000} kb, which this null takes for drift, so a high q says little of "
            "them; --null chain asks whether they are more than chance in sequence without drift."
        ]

    def _too_small(self) -> list[str]:
        said = []
        blind = [k for k, v in self.judged.smallest_q.items() if v > self.q]
        counted = {k: v for k, v in self.judged.smallest_q.items() if k not in blind}
        if counted:
            least = ", ".join(f"{v:.2g} ({k})" for k, v in counted.items())
            said.append(f"The smallest q that its size allows: {least}.")
        for kind in blind:
            said.append(
                f"Too small to be judged ({kind}): with so few regions and bases no q could be "
                f"below {self.judged.smallest_q[kind]:.2g}; give more --null-bases."
            )
        if self.null == "drift" and self.drift.spans < _FEWEST_SPANS:
            said.append(
                f"Too small to tell drift from regions: the sequence fills "
                f"{self.drift.spans:.1f} stretches of {SPAN // 1000} kb."
            )
        return said


def _rounded(value: float | None) -> float | None:
    return None if value is None else float(f"{value:.6g}")


def write_calibration(
    folder: Path, outcome: Outcome, called: Called, said: Mapping[str, str]
) -> dict[str, Any]:
    """Write the tables and return the document.

    Parameters
    ----------
    folder
        Where to.
    outcome
        What came of the calibration.
    called
        The calls.
    said
        What else there is to say, by what it is about.
    """
    regions = outcome.judged.regions
    write_regions_table(folder / "regions.tsv", regions)
    kept = regions[regions["q_value"] <= outcome.q]
    write_regions_bed(folder / "regions.filtered.bed", kept, called.record_lengths)
    everything = pd.concat(outcome.false_regions, ignore_index=True)
    _write_table(folder / "false_regions.tsv", everything)
    if outcome.judged.boundaries is not None:
        _write_table(folder / "boundaries.tsv", outcome.judged.boundaries)
    document = outcome.to_dict()
    document["statements"] |= said
    write_json(folder / "calibration.json", document)
    return document


def _write_table(path: Path, table: pd.DataFrame) -> None:
    shown = table.copy()
    for name in table.columns:
        if pd.api.types.is_float_dtype(table[name]):
            decimals = _DECIMALS.get(name)
            form = _FORMAT if decimals is None else f"%.{decimals}f"
            shown[name] = [form % value for value in table[name]]
    shown.to_csv(path, sep="\t", index=False, lineterminator="\n")
