"""Survey of an assembly: what is in it, and what is odd about it, before any model.

Records are looked at one at a time and only their numbers are kept.
"""

import csv
import math
import re
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from hmmseg.errors import SequenceError
from hmmseg.sequence.composition import (
    JUDGED_LENGTH,
    Contrast,
    cpg_ratio,
    gc_fraction,
    pair_counts,
    standing_out,
)
from hmmseg.sequence.contigs import GAP_MIN, gaps, spans_origin, split
from hmmseg.sequence.ends import end_repeats
from hmmseg.sequence.identity import strand_digest
from hmmseg.sequence.reading import Record

__all__ = ["Survey", "formats_refusing", "n50", "survey", "to_dict", "to_tsv"]

_BED_NAME = re.compile(r"[A-Za-z0-9_]{1,255}")
_GFF3_NAME = re.compile(r"(?!>)[a-zA-Z0-9.:^*$@!+_?|-]+")


@dataclass(frozen=True, eq=False)
class Survey:
    """Numbers of an assembly.

    Attributes
    ----------
    records : DataFrame
        One row per record, in the order read, with columns

        - ``record``, ``length`` (bases), ``topology`` (linear or circular);
        - ``contigs``, ``gaps``, ``gap_bases``: see `hmmseg.sequence.contigs`;
        - ``n_bases``, ``n_fraction``: letters N, in gaps or not, and over length;
        - ``soft_masked_fraction``: lower-case letters over length;
        - ``ambiguous_bases``: IUPAC letters other than A C G T U N;
        - ``gc``: G+C over known bases; ``cpg_observed_expected``: see
          `hmmseg.sequence.composition.cpg_ratio`;
        - ``start_repeat``, ``start_copies``, ``end_repeat``, ``end_copies``: telomere-like
          repeats of a linear record, see `hmmseg.sequence.ends.tandem_repeat`;
        - ``duplicate_of``: first record of the same sequence on either strand, see
          `hmmseg.sequence.identity.strand_digest`;
        - ``composition_z``, ``composition_feature``, ``stands_out``: see
          `hmmseg.sequence.composition.standing_out`;
        - ``formats_refusing_name``: see `formats_refusing`.

        What is undefined is NaN in a column of numbers and an empty string in one of words.
    assembly : dict
        The same for the assembly as a whole; what is undefined is None.
    """

    records: pd.DataFrame
    assembly: dict[str, Any]


@dataclass(eq=False)
class _Notes:
    """What is kept while records pass by."""

    rows: list[dict[str, Any]] = field(default_factory=list)
    pairs: list[npt.NDArray[np.int64]] = field(default_factory=list)
    contig_lengths: list[int] = field(default_factory=list)
    soft_masked: int = 0
    first_of: dict[bytes, str] = field(default_factory=dict)


def survey(records: Iterable[Record], gap_min: int = GAP_MIN) -> Survey:
    """Survey an assembly.

    Parameters
    ----------
    records : iterable of Record
        Used up one at a time.
    gap_min : int
        Shortest run of N that is a gap, from 1 up.

    Raises
    ------
    SequenceError
        There is no record.
    ValueError
        ``gap_min`` is below 1.
    """
    notes = _Notes()
    for record in records:
        _note(record, gap_min, notes)
    if not notes.rows:
        raise SequenceError("no record to survey; give a file with sequence")
    contrast = standing_out(notes.pairs)
    for i, row in enumerate(notes.rows):
        row["composition_z"] = round(float(contrast.z[i]), 3)
        row["composition_feature"] = contrast.feature[i]
        row["stands_out"] = bool(contrast.stands_out[i])
        row["formats_refusing_name"] = ",".join(formats_refusing(row["record"]))
    return Survey(pd.DataFrame(notes.rows), _assembly(notes, contrast, gap_min))


def _note(record: Record, gap_min: int, notes: _Notes) -> None:
    """Take down the numbers of one record."""
    pairs = pair_counts(record.bases, record.circular)
    contigs = [len(contig) for contig in split(record, gap_min)]
    gap = gaps(record, gap_min)
    n_bases = _total(record.n_runs)
    soft_masked = _total(record.soft_mask)
    row = {
        "record": record.name,
        "length": len(record),
        "topology": "circular" if record.circular else "linear",
        "contigs": len(contigs),
        "gaps": len(gap) - spans_origin(record, gap),
        "gap_bases": _total(gap),
        "n_bases": n_bases,
        "n_fraction": n_bases / len(record),
        "soft_masked_fraction": soft_masked / len(record),
        "ambiguous_bases": record.ambiguous,
        "gc": gc_fraction(pairs),
        "cpg_observed_expected": cpg_ratio(pairs),
        **_end_columns(record),
        "duplicate_of": _duplicate_of(record, notes.first_of) if contigs else "",
    }
    notes.rows.append(row)
    notes.pairs.append(pairs)
    notes.contig_lengths.extend(contigs)
    notes.soft_masked += soft_masked


def _total(intervals: npt.NDArray[np.int64]) -> int:
    """Return the summed length of intervals, int64[interval, 2]."""
    return int((intervals[:, 1] - intervals[:, 0]).sum())


