"""Spooled tracks: the same file as if all had been known beforehand."""

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.errors import OutputError
from hmmseg.tracks import spool
from hmmseg.tracks.bigwig import PosteriorTrack, rounded_runs
from hmmseg.tracks.spool import SpooledTrack

LENGTHS = {"b": 50, "none": 7, "a.1": 30}

Stretch = tuple[str, int, list[float]]


@st.composite
def stretches(draw: st.DrawFn) -> list[Stretch]:
    """Draw stretches of posterior that do not overlap, in any order."""
    drawn: list[Stretch] = []
    for name, length in LENGTHS.items():
        cuts = sorted(draw(st.sets(st.integers(0, length), max_size=6)))
        for start, end in zip(cuts[::2], cuts[1::2], strict=False):
            level = st.sampled_from([0.0, 0.3333, 0.5, 1.0])
            values = draw(st.lists(level, min_size=end - start, max_size=end - start))
            drawn.append((name, start, values))
    return draw(st.permutations(drawn))


def spooled(path: Path, drawn: list[Stretch]) -> bytes:
    track = SpooledTrack(path)
    for name, start, values in drawn:
        track.add(name, start, np.array(values))
    track.finish(LENGTHS)
    return path.read_bytes()


@given(drawn=stretches())
def test_the_order_of_stretches_does_not_matter(
    tmp_path_factory: pytest.TempPathFactory, drawn: list[Stretch]
) -> None:
    folder = tmp_path_factory.mktemp("spool")
    found = spooled(folder / "x.bw", drawn)
    assert [path.name for path in folder.iterdir()] == ["x.bw"]
    with PosteriorTrack(folder / "direct.bw", LENGTHS) as track:
        for name in LENGTHS:
            for _, start, values in sorted(s for s in drawn if s[0] == name):
                starts, ends, levels = rounded_runs(values)
                track.add(name, starts + start, ends + start, levels)
    assert found == (folder / "direct.bw").read_bytes()


def test_long_stretches_are_taken_in_pieces(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    drawn: list[Stretch] = [("a.1", 3, [k / 30 for k in range(20)]), ("b", 0, [0.5, 0.25] * 20)]
    whole = spooled(tmp_path / "x.bw", drawn)
    monkeypatch.setattr(spool, "_AT_ONCE", 3)
    assert spooled(tmp_path / "y.bw", drawn) == whole


def test_refuses_a_stretch_beyond_its_record(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="ends beyond the record's 30 bases"):
        spooled(tmp_path / "x.bw", [("a.1", 25, [0.5] * 6)])
