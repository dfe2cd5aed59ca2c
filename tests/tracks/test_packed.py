"""Runs of single records from many files are those of the files read one by one."""

import resource
from pathlib import Path

import numpy as np
import pytest

from hmmseg.errors import OutputError
from hmmseg.tracks.bigwig import PosteriorTrack, read_track
from hmmseg.tracks.collection import TrackCollection

LENGTHS = {"b": 5_000, "a": 10, "none": 7, "c": 3_000}


def write(path: Path, seed: int) -> None:
    random = np.random.default_rng(seed)
    with PosteriorTrack(path, LENGTHS) as track:
        for name, length in LENGTHS.items():
            if name != "none":
                starts = np.arange(length)
                track.add(name, starts, starts + 1, np.round(random.random(length), 3))


def test_any_record_at_any_time(tmp_path: Path) -> None:
    path = tmp_path / "one.bw"
    write(path, 1)
    expected: dict[str, list[np.ndarray]] = {name: [] for name in LENGTHS}
    for name, *runs in read_track(path):
        expected[name].append(np.array(runs))
    with TrackCollection() as collection:
        for name in ("c", "b", "none", "a", "c"):
            found = [np.array(runs) for runs in collection.runs(path, name)]
            assert len(found) == len(expected[name])
            assert all(map(np.array_equal, found, expected[name]))
        with pytest.raises(OutputError, match="record d is not in it"):
            next(collection.runs(path, "d"))
    damaged = tmp_path / "damaged.bw"
    damaged.write_bytes(path.read_bytes()[:100])
    with TrackCollection() as collection, pytest.raises(OutputError, match="not a readable bigWig"):
        next(collection.runs(damaged, "a"))


def test_more_files_than_a_process_may_open(tmp_path: Path) -> None:
    paths = [tmp_path / f"{number}.bw" for number in range(150)]
    write(paths[0], 0)
    for path in paths[1:]:
        path.write_bytes(paths[0].read_bytes())
    before = resource.getrlimit(resource.RLIMIT_NOFILE)
    open_now = len(list(Path("/proc/self/fd").iterdir()))
    resource.setrlimit(resource.RLIMIT_NOFILE, (open_now + 120, before[1]))
    try:
        with TrackCollection() as collection:
            for path in [*paths, *paths[:20]]:
                assert sum(len(starts) for starts, _, _ in collection.runs(path, "a")) == 10
    finally:
        resource.setrlimit(resource.RLIMIT_NOFILE, before)
