"""What the tests of posterior tracks share: two readers of other origins, and runs to write.

The readers are pybigtools (on bigtools, in Rust) and pyBigWig (on libBigWig, in C).
"""

import itertools
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pybigtools
import pyBigWig
from hypothesis import strategies as st
from numpy.typing import NDArray

from hmmseg.tracks.bigwig import PosteriorTrack

Runs = list[tuple[int, int, float]]
Change = Callable[[int, NDArray[np.void]], tuple[int, NDArray[np.void]]]

# Names as they come in assemblies; not in alphabetical order.
LENGTHS = {"scaffold_2": 300, "chr1.1": 1, "gi|7|x": 90, "a": 40}


def second_reader(path: Path) -> dict[str, Runs]:
    """Return the intervals of each record as pybigtools reads them."""
    file = pybigtools.open(str(path))
    return {name: [tuple(run) for run in file.records(name)] for name in file.chroms()}


def third_reader(path: Path) -> dict[str, Runs]:
    """Return the intervals of each record that has any as pyBigWig reads them."""
    file = pyBigWig.open(str(path))
    assert list(file.chroms().items()) == list(LENGTHS.items())
    found = {name: file.intervals(name) for name in LENGTHS}
    file.close()
    return {name: list(runs) for name, runs in found.items() if runs}


def dense(runs: Runs, length: int) -> NDArray[np.float32]:
    """Return float32[position], NaN where no run is."""
    values = np.full(length, np.nan, dtype=np.float32)
    for start, end, value in runs:
        values[start:end] = value
    return values


def write(path: Path, calls: list[tuple[str, Runs]], lengths: dict[str, int] = LENGTHS) -> None:
    with PosteriorTrack(path, lengths) as track:
        for record, runs in calls:
            starts, ends, values = zip(*runs, strict=True) if runs else ((), (), ())
            track.add(record, starts, ends, values)


@st.composite
def runs_on(draw: st.DrawFn, length: int) -> Runs:
    """Draw sorted runs with values from a few levels, so that neighbours are often equal."""
    cuts = sorted(draw(st.sets(st.integers(0, length), max_size=24)))
    level = st.one_of(
        st.sampled_from([0.0, 0.5, 1.0]), st.integers(0, 1000).map(lambda k: k / 1000)
    )
    return [(a, b, draw(level)) for a, b in itertools.pairwise(cuts) if draw(st.integers(0, 3))]


@st.composite
def tracks(draw: st.DrawFn) -> dict[str, Runs]:
    """Draw the runs of each record of LENGTHS, some of them without any."""
    return {name: draw(runs_on(length)) for name, length in LENGTHS.items()}


def split(run: tuple[int, int, float]) -> Runs:
    """Cut a run in two where it is longer than one base."""
    start, end, value = run
    middle = (start + end) // 2
    return [(start, middle, value), (middle, end, value)] if middle > start else [run]


class scratch:  # noqa: N801  (reads as a function; tmp_path does not go with Hypothesis)
    """A file name in a folder that is removed at the end."""

    def __enter__(self) -> Path:
        import tempfile  # noqa: PLC0415

        self.folder = tempfile.TemporaryDirectory()
        return Path(self.folder.name, "x.posterior.bw")

    def __exit__(self, *_: object) -> None:
        self.folder.cleanup()


def many_runs(number: int, seed: int = 7) -> tuple[NDArray[np.int64], ...]:
    """Return starts, ends and levels of touching runs, three bases long on average."""
    rng = np.random.default_rng(seed)
    ends = np.cumsum(rng.integers(1, 6, number))
    return np.append(0, ends[:-1]), ends, rng.integers(0, 1001, number)
