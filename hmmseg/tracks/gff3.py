"""Regions as GFF3.

References
----------
Stein L. (2020). Generic Feature Format Version 3 (GFF3), specification version 1.26.
The Sequence Ontology Project, github.com/The-Sequence-Ontology/Specifications.
"""

import math
from collections.abc import Collection, Iterator, Mapping
from pathlib import Path
from urllib.parse import quote

import pandas as pd

from hmmseg.errors import OutputError
from hmmseg.tracks.table import DECIMALS, check_regions, fixed

__all__ = ["write_regions_gff3"]

SOURCE = "hmmseg"
REGION = "region"  # SO:0000001; the ontology has no term for a compositional domain
ISLAND = "CpG_island"  # SO:0000307
CRITERION = "gardiner_garden_1987"

# Column 1 may hold [a-zA-Z0-9.:^*$@!+_?-|]; all else is percent-encoded.
_SEQID_SAFE = ".:^*$@!+_?-|"
# Column 9: control characters, %, and what separates attributes, and no other character.
_ATTRIBUTE = {ord(c): f"%{ord(c):02X}" for c in [*map(chr, range(32)), "\x7f", *"%;=&,"]}


def write_regions_gff3(
    path: str | Path,
    table: pd.DataFrame,
    record_lengths: Mapping[str, int],
    circular: Collection[str],
) -> None:
    """Write regions as GFF3, one feature for each.

    Its type is ``CpG_island`` if the table has a column ``gardiner_garden_1987`` that says
    ``yes``, else ``region``.

    Positions are 1-based and both ends belong to the region. A region across the origin of a
    circular record is one feature whose end exceeds the record's length; its record then has a
    landmark line with ``Is_circular=true``, as the specification asks. The score is the log-odds
    in bits, ``.`` if infinite. Attributes: ``ID``, ``state``, ``mean_posterior``.

    Parameters
    ----------
    path : path
        The file to write.
    table : DataFrame
        The regions, as `hmmseg.tracks.table` describes them.
    record_lengths : mapping
        Length of each record in bases; each gets a ``##sequence-region`` line.
    circular : collection of str
        The circular records.

    Raises
    ------
    OutputError
        If a region does not fit its record, or crosses the end of one that is not circular.
    """
    check_regions(table, record_lengths, circular)
    with open(path, "w", encoding="utf-8", newline="\n") as file:
        file.write("##gff-version 3\n")
        for name, length in record_lengths.items():
            file.write(f"##sequence-region {_seqid(name)} 1 {length}\n")
        for line in _feature_lines(table, record_lengths):
            file.write(line + "\n")


def _feature_lines(table: pd.DataFrame, record_lengths: Mapping[str, int]) -> Iterator[str]:
    crosses = (table["end"] > table["record"].map(record_lengths)).to_numpy(dtype=bool)
    circles = set(table["record"][crosses])
    if same := circles & set(table["region_id"]):
        record = min(same, key=list(record_lengths).index)
        raise OutputError(
            f"GFF3 cannot tell the record {record} from the region of that name; rename the record"
        )
    is_island = table[CRITERION] == "yes" if CRITERION in table else [False] * len(table)
    columns = ("record", "start", "end", "log_odds_bits", "region_id", "state", "mean_posterior")
    before = None
    for island, record, start, end, odds, name, state, mean in zip(
        is_island, *(table[column].tolist() for column in columns), strict=True
    ):
        if record != before:
            seqid, before = _seqid(record), record
            if record in circles:
                whole = (1, record_lengths[record])
                yield _feature(seqid, REGION, whole, ".", {"ID": record, "Is_circular": "true"})
        score = fixed(odds, DECIMALS["log_odds_bits"]) if math.isfinite(odds) else "."
        mean_text = fixed(mean, DECIMALS["mean_posterior"])
        attributes = {"ID": name, "state": state, "mean_posterior": mean_text}
        kind = ISLAND if island else REGION
        yield _feature(seqid, kind, (start + 1, end), score, attributes)


def _feature(
    seqid: str,
    kind: str,
    interval: tuple[int, int],
    score: str,
    attributes: Mapping[str, str],
) -> str:
    last = ";".join(f"{key}={value.translate(_ATTRIBUTE)}" for key, value in attributes.items())
    start, end = interval
    return "\t".join((seqid, SOURCE, kind, str(start), str(end), score, ".", ".", last))


def _seqid(name: str) -> str:
    # quote() leaves the tilde alone, which RFC 3986 allows and GFF3 does not.
    return quote(name, safe=_SEQID_SAFE).replace("~", "%7E")
