"""Published criteria for CpG islands, applied to regions as they were called.

Both ask for a length, a share of C and G, and CpG observed over expected, which is
CpG x bases / (C x G). They are compared in integers, so that a region on the very limit is on the
right side. Only known bases count, for the length, too. A region without C or without G has no
expected CpG and meets neither. The papers slide a window along the sequence to find islands; here
the region is given.

References
----------
.. [1] Gardiner-Garden M, Frommer M (1987). CpG islands in vertebrate genomes. J. Mol. Biol.
   196:261-282: 200 bases or more, more than 50 % C and G, observed over expected above 0.6.
.. [2] Takai D, Jones PA (2002). Comprehensive analysis of CpG islands in human chromosomes 21 and
   22. Proc. Natl. Acad. Sci. USA 99:3740-3745: 500 bases or more, at least 55 % C and G, observed
   over expected at least 0.65.
"""

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.regions.composition import WORDS

__all__ = ["GARDINER_GARDEN", "TAKAI_JONES", "island_criteria"]

GARDINER_GARDEN = "gardiner_garden_1987"
TAKAI_JONES = "takai_jones_2002"

_CG = WORDS.index("CG")


def island_criteria(words: NDArray[np.int64]) -> pd.DataFrame:
    """Return which criteria regions meet, ``yes`` or ``no``, a column for each publication.

    Parameters
    ----------
    words
        int64[region, word], counts in the order of `WORDS`.
    """
    rows = words[:, [0, 1, 2, 3, _CG]].tolist()
    verdicts = {GARDINER_GARDEN: _gardiner_garden, TAKAI_JONES: _takai_jones}
    return pd.DataFrame(
        {
            name: ["yes" if meets(a + c + g + t, c, g, cpg) else "no" for a, c, g, t, cpg in rows]
            for name, meets in verdicts.items()
        },
        dtype=object,
    )


# Python's integers: the products pass 64 bits in regions of some hundred Mb.


def _gardiner_garden(bases: int, c: int, g: int, cpg: int) -> bool:
    return bases >= 200 and 2 * (c + g) > bases and c * g > 0 and 5 * cpg * bases > 3 * c * g


def _takai_jones(bases: int, c: int, g: int, cpg: int) -> bool:
    return (
        bases >= 500 and 20 * (c + g) >= 11 * bases and c * g > 0 and 20 * cpg * bases >= 13 * c * g
    )
