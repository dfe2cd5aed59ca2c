"""Tables of regions for the tests of the writers."""

import numpy as np
import pandas as pd
from hypothesis import strategies as st

__all__ = ["CIRCULAR", "LENGTHS", "table_of", "tables"]

# Names that BED, GFF3 or both must take special care of; not in alphabetical order.
LENGTHS = {"scaffold_2": 300, "NC_0001.1": 120, "gi|7|x;y=1,%~#é": 90, "plasmid": 50}
CIRCULAR = {"plasmid", "NC_0001.1"}

Row = tuple[str, str, int, int, str, float, float]


def table_of(rows: list[Row]) -> pd.DataFrame:
    """Make a table of regions; rows are id, record, start, end, state, posterior, log-odds."""
    names = ["region_id", "record", "start", "end", "state", "mean_posterior", "log_odds_bits"]
    table = pd.DataFrame(rows, columns=names)
    types = {"start": np.int64, "end": np.int64, "mean_posterior": float, "log_odds_bits": float}
    table = table.astype(types)
    table.insert(4, "length", table["end"] - table["start"])
    return table


@st.composite
def tables(draw: st.DrawFn) -> pd.DataFrame:
    """Draw a valid table of regions, some of them across the origin of a circular record."""
    rows: list[Row] = []
    for record, length in LENGTHS.items():
        for start in sorted(draw(st.sets(st.integers(0, length - 1), max_size=4))):
            longest = length if record in CIRCULAR else length - start
            end = start + draw(st.integers(1, longest))
            state = draw(st.sampled_from(["low-gc", "island", "a b;c"]))
            posterior = draw(st.floats(0, 1))
            odds = draw(st.floats(-1e4, 1e4))
            rows.append((f"{state}_{len(rows) + 1}", record, start, end, state, posterior, odds))
    return table_of(rows)