def _end_columns(record: Record) -> dict[str, Any]:
    """Columns on the ends of a record; a circular one has none."""
    found = (None, None) if record.circular else end_repeats(record.bases)
    columns: dict[str, Any] = {}
    for end, repeat in zip(("start", "end"), found, strict=True):
        columns[f"{end}_repeat"] = repeat.unit if repeat else ""
        columns[f"{end}_copies"] = round(repeat.copies, 1) if repeat else math.nan
    return columns


def _duplicate_of(record: Record, first_of: dict[bytes, str]) -> str:
    """Name of the first record with this sequence, or an empty string."""
    first = first_of.setdefault(strand_digest(record.bases), record.name)
    return "" if first == record.name else first


def formats_refusing(name: str) -> list[str]:
    """Name the formats whose rules a record's name breaks.

    BED (version 1.0, section 1.5) wants 1 to 255 letters, digits and underscores, which every
    accession with a version breaks, and readers mostly accept more. GFF3 (version 1.26) wants
    letters, digits and ``. : ^ * $ @ ! + _ ? - |`` unless escaped, and no ``>`` in front.

    Returns
    -------
    list of str
        ``BED`` and ``GFF3``, as it applies.
    """
    rules = (("BED", _BED_NAME), ("GFF3", _GFF3_NAME))
    return [label for label, rule in rules if not rule.fullmatch(name)]


def n50(lengths: Sequence[int]) -> tuple[int, int]:
    """N50 and L50.

    The longest sequences that together hold at least half of all bases: the length of the
    shortest of them (N50), and how many they are (L50). Both are 0 without sequences.
    """
    total = sum(lengths)
    held = 0
    for count, length in enumerate(sorted(lengths, reverse=True), 1):
        held += length
        if 2 * held >= total:
            return length, count
    return 0, 0


def _assembly(notes: _Notes, contrast: Contrast, gap_min: int) -> dict[str, Any]:
    """Numbers of the assembly as a whole."""
    rows = notes.rows
    lengths = [row["length"] for row in rows]
    total = sum(lengths)
    pairs = sum(notes.pairs, np.zeros((5, 5), dtype=np.int64))
    scaffold_n50, scaffold_l50 = n50(lengths)
    contig_n50, contig_l50 = n50(notes.contig_lengths)
    n_bases = sum(row["n_bases"] for row in rows)
    return {
        "records": len(rows),
        "bases": total,
        "known_bases": int(pairs[:4].sum()),
        "circular_records": sum(row["topology"] == "circular" for row in rows),
        "records_without_contig": sum(row["contigs"] == 0 for row in rows),
        "shortest_record": min(lengths),
        "longest_record": max(lengths),
        "scaffold_n50": scaffold_n50,
        "scaffold_l50": scaffold_l50,
        "contigs": len(notes.contig_lengths),
        "contig_n50": contig_n50,
        "contig_l50": contig_l50,
        "gap_min": gap_min,
        "gaps": sum(row["gaps"] for row in rows),
        "gap_bases": sum(row["gap_bases"] for row in rows),
        "n_bases": n_bases,
        "n_fraction": n_bases / total,
        "soft_masked_fraction": notes.soft_masked / total,
        "ambiguous_bases": sum(row["ambiguous_bases"] for row in rows),
        "gc": _defined(gc_fraction(pairs)),
        "cpg_observed_expected": _defined(cpg_ratio(pairs)),
        **_end_summary(rows),
        "duplicate_records": sum(row["duplicate_of"] != "" for row in rows),
        "composition_judged_records": contrast.judged,
        "composition_judged_length": JUDGED_LENGTH,
        "composition_z_threshold": _defined(contrast.threshold),
        "records_standing_out": int(contrast.stands_out.sum()),
        "names_refused_by_bed": sum("BED" in row["formats_refusing_name"] for row in rows),
        "names_refused_by_gff3": sum("GFF3" in row["formats_refusing_name"] for row in rows),
    }


def _end_summary(rows: list[dict[str, Any]]) -> dict[str, Any]:
    """Count the repeat unit found at most ends, the alphabetically first of equals."""
    ends = [(row["start_repeat"], row["end_repeat"]) for row in rows]
    counts = Counter(unit for pair in ends for unit in pair if unit)
    unit = min(counts, key=lambda unit: (-counts[unit], unit), default=None)
    return {
        "end_repeat": unit,
        "ends_with_repeat": counts[unit] if unit else 0,
        "records_with_repeat_at_both_ends": sum(pair == (unit, unit) for pair in ends),
    }


def _defined(value: float) -> float | None:
    """Return the value, or None for NaN."""
    return None if math.isnan(value) else value


def to_tsv(result: Survey) -> str:
    """Write the records' table as tab-separated text, undefined numbers as ``NA``."""
    table = result.records.copy()
    table["stands_out"] = table["stands_out"].map({True: "yes", False: "no"})
    return table.to_csv(
        sep="\t",
        index=False,
        na_rep="NA",
        float_format="%.6g",
        lineterminator="\n",
        quoting=csv.QUOTE_NONE,
    )


def to_dict(result: Survey) -> dict[str, Any]:
    """Turn a survey into what JSON can hold: ``assembly``, and ``records`` as a list."""
    rows = result.records.to_dict(orient="records")
    return {
        "assembly": dict(result.assembly),
        "records": [
            {
                str(key): None if isinstance(value, float) and math.isnan(value) else value
                for key, value in row.items()
            }
            for row in rows
        ],
    }
