"""Posterior tracks, read back by two readers of other origins."""

import itertools
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pybigtools
import pyBigWig
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.outputs import sha256_of
from hmmseg.tracks.bigwig import PosteriorTrack, summarize_track
from hmmseg.tracks.bigwig_file import RUNS_IN_BLOCK
from tests.tracks.bigwig_tracks import (
    LENGTHS,
    Runs,
    dense,
    many_runs,
    scratch,
    second_reader,
    split,
    third_reader,
    tracks,
    write,
)


@given(tracks())
def test_what_is_written_is_read_back(track: dict[str, Runs]) -> None:
    with scratch() as path:
        write(path, list(track.items()))
        found = second_reader(path)
        assert pybigtools.open(str(path)).chroms() == LENGTHS
        assert third_reader(path) == {name: runs for name, runs in found.items() if runs}
        for name, length in LENGTHS.items():
            expected = dense(track[name], length)
            np.testing.assert_array_equal(dense(found[name], length), expected)
            # Runs are joined as far as they can be.
            for (_, end, value), (start, _, following) in itertools.pairwise(found[name]):
                assert end < start or value != following


@given(tracks(), st.lists(st.integers(0, 5), min_size=1))
def test_bytes_do_not_depend_on_how_runs_are_handed_over(
    track: dict[str, Runs], sizes: list[int]
) -> None:
    with scratch() as path:
        write(path, list(track.items()))
        whole = path.read_bytes()
        turn = itertools.cycle([*sizes, 1])
        calls = []
        for name, runs in track.items():
            rest = [piece for run in runs for piece in split(run)]
            while rest:
                size = next(turn)
                calls.append((name, rest[:size]))
                rest = rest[size:]
        write(path, calls)
        assert path.read_bytes() == whole


def test_more_runs_than_are_handed_over_at_once(tmp_path: Path) -> None:
    starts, ends, levels = many_runs(300 * RUNS_IN_BLOCK + 5)
    length = int(ends[-1])
    for name, cuts in (("whole.bw", []), ("cut.bw", [1, RUNS_IN_BLOCK - 1, 40_000, 200_000])):
        with PosteriorTrack(tmp_path / name, {"x": length}) as track:
            pieces = (np.split(column, cuts) for column in (starts, ends, levels / 1000))
            for piece in zip(*pieces, strict=True):
                track.add("x", *piece)
    assert sha256_of(tmp_path / "whole.bw") == sha256_of(tmp_path / "cut.bw")
    expected = np.repeat((levels / 1000).astype(np.float32), ends - starts)
    np.testing.assert_array_equal(
        dense(second_reader(tmp_path / "whole.bw")["x"], length), expected
    )


def test_other_memory_gives_the_same_bytes(tmp_path: Path) -> None:
    # MALLOC_PERTURB_ (glibc, mallopt(3)) fills new memory with a pattern: bytes that were never
    # set would show. On other systems it has no effect and the test still compares two runs.
    code = (
        "import sys\nfrom tests.tracks.test_bigwig import many_runs\n"
        "from hmmseg.tracks import PosteriorTrack\n"
        "starts, ends, levels = many_runs(5000)\n"
        "with PosteriorTrack(sys.argv[1], {'x.1': int(ends[-1]), 'empty': 9}) as track:\n"
        "    track.add('x.1', starts, ends, levels / 1000)\n"
    )
    sums = set()
    for pattern in ("0", "170"):
        path = tmp_path / pattern
        subprocess.run(
            [sys.executable, "-c", code, str(path)],
            env={**os.environ, "MALLOC_PERTURB_": pattern},
            cwd=Path(__file__).parents[2],
            check=True,
            timeout=120,
        )
        sums.add(sha256_of(path))
    assert len(sums) == 1


@pytest.mark.parametrize("lengths", [LENGTHS, {"only": 1}])
def test_a_track_without_any_run_is_a_file_that_reads(
    tmp_path: Path, lengths: dict[str, int]
) -> None:
    path = tmp_path / "empty.bw"
    write(path, [], lengths)
    assert second_reader(path) == {name: [] for name in lengths}
    info = pybigtools.open(str(path)).info()
    assert info["chromCount"] == len(lengths)
    assert (info["summary"]["basesCovered"], info["summary"]["sum"]) == (0, 0)
    assert (info["summary"]["min"], info["summary"]["max"]) == (0, 0)
    found = summarize_track(path)
    assert (found.record_lengths, found.bases, found.total) == (lengths, 0, 0)
    assert np.isnan(found.lowest)
    assert np.isnan(found.highest)
    other = pyBigWig.open(str(path))
    assert other.chroms() == lengths
    assert [other.intervals(name) for name in lengths] == [None] * len(lengths)


def test_calls_without_runs_change_nothing(tmp_path: Path) -> None:
    write(tmp_path / "a", [("a", [(0, 5, 0.25)])])
    write(tmp_path / "b", [("scaffold_2", []), ("a", []), ("a", [(0, 5, 0.25)]), ("a", [])])
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()
